"""Whether the draws can be trusted: R-hat, effective sample sizes, length, and the second route.

Walkers of one ensemble move each other and are no chains; the independent ensembles
are. For R-hat each ensemble is laid out step by step, so that its halves are the early
and the late steps. For the effective sample size it is laid out walker by walker, so
that neighbours in the sequence are successive steps of one walker and their correlation
is seen; laid out step by step the correlation would hide at lags of one ensemble, where
the sum of autocorrelations has long been cut off.
"""

from dataclasses import dataclass

import emcee
import numpy as np
from arviz_stats.base import array_stats  # type: ignore[attr-defined]
from numpy.typing import NDArray

from massfit.posterior.quadrature import ScalePosterior

RHAT_MAX = 1.01
ESS_MIN = 400.0
LENGTH_MIN = 50.0
"""Thresholds of Vehtari et al. (2021, Bayesian Analysis 16, 667-718); lengths in autocorrelation times as
Foreman-Mackey et al. (2013, PASP 125, 306-312) advise."""

SHIFT_MAX, RATIO_MAX = 0.1, 0.06
"""Largest disagreement of the two routes: four Monte Carlo errors of the fewest draws that a run keeps."""


@dataclass(frozen=True)
class Convergence:
    """Diagnostics of the draws; the worst over quantities, components and members.

    Parameters
    ----------
    rhat_max, ess_bulk_min, ess_tail_min : float
        Rank-normalised split R-hat and effective sample sizes over the two components of
        A, the log scales and the log posterior.
    length_min : float
        Length of the run in autocorrelation times of the ensemble.
    second_route_mean_shift_sd : float
        Mean of the draws less that of the quadrature, in standard deviations.
    second_route_sd_ratio : float
        Half-width of the central 68.27 % of the draws over that of the quadrature: the
        ratio of standard deviations that heavy tails cannot upset.
    """

    rhat_max: float
    ess_bulk_min: float
    ess_tail_min: float
    length_min: float
    second_route_mean_shift_sd: float
    second_route_sd_ratio: float

    @property
    def converged(self) -> bool:
        """Whether every threshold is met."""
        return not self.failures()

    def failures(self) -> tuple[str, ...]:
        """Say in words what is not met."""
        checks = (
            (self.rhat_max <= RHAT_MAX, f"R-hat is {self.rhat_max:.3f}; allowed is {RHAT_MAX}"),
            (
                min(self.ess_bulk_min, self.ess_tail_min) >= ESS_MIN,
                f"{self.ess_bulk_min:.0f} effective draws of the bulk and {self.ess_tail_min:.0f} of the tails; "
                f"needed are {ESS_MIN:.0f}",
            ),
            (
                self.length_min >= LENGTH_MIN,
                f"the run lasts {self.length_min:.0f} autocorrelation times; needed are {LENGTH_MIN:.0f}",
            ),
            (
                abs(self.second_route_mean_shift_sd) <= SHIFT_MAX,
                f"the means of the two routes differ by {self.second_route_mean_shift_sd:.3f} standard deviations; "
                f"allowed is {SHIFT_MAX}",
            ),
            (
                abs(np.log(self.second_route_sd_ratio)) <= RATIO_MAX,
                f"the widths of the two routes have the ratio {self.second_route_sd_ratio:.3f}; "
                f"allowed is {RATIO_MAX:.0%} of difference",
            ),
        )
        return tuple(text for met, text in checks if not met)


def autocorrelation_steps(chains: NDArray[np.float64]) -> float:
    """Longest autocorrelation time of the coordinates, in steps.

    Parameters
    ----------
    chains : (n_ensemble, n_step, n_walker, n_coordinate) array

    Returns
    -------
    float
        Mean over the ensembles, largest over the coordinates.
    """
    times = [emcee.autocorr.integrated_time(chain, tol=0) for chain in chains]
    return float(np.mean(times, axis=0).max())


def diagnose(
    annual: NDArray[np.float64],
    log_scales: NDArray[np.float64],
    log_posterior: NDArray[np.float64],
    length: float,
    second_route: ScalePosterior,
) -> Convergence:
    """Diagnostics of one member's draws.

    Parameters
    ----------
    annual : (n_ensemble, n_step, n_walker, 2) array
        Pa.
    log_scales : (n_ensemble, n_step, n_walker, 3) array
    log_posterior : (n_ensemble, n_step, n_walker) array
    length : float
        Autocorrelation times.
    second_route : ScalePosterior

    Returns
    -------
    Convergence
    """
    everything = np.concatenate([annual, log_scales, log_posterior[..., None]], axis=-1)
    quantities = np.moveaxis(everything, -1, 0)
    shape = (*quantities.shape[:2], -1)
    by_step = quantities.reshape(shape)
    by_walker = np.swapaxes(quantities, 2, 3).reshape(shape)
    shift, ratio = compare_routes(annual.reshape(-1, 2), second_route)
    return Convergence(
        float(np.max(array_stats.rhat(by_step))),  # type: ignore[no-untyped-call]
        float(np.min(array_stats.ess(by_walker, method="bulk"))),  # type: ignore[no-untyped-call]
        float(np.min(array_stats.ess(by_walker, method="tail", prob=(0.05, 0.95)))),  # type: ignore[no-untyped-call]
        length,
        shift,
        ratio,
    )


def compare_routes(draws: NDArray[np.float64], second_route: ScalePosterior) -> tuple[float, float]:
    """Mean shift in standard deviations and ratio of widths, each of the worse component.

    Parameters
    ----------
    draws : (n, 2) array
        Pa.
    second_route : ScalePosterior

    Returns
    -------
    shift, ratio : float
    """
    tails = np.array([0.158655, 0.841345])
    width = np.diff(np.quantile(draws, tails, axis=0), axis=0)[0]
    reference = np.diff(second_route.quantiles(tails), axis=0)[0]
    shift = (draws.mean(axis=0) - second_route.mean) / np.sqrt(np.diag(second_route.covariance))
    return worse(shift), float(np.exp(worse(np.log(width / reference))))


def worse(values: NDArray[np.float64]) -> float:
    """Return the value farthest from zero, with its sign."""
    return float(values.ravel()[np.abs(values).argmax()])


def worst(members: list[Convergence]) -> Convergence:
    """Worst of every diagnostic over the members."""
    return Convergence(
        max(m.rhat_max for m in members),
        min(m.ess_bulk_min for m in members),
        min(m.ess_tail_min for m in members),
        min(m.length_min for m in members),
        worse(np.array([m.second_route_mean_shift_sd for m in members])),
        float(np.exp(worse(np.log([m.second_route_sd_ratio for m in members])))),
    )
