"""The second route: importance-weighted nodes over the scales, with exact moments of the network phasor on each.

The scales are drawn from a mixture of Student kernels that is fitted to their posterior in a few rounds (Cappe et al.
2004, Journal of Computational and Graphical Statistics 13, 907-929). Given them, the stretch of each place's scatter
and the part of each site's mixture are drawn place by place from their density under the prediction from everything
else (:mod:`massfit.posterior.proposal`); what the sites share is integrated out exactly. The weights correct every
approximation, and their effective number says how good it was.
"""

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaincinv, gammaln, logsumexp, ndtr, ndtri

from massfit.posterior.likelihood import Collapsed, collapse, log_latent_prior, log_scale_prior
from massfit.posterior.proposal import Prediction, predict_rows, propose_latents
from massfit.posterior.regression import Condition, LinearModel

Floats = NDArray[np.float64]

DRAWS = 2000
"""Nodes of a full run."""

ROUNDS = (500, 500, 700)
"""Draws of the rounds in which the proposal is fitted."""

ENOUGH = 250.0
"""Effective nodes below which a run draws again, more."""

_KERNELS = 64
_KERNEL_FREEDOM = 5.0  # heavier tails than those of any scale's posterior in its logarithm
_BLOCK = 256  # points at a time: their matrices stay in the cache of the processor
_LEAST_EFFECTIVE = 40.0  # weights are flattened until a round has this many


@dataclass(frozen=True)
class ScalePosterior:
    """The posterior of the scales on weighted nodes, and that of the network phasor given each.

    Parameters
    ----------
    log_scales : (n_node, n_scale) array
        Natural logarithms of the scales in Pa.
    stretch : (n_node, n_place) array
        Variance of each place's scatter in units of s_site^2.
    part : (n_node, n_site) array of int
        Part of each site's mixture.
    member : int
        Load member.
    weight : (n_node,) array
        Posterior masses, sum 1.
    node_mean : (n_node, 2) array
        Pa.
    node_covariance : (n_node, 2, 2) array
        Pa2.
    log_evidence : float
    """

    log_scales: Floats
    stretch: Floats
    part: NDArray[np.int64]
    member: int
    weight: Floats
    node_mean: Floats
    node_covariance: Floats
    log_evidence: float

    @property
    def condition(self) -> Condition:
        """The nodes as points of the regression."""
        return Condition(self.log_scales, self.stretch, self.part, np.full(len(self.weight), self.member))

    @property
    def effective_nodes(self) -> float:
        """Effective number of nodes (Kish)."""
        return float(1.0 / (self.weight**2).sum())

    @property
    def mean(self) -> Floats:
        """(2,), Pa."""
        return np.asarray(self.weight @ self.node_mean)

    @property
    def standard_error(self) -> Floats:
        """(2,), Pa, of the mean, by the spread of the weighted nodes."""
        return np.asarray(np.sqrt(self.weight**2 @ (self.node_mean - self.mean) ** 2))

    @property
    def scale_covariance(self) -> Floats:
        """(2, 2), Pa2: what not knowing the scales, stretches and parts adds."""
        shift = self.node_mean - self.mean
        return np.asarray((self.weight[:, None] * shift).T @ shift)

    @property
    def covariance(self) -> Floats:
        """(2, 2), Pa2."""
        return np.asarray(np.einsum("n,nij->ij", self.weight, self.node_covariance) + self.scale_covariance)

    def quantiles(self, probabilities: Floats) -> Floats:
        """Quantiles (n, 2) of the two components, Pa, of the mixture over the nodes."""
        return mixture_quantiles(probabilities, self.weight, self.node_mean, self.node_covariance)

    def equal_nodes(self, count: int, seed: int) -> tuple[Condition, NDArray[np.int64]]:
        """Draw nodes of equal weight, with their indices."""
        chosen = _systematic(self.weight, count, np.random.default_rng(seed))
        return self.condition.take(chosen), chosen


def mixture_quantiles(probabilities: Floats, weight: Floats, mean: Floats, covariance: Floats) -> Floats:
    """Quantiles (n, 2) of each component of a mixture of normal distributions.

    Parameters
    ----------
    probabilities : (n,) array
    weight : (n_node,) array
        Sum 1.
    mean : (n_node, 2) array
    covariance : (n_node, 2, 2) array

    Returns
    -------
    (n, 2) array
    """
    deviation = np.sqrt(np.diagonal(covariance, axis1=1, axis2=2))
    centre = weight @ mean
    width = np.sqrt(weight @ (deviation**2 + (mean - centre) ** 2))
    low, high = (np.tile(centre + sign * 12.0 * width, (len(probabilities), 1)) for sign in (-1.0, 1.0))
    for _ in range(40):  # bisection, to 1e-11 of the width
        middle = 0.5 * (low + high)
        cumulative = np.einsum("n,qnc->qc", weight, ndtr((middle[:, None] - mean) / deviation))
        below = cumulative < np.asarray(probabilities)[:, None]
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    return 0.5 * (low + high)


@dataclass(frozen=True)
class Proposal:
    """Where the nodes are drawn: kernels over the log scales, and what is predicted of every row.

    Parameters
    ----------
    centre : (n_kernel, n_scale) array
    root : (n_scale, n_scale) array
        Cholesky factor of the kernels' scale matrix.
    prediction : Prediction
    """

    centre: Floats
    root: Floats
    prediction: Prediction

    def draw(self, count: int, rng: np.random.Generator) -> Floats:
        """Draw log scales (count, n_scale)."""
        size = self.centre.shape[1]
        chosen = (np.arange(count) * len(self.centre)) // count
        points = _spread_points(count, size + 1, rng)
        stretch = np.sqrt(0.5 * _KERNEL_FREEDOM / gammaincinv(0.5 * _KERNEL_FREEDOM, points[:, -1:]))
        return np.asarray(self.centre[chosen] + stretch * ndtri(points[:, :-1]) @ self.root.T)

    def log_density(self, log_scales: Floats) -> Floats:
        """Log density (n,) of the kernels' mixture."""
        size, nu = self.centre.shape[1], _KERNEL_FREEDOM
        inverse = np.linalg.inv(self.root)
        turned, centre = log_scales @ inverse.T, self.centre @ inverse.T
        square = (turned**2).sum(axis=1)[:, None] + (centre**2).sum(axis=1) - 2.0 * turned @ centre.T
        kernel = -0.5 * (nu + size) * np.log1p(np.maximum(square, 0.0) / nu)
        constant = gammaln(0.5 * (nu + size)) - gammaln(0.5 * nu) - 0.5 * size * np.log(nu * np.pi)
        constant += np.log(np.diag(inverse)).sum() - np.log(len(self.centre))
        return np.asarray(logsumexp(kernel, axis=1) + constant)


@dataclass(frozen=True)
class _Sample:
    condition: Condition
    collapsed: Collapsed
    log_weight: Floats


def integrate_scales(
    model: LinearModel,
    prior_scales: Floats,
    *,
    member: int = 0,
    rng: np.random.Generator | None = None,
    draws: int = DRAWS,
    start: Proposal | None = None,
) -> ScalePosterior:
    """Integrate the scales, stretches and parts out of one load member.

    Parameters
    ----------
    model : LinearModel
    prior_scales : (n_scale,) array
        Scales of the half-t priors, Pa.
    member : int
    rng : numpy.random.Generator, optional
        By default always the same.
    draws : int
        Nodes.
    start : Proposal, optional
        From :func:`fit_proposal` on a network like this one; saves the rounds in which one is fitted.

    Returns
    -------
    ScalePosterior
    """
    rng = np.random.default_rng(0) if rng is None else rng
    proposal = fit_proposal(model, prior_scales, member=member, rng=rng) if start is None else start
    for more in (1, 2, 4):
        sample = _sample(model, prior_scales, member, proposal, more * draws, rng)
        weight = _normalised(sample.log_weight)
        if 1.0 / (weight**2).sum() >= min(ENOUGH, 0.2 * draws):
            break
        proposal = _refitted(model, sample, rng)
    mean, covariance = sample.collapsed.moments()
    kept = weight > 1e-9
    condition = sample.condition.take(kept)
    return ScalePosterior(
        condition.log_scales,
        condition.stretch,
        condition.part,
        member,
        weight[kept] / weight[kept].sum(),
        mean[kept],
        covariance[kept],
        float(logsumexp(sample.log_weight) - np.log(len(weight))),
    )


def fit_proposal(
    model: LinearModel,
    prior_scales: Floats,
    *,
    member: int = 0,
    rng: np.random.Generator,
    like: Proposal | None = None,
) -> Proposal:
    """Fit a proposal to the posterior of one load member in rounds.

    Parameters
    ----------
    model : LinearModel
    prior_scales : (n_scale,) array
        Pa.
    member : int
    rng : numpy.random.Generator
    like : Proposal, optional
        Of a network whose scales should be much like those of this one: the first round is skipped. Its s_group is
        left out where this one has none.

    Returns
    -------
    Proposal
    """
    size = len(prior_scales)
    start = np.log(prior_scales) if like is None else like.centre.mean(axis=0)[:size]
    at_start = model.at(start[None], member)
    prediction = predict_rows(model, at_start, collapse(model, at_start), rng, draws=200)
    if like is None:
        # the prior itself: half-t scales, wide enough to begin with
        centre = start + np.log(np.abs(rng.standard_t(4.0, size=(4 * _KERNELS, size))) + 1e-3)
        proposal = Proposal(centre, 0.5 * np.eye(size), prediction)
    else:
        proposal = Proposal(like.centre[:, :size], like.root[:size, :size], prediction)
    for count in ROUNDS if like is None else ROUNDS[1:]:
        sample = _sample(model, prior_scales, member, proposal, count, rng)
        proposal = _refitted(model, sample, rng)
    return proposal


def _sample(
    model: LinearModel, prior_scales: Floats, member: int, proposal: Proposal, count: int, rng: np.random.Generator
) -> _Sample:
    log_scales = proposal.draw(count, rng)
    ratio = log_scales - np.log(prior_scales)
    # no mass lies beyond (the prior leaves 1e-13 above), but the solves lose their digits there
    inside = (ratio.max(axis=1) < 8.0) & (ratio.min(axis=1) > -30.0)
    blocks = np.array_split(log_scales[inside], max(1, count // _BLOCK))
    parts = [_weighted(model, prior_scales, proposal, model.at(block, member), rng) for block in blocks]
    return _Sample(
        Condition(*(np.concatenate([getattr(p.condition, f.name) for p in parts]) for f in fields(Condition))),
        Collapsed(
            np.concatenate([p.collapsed.root for p in parts]),
            np.concatenate([p.collapsed.log_likelihood for p in parts]),
            model.annual_sd,
        ),
        np.concatenate([p.log_weight for p in parts]) + np.log(inside.mean()),
    )


def _weighted(
    model: LinearModel, prior_scales: Floats, proposal: Proposal, condition: Condition, rng: np.random.Generator
) -> _Sample:
    condition, log_proposal = propose_latents(model, condition, proposal.prediction, rng)
    collapsed = collapse(model, condition)
    log_weight = collapsed.log_likelihood + log_latent_prior(model, condition) - log_proposal
    log_weight += log_scale_prior(condition.log_scales, prior_scales) - proposal.log_density(condition.log_scales)
    return _Sample(condition, collapsed, log_weight)


def _refitted(model: LinearModel, sample: _Sample, rng: np.random.Generator) -> Proposal:
    """Fit kernels and prediction to a sample whose weights are flattened until enough of it counts."""
    weight = _flattened(sample.log_weight)
    chosen = _systematic(weight, _KERNELS, rng)
    log_scales = sample.condition.log_scales
    shift = log_scales - weight @ log_scales
    covariance = (weight[:, None] * shift).T @ shift + 1e-4 * np.eye(log_scales.shape[1])
    size = log_scales.shape[1]
    # normal-reference bandwidth of that many kernels (Scott 1992, Multivariate Density Estimation)
    bandwidth = _KERNELS ** (-1.0 / (size + 4.0))
    equal = _systematic(weight, 200, rng)
    prediction = predict_rows(
        model,
        sample.condition.take(equal),
        Collapsed(sample.collapsed.root[equal], sample.collapsed.log_likelihood[equal], model.annual_sd),
        rng,
    )
    return Proposal(log_scales[chosen], bandwidth * np.linalg.cholesky(covariance), prediction)


def _spread_points(count: int, size: int, rng: np.random.Generator) -> Floats:
    """Evenly spread points (count, size) of the unit cube, every stretch of them too, shifted at random.

    Multiples of the powers of the inverse of the root of x^(size + 1) = x + 1 (Kronecker sequence of the generalised
    golden ratio; Marohnic & Strmecki 2012, arXiv:1208.3345).
    """
    ratio = 2.0
    for _ in range(60):
        ratio = (1.0 + ratio) ** (1.0 / (size + 1.0))
    points = (rng.random(size) + np.arange(1, count + 1)[:, None] * ratio ** -np.arange(1.0, size + 1.0)) % 1.0
    return np.asarray(np.clip(points, 1e-12, 1.0 - 1e-12))


def _normalised(log_weight: Floats) -> Floats:
    weight = np.exp(log_weight - log_weight.max())
    return np.asarray(weight / weight.sum())


def _flattened(log_weight: Floats) -> Floats:
    least = min(_LEAST_EFFECTIVE, 0.5 * len(log_weight))
    low, high = 0.0, 1.0
    if 1.0 / (_normalised(log_weight) ** 2).sum() < least:
        for _ in range(30):
            middle = 0.5 * (low + high)
            enough = 1.0 / (_normalised(middle * log_weight) ** 2).sum() >= least
            low, high = (middle, high) if enough else (low, middle)
        return _normalised(low * log_weight)
    return _normalised(log_weight)


def _systematic(weight: Floats, count: int, rng: np.random.Generator) -> NDArray[np.int64]:
    """Draw `count` indices in proportion to the weights, equally spaced along their sum."""
    places = (rng.random() + np.arange(count)) / count
    return np.minimum(np.searchsorted(np.cumsum(weight), places), len(weight) - 1)
