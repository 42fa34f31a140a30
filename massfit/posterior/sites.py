"""How each site stands to the others, and what its single Gaussian leaves out."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.convergence import worse
from massfit.posterior.likelihood import (
    LinearModel,
    annual_given_scales,
    joined,
    linear_model,
    log_likelihood,
    observation_rows,
    predict_site,
    without_site,
)
from massfit.posterior.observations import Observations
from massfit.posterior.quadrature import ScalePosterior

OUTLIER_SD = 150.0
"""Extra scatter of a site that is wrong, Pa per component."""

OUTLIER_PRIOR = 0.05
"""Probability, before its phasor is seen, that a site is wrong."""

_MASS = 0.995  # posterior mass of the scales that the leave-one-out sums cover


@dataclass(frozen=True)
class SiteCheck:
    """One site under the prediction from the other sites.

    Parameters
    ----------
    standardised_residual : float
        Root of half the squared whitened residual; near 1 for a site like the others.
    outlier_probability : float
    """

    standardised_residual: float
    outlier_probability: float


def leave_one_out(
    models: Sequence[LinearModel], posteriors: Sequence[ScalePosterior], site_count: int
) -> list[SiteCheck]:
    """Compare every site with the prediction from the others.

    Parameters
    ----------
    models : sequence of LinearModel
        One a load member.
    posteriors : sequence of ScalePosterior
    site_count : int

    Returns
    -------
    list of SiteCheck
        One a site. The scales are those of the other sites: the nodes are weighed again
        by one over the density that the other sites give the site's own phasors.
    """
    checks = []
    for s in range(site_count):
        predictions = [_predicted_residual(m, p, s) for m, p in zip(models, posteriors, strict=True)]
        residual, covariance = _pool(np.array([r for r, _ in predictions]), np.array([v for _, v in predictions]))
        checks.append(SiteCheck(_standardised(residual, covariance), _outlier_probability(residual, covariance)))
    return checks


def _predicted_residual(
    model: LinearModel, posterior: ScalePosterior, site: int
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Residual (2,) of the site's mean over models and its predicted covariance (2, 2)."""
    order = np.argsort(posterior.weight)[::-1]
    nodes = order[: np.searchsorted(np.cumsum(posterior.weight[order]), _MASS) + 1]
    log_scales = posterior.log_scales[nodes]
    others = without_site(model, site)
    gain = log_likelihood(others, log_scales) - log_likelihood(model, log_scales)
    weight = posterior.weight[nodes] * np.exp(gain - gain.max())
    residual, covariance = predict_site(model, others, site, log_scales)
    return _pool(residual, covariance, weight / weight.sum())


def _pool(
    residuals: NDArray[np.float64], covariances: NDArray[np.float64], weight: NDArray[np.float64] | None = None
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Mean (2,) and covariance (2, 2) of a mixture."""
    masses = np.full(len(residuals), 1.0 / len(residuals)) if weight is None else weight
    mean = masses @ residuals
    shift = residuals - mean
    return mean, np.einsum("n,nij->ij", masses, covariances) + (masses[:, None] * shift).T @ shift


def _standardised(residual: NDArray[np.float64], covariance: NDArray[np.float64]) -> float:
    return float(np.sqrt(residual @ np.linalg.solve(covariance, residual) / 2.0))


def _outlier_probability(residual: NDArray[np.float64], covariance: NDArray[np.float64]) -> float:
    """Probability 0.05 N(r; 0, V + 1.5^2 I hPa2) / [that + 0.95 N(r; 0, V)]."""

    def log_density(v: NDArray[np.float64]) -> float:
        return float(-0.5 * (np.linalg.slogdet(v)[1] + residual @ np.linalg.solve(v, residual)))

    odds = np.log(1.0 / OUTLIER_PRIOR - 1.0) + log_density(covariance)
    odds -= log_density(covariance + OUTLIER_SD**2 * np.eye(2))
    return float(np.exp(-np.logaddexp(0.0, odds)))


@dataclass(frozen=True)
class MixtureEffect:
    """What the network answer would do if one site kept its mixture.

    Parameters
    ----------
    shift_sd : float
        Shift of the mean in standard deviations, of the component that moves more.
    sd_ratio : float
        Ratio of standard deviations, of the component that moves more.
    """

    shift_sd: float
    sd_ratio: float


def mixture_effects(
    observations: Observations, model: LinearModel, admittance: NDArray[np.complex128], log_scales: NDArray[np.float64]
) -> list[MixtureEffect]:
    """Replace each site's single Gaussian in turn by its mixture; the others and the scales stay.

    Parameters
    ----------
    observations : Observations
    model : LinearModel
        With the admittances given.
    admittance : (n_site,) array of complex
    log_scales : (3,) array
        Scales at the posterior.

    Returns
    -------
    list of MixtureEffect
    """
    scales = log_scales[None]
    mean, covariance = (moment[0] for moment in annual_given_scales(model, scales))
    sd = np.sqrt(np.diag(covariance))
    effects = []
    for s in range(len(observations.sites)):
        used = np.flatnonzero(observations.weight[s] > 0)
        if len(used) == 1:
            effects.append(MixtureEffect(0.0, 1.0))
            continue
        others = without_site(model, s)
        variants = [joined(others, _site_at_part(observations, model, admittance, s, int(k))) for k in used]
        log_weight = np.log(observations.weight[s, used]) + [log_likelihood(v, scales)[0] for v in variants]
        moments = [annual_given_scales(v, scales) for v in variants]
        weight = np.exp(log_weight - log_weight.max())
        other_mean, other_covariance = _pool(
            np.concatenate([m for m, _ in moments]), np.concatenate([c for _, c in moments]), weight / weight.sum()
        )
        ratio = np.sqrt(np.diag(other_covariance)) / sd
        effects.append(MixtureEffect(worse((other_mean - mean) / sd), float(np.exp(worse(np.log(ratio))))))
    return effects


def _site_at_part(
    observations: Observations, model: LinearModel, admittance: NDArray[np.complex128], site: int, part: int
) -> LinearModel:
    """Build the regression of one site at one part of its mixture."""
    alone = np.arange(len(observations.sites)) == site
    weight = (np.arange(observations.weight.shape[1]) == part).astype(float)[None]
    rows = observation_rows(replace(observations.select(alone), weight=weight))
    return linear_model(
        rows, admittance[alone], annual_sd=model.annual_sd, atmosphere_sd=model.atmosphere_sd, truth=model.truth
    )
