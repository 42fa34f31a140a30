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

from massfit.posterior.explore import EnsembleChains
from massfit.posterior.importance import ScalePosterior, mixture_quantiles

RHAT_MAX = 1.01
ESS_MIN = 400.0
LENGTH_MIN = 50.0
"""Thresholds of Vehtari et al. (2021, Bayesian Analysis 16, 667-718); lengths in autocorrelation times as
Foreman-Mackey et al. (2013, PASP 125, 306-312) advise."""

ERRORS_MAX, RATIO_MAX = 4.0, 0.03
"""Largest disagreement of the two routes: of their means in Monte Carlo errors, and of their widths."""

LEAST_ERROR = 0.0025
"""Error of the difference of the means, in standard deviations, that is always allowed for: weights that are normalised
by their own sum have a bias of the order of one over their number."""


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
        Mean by the first route less that by the second, in standard deviations; both by the exact conditional
        moments at the scales that the route visited.
    second_route_sd_ratio : float
        Half-width of the central 68.27 % by the first route over that by the second: the
        ratio of standard deviations that heavy tails cannot upset.
    second_route_mean_shift_errors : float
        The shift in its Monte Carlo standard errors.
    """

    rhat_max: float
    ess_bulk_min: float
    ess_tail_min: float
    length_min: float
    second_route_mean_shift_sd: float
    second_route_sd_ratio: float
    second_route_mean_shift_errors: float

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
                abs(self.second_route_mean_shift_errors) <= ERRORS_MAX,
                f"the means of the two routes differ by {self.second_route_mean_shift_sd:.3f} standard deviations, "
                f"{self.second_route_mean_shift_errors:.1f} of the Monte Carlo errors; allowed are {ERRORS_MAX:.0f}",
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


def diagnose(chains: EnsembleChains, member: int, second_route: ScalePosterior) -> Convergence:
    """Diagnostics of one member's draws.

    Parameters
    ----------
    chains : EnsembleChains
        All ensembles.
    member : int
    second_route : ScalePosterior

    Returns
    -------
    Convergence
    """
    log_scales = chains.log_scales[:, member]
    everything = np.concatenate(
        [chains.annual[:, member], log_scales[:, chains.kept], chains.log_posterior[:, member, ..., None]], axis=-1
    )
    by_walker = _by_walker(everything)
    shift, errors, ratio = compare_routes(chains.node_mean[:, member], chains.node_covariance[:, member], second_route)
    return Convergence(
        # laid out step by step
        float(np.max(array_stats.rhat(np.moveaxis(everything, -1, 0).reshape(by_walker.shape)))),  # type: ignore[no-untyped-call]
        float(np.min(array_stats.ess(by_walker, method="bulk"))),  # type: ignore[no-untyped-call]
        float(np.min(array_stats.ess(by_walker, method="tail", prob=(0.05, 0.95)))),  # type: ignore[no-untyped-call]
        log_scales.shape[1] / autocorrelation_steps(log_scales),
        shift,
        ratio,
        errors,
    )


def _by_walker(values: NDArray[np.float64]) -> NDArray[np.float64]:
    """From (n_ensemble, n_step, n_walker, n) to (n, n_ensemble, n_walker * n_step), walker by walker."""
    return np.moveaxis(values, (3, 0, 2, 1), (0, 1, 2, 3)).reshape(values.shape[3], values.shape[0], -1)


def compare_routes(
    node_mean: NDArray[np.float64], node_covariance: NDArray[np.float64], second_route: ScalePosterior
) -> tuple[float, float, float]:
    """Shift of the mean in standard deviations and in Monte Carlo errors, and ratio of widths, of the worse component.

    Parameters
    ----------
    node_mean : (n_ensemble, n_step, n_walker, 2) array
        Conditional mean at the scales visited, Pa.
    node_covariance : (n_ensemble, n_step, n_walker, 2, 2) array
        Pa2.
    second_route : ScalePosterior

    Returns
    -------
    shift, errors, ratio : float
    """
    means, covariances = node_mean.reshape(-1, 2), node_covariance.reshape(-1, 2, 2)
    sd = np.sqrt(np.diag(second_route.covariance))
    effective = array_stats.ess(_by_walker(node_mean), method="mean")  # type: ignore[no-untyped-call]
    square = means.var(axis=0) / effective + second_route.standard_error**2 + (LEAST_ERROR * sd) ** 2
    shift = means.mean(axis=0) - second_route.mean
    tails = np.array([0.158655, 0.841345])
    weight = np.full(len(means), 1.0 / len(means))
    width = np.diff(mixture_quantiles(tails, weight, means, covariances), axis=0)[0]
    reference = np.diff(second_route.quantiles(tails), axis=0)[0]
    return worse(shift / sd), worse(shift / np.sqrt(square)), float(np.exp(worse(np.log(width / reference))))


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
        worse(np.array([m.second_route_mean_shift_errors for m in members])),
    )
