"""How each site stands to the others, and which sites a single Gaussian does not describe."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.convergence import worse
from massfit.posterior.importance import ScalePosterior
from massfit.posterior.likelihood import base_variance, collapse, units
from massfit.posterior.regression import FREEDOM, Condition, LinearModel, without_site

Floats = NDArray[np.float64]

OUTLIER_SD = 150.0
"""Extra scatter of a site that is wrong, Pa per component."""

OUTLIER_PRIOR = 0.05
"""Probability, before its phasor is seen, that a site is wrong."""

_NODES = 150  # of each load member, on which a site is predicted from the others


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
    model: LinearModel, posteriors: Sequence[ScalePosterior], single: LinearModel | None = None
) -> list[SiteCheck]:
    """Compare every site with the prediction from the others.

    Parameters
    ----------
    model : LinearModel
    posteriors : sequence of ScalePosterior
        One a load member.
    single : LinearModel, optional
        The same network with one Gaussian for every site; needed where some enter by their mixture.

    Returns
    -------
    list of SiteCheck
        One a site. The scales are those of the other sites: the nodes are weighed again
        by one over the density that the other sites give the site's own phasors.
    """
    nodes = [posterior.equal_nodes(_NODES, seed=k)[0] for k, posterior in enumerate(posteriors)]
    density = [collapse(model, condition).log_likelihood for condition in nodes]
    checks = []
    for s in range(len(model.sharing.place)):
        others = without_site(model, s)
        pairs = zip(nodes, density, strict=True)
        predictions = [_predicted_residual(single or model, others, s, condition, own) for condition, own in pairs]
        residual, covariance = _pool(np.array([r for r, _ in predictions]), np.array([v for _, v in predictions]))
        checks.append(SiteCheck(_standardised(residual, covariance), _outlier_probability(residual, covariance)))
    return checks


def _predicted_residual(
    model: LinearModel, others: LinearModel, site: int, condition: Condition, density: Floats
) -> tuple[Floats, Floats]:
    """Residual (2,) of the site's mean over models and its predicted covariance (2, 2), on its own axes."""
    rest = collapse(others, condition)
    gain = rest.log_likelihood - density
    weight = np.exp(gain - gain.max())
    residual, covariance = _predict(model, rest.root, site, condition)
    return _pool(residual, covariance, weight / weight.sum())


def _predict(model: LinearModel, root: Floats, site: int, condition: Condition) -> tuple[Floats, Floats]:
    chosen = np.flatnonzero(model.rows.site[: model.rows.mean_count] == site)
    if model.student:
        # the variance of Student scatter: what the site's own stretch came to is not known from the others
        stretch = condition.stretch.copy()
        stretch[:, model.sharing.place[site]] = FREEDOM / (FREEDOM - 2.0)
        own_condition = Condition(condition.log_scales, stretch, condition.part, condition.member)
    else:
        own_condition = condition
    base, _, scatter = base_variance(model, own_condition)
    design = model.design[condition.member[0]][chosen] * units(model, condition)[:, None]
    turned = np.linalg.solve(root[:, :-1, :-1], np.swapaxes(design, 1, 2))
    residual = model.rows.value[chosen] - np.einsum("np,npr->nr", root[:, -1, :-1], turned)
    own = (base + scatter)[:, chosen]
    return residual, np.swapaxes(turned, 1, 2) @ turned + own[:, :, None] * np.eye(2)


def _pool(residuals: Floats, covariances: Floats, weight: Floats | None = None) -> tuple[Floats, Floats]:
    """Mean (2,) and covariance (2, 2) of a mixture."""
    masses = np.full(len(residuals), 1.0 / len(residuals)) if weight is None else weight
    mean = masses @ residuals
    shift = residuals - mean
    return mean, np.einsum("n,nij->ij", masses, covariances) + (masses[:, None] * shift).T @ shift


def _standardised(residual: Floats, covariance: Floats) -> float:
    return float(np.sqrt(residual @ np.linalg.solve(covariance, residual) / 2.0))


def _outlier_probability(residual: Floats, covariance: Floats) -> float:
    """Probability 0.05 N(r; 0, V + 1.5^2 I hPa2) / [that + 0.95 N(r; 0, V)]."""

    def log_density(v: Floats) -> float:
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


def mixture_effect(model: LinearModel, mixed: LinearModel, condition: Condition, site: int) -> MixtureEffect:
    """Put one site's mixture in the place of its single Gaussian; the others and the scales stay.

    Parameters
    ----------
    model : LinearModel
        One Gaussian for every site.
    mixed : LinearModel
        The same, but this site by its mixture.
    condition : Condition
        One point: the scales and stretches at the posterior.
    site : int

    Returns
    -------
    MixtureEffect
    """
    mean, covariance = (moment[0] for moment in collapse(model, condition).moments())
    log_weight = mixed.rows.log_weight[site]
    points = condition.take(np.zeros(len(log_weight), dtype=np.int64))
    part = points.part.copy()
    part[:, site] = np.arange(len(log_weight))
    collapsed = collapse(mixed, replace(points, part=part))
    log_mass = collapsed.log_likelihood + log_weight
    mass = np.exp(log_mass - log_mass.max())
    other_mean, other_covariance = _pool(*collapsed.moments(), mass / mass.sum())
    sd = np.sqrt(np.diag(covariance))
    ratio = np.sqrt(np.diag(other_covariance)) / sd
    return MixtureEffect(worse((other_mean - mean) / sd), float(np.exp(worse(np.log(ratio)))))
