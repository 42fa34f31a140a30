"""The second route: quadrature over the scales, with exact moments of the network phasor.

The rows' weights depend on s_site and s_local only, so that for each pair of these the
models' common errors are turned onto the axes on which their information is diagonal;
every value of s_common is then a sum of closed-form terms.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import logsumexp, ndtr

from massfit.posterior.likelihood import LinearModel, information, log_scale_prior

NODES = (25, 17, 25)
"""Nodes of the quadrature along s_site, s_local and s_common."""

_EDGE = 1e-5  # of the largest marginal density: what lies outside moves no moment by 1e-3 of a standard deviation


@dataclass(frozen=True)
class ScalePosterior:
    """The posterior of the scales on nodes, and that of the network phasor given each.

    Parameters
    ----------
    log_scales : (n_node, 3) array
        Natural logarithms of the scales in Pa.
    weight : (n_node,) array
        Posterior masses, sum 1.
    node_mean : (n_node, 2) array
        Pa.
    node_covariance : (n_node, 2, 2) array
        Pa2.
    log_evidence : float
    """

    log_scales: NDArray[np.float64]
    weight: NDArray[np.float64]
    node_mean: NDArray[np.float64]
    node_covariance: NDArray[np.float64]
    log_evidence: float

    @property
    def mean(self) -> NDArray[np.float64]:
        """(2,), Pa."""
        return np.asarray(self.weight @ self.node_mean)

    @property
    def scale_covariance(self) -> NDArray[np.float64]:
        """(2, 2), Pa2: what not knowing the scales adds."""
        shift = self.node_mean - self.mean
        return np.asarray((self.weight[:, None] * shift).T @ shift)

    @property
    def covariance(self) -> NDArray[np.float64]:
        """(2, 2), Pa2."""
        return np.asarray(np.einsum("n,nij->ij", self.weight, self.node_covariance) + self.scale_covariance)

    def quantiles(self, probabilities: NDArray[np.float64]) -> NDArray[np.float64]:
        """Quantiles (n, 2) of the two components, Pa, of the mixture over the nodes."""
        deviation = np.sqrt(np.diagonal(self.node_covariance, axis1=1, axis2=2))
        width = np.sqrt(np.diag(self.covariance))
        low, high = (np.tile(self.mean + sign * 12.0 * width, (len(probabilities), 1)) for sign in (-1.0, 1.0))
        for _ in range(60):  # bisection, to the last bit
            middle = 0.5 * (low + high)
            cumulative = np.einsum("n,qnc->qc", self.weight, ndtr((middle[:, None] - self.node_mean) / deviation))
            below = cumulative < np.asarray(probabilities)[:, None]
            low, high = np.where(below, middle, low), np.where(below, high, middle)
        return 0.5 * (low + high)


def scale_axes(has_contrasts: bool) -> Callable[[NDArray[np.float64]], NDArray[np.float64]]:
    """Coordinates in which the scales are explored.

    Parameters
    ----------
    has_contrasts : bool
        Whether some site carries more than one model.

    Returns
    -------
    callable
        From coordinates (n, 3) to log scales (n, 3), with a constant Jacobian. With
        contrasts the coordinates are the log scales. Without, the data see only
        s_site^2 + s_local^2, and the coordinates are half the logarithm of that sum, the
        logarithm of s_local^2 / s_site^2, and log s_common.
    """
    return _log_scales_of_sum if not has_contrasts else np.asarray


def _log_scales_of_sum(coordinates: NDArray[np.float64]) -> NDArray[np.float64]:
    total, ratio, common = np.moveaxis(coordinates, -1, 0)
    site = total - 0.5 * np.logaddexp(0.0, ratio)
    return np.stack([site, site + 0.5 * ratio, common], axis=-1)


@dataclass(frozen=True)
class _Profile:
    """The model at pairs of (s_site, s_local), with s_common still open."""

    log_density: NDArray[np.float64]  # (n,) at c = 0, A and a integrated out
    strength: NDArray[np.float64]  # (n, k) information on each axis of c
    push: NDArray[np.float64]  # (n, k) data on each axis
    lever: NDArray[np.float64]  # (n, 2, k) how A answers to each axis, Pa
    mean: NDArray[np.float64]  # (n, 2) of A at c = 0
    covariance: NDArray[np.float64]  # (n, 2, 2) of A at c = 0


def _profile(model: LinearModel, log_scales: NDArray[np.float64]) -> _Profile:
    gram, weighted, log_density = information(model, log_scales)
    inner = np.eye(4) + gram[:, :4, :4]
    solved = np.linalg.solve(inner, np.concatenate([gram[:, :4, 4:], weighted[:, :4, None]], axis=2))
    response, centre = solved[:, :, :-1], solved[:, :, -1]
    left = gram[:, 4:, 4:] - np.swapaxes(gram[:, :4, 4:], 1, 2) @ response
    strength, axes = np.linalg.eigh(0.5 * (left + np.swapaxes(left, 1, 2)))
    push = np.einsum("nij,ni->nj", axes, weighted[:, 4:] - np.einsum("nij,ni->nj", gram[:, :4, 4:], centre))
    quadratic = np.einsum("ni,ni->n", weighted[:, :4], centre)
    sd = model.annual_sd
    return _Profile(
        log_density - 0.5 * np.linalg.slogdet(inner)[1] + 0.5 * quadratic,
        np.maximum(strength, 0.0),
        push,
        -sd * (response @ axes)[:, :2],
        sd * centre[:, :2],
        np.asarray(sd**2 * np.linalg.inv(inner)[:, :2, :2]),
    )


def _log_likelihood(profile: _Profile, common_variance: NDArray[np.float64]) -> NDArray[np.float64]:
    """Log marginal likelihood (n, n_common) of the pairs with every s_common^2."""
    growth = 1.0 + common_variance[:, None] * profile.strength[:, None, :]
    gain = common_variance[:, None] * profile.push[:, None, :] ** 2 / growth
    return np.asarray(profile.log_density[:, None] + 0.5 * (gain - np.log(growth)).sum(axis=2))


def _moments(
    profile: _Profile, common_variance: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Mean (n, n_common, 2) and covariance (n, n_common, 2, 2) of A."""
    spread = common_variance[:, None] / (1.0 + common_variance[:, None] * profile.strength[:, None, :])
    mean = profile.mean[:, None] + np.einsum("npk,nck->npc", spread * profile.push[:, None, :], profile.lever)
    extra = np.einsum("npk,nck,ndk->npcd", spread, profile.lever, profile.lever)
    return mean, profile.covariance[:, None] + extra


def integrate_scales(
    model: LinearModel, prior_scales: NDArray[np.float64], nodes: tuple[int, int, int] = NODES
) -> ScalePosterior:
    """Integrate the scales out on a grid laid over their posterior.

    The trapezoid rule in the logarithms converges exponentially because the integrand
    falls off smoothly on all sides (Trefethen & Weideman 2014, SIAM Review 56, 385-458).

    Parameters
    ----------
    model : LinearModel
    prior_scales : (3,) array
        Scales of the half-t priors of s_site, s_local and s_common, Pa.
    nodes : tuple of int
        Nodes along the three axes.

    Returns
    -------
    ScalePosterior
    """
    to_log_scales = scale_axes(model.has_contrasts)
    low, high = _widest_box(model.has_contrasts, prior_scales)
    for _ in range(12):
        axes = [np.linspace(a, b, n) for a, b, n in zip(low, high, nodes, strict=True)]
        grid = to_log_scales(np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1))
        profile = _profile(model, grid[:, :, 0].reshape(-1, 3))
        common_variance = np.exp(2.0 * axes[2])
        log_mass = _log_likelihood(profile, common_variance).reshape(nodes) + log_scale_prior(grid, prior_scales)
        narrower = _box_of_mass(log_mass, grid, axes, prior_scales)
        settled = np.all(narrower[1] - narrower[0] > 0.85 * (high - low))
        if settled:
            break
        low, high = narrower
    total = logsumexp(log_mass)
    mean, covariance = _moments(profile, common_variance)
    weight = np.exp(log_mass - total).ravel()
    kept = weight > 1e-10
    cell = np.log([axis[1] - axis[0] for axis in axes]).sum()
    return ScalePosterior(
        grid.reshape(-1, 3)[kept],
        weight[kept] / weight[kept].sum(),
        mean.reshape(-1, 2)[kept],
        covariance.reshape(-1, 2, 2)[kept],
        float(total + cell - (0.0 if model.has_contrasts else np.log(2.0))),
    )


def _widest_box(
    has_contrasts: bool, prior_scales: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    low, high = np.log(prior_scales) - 13.0, np.log(prior_scales) + 7.0
    if not has_contrasts:
        low[1], high[1] = -26.0, 26.0
        high[0] = max(high[0], np.log(prior_scales[1]) + 7.0)
    return low, high


def _box_of_mass(
    log_mass: NDArray[np.float64],
    grid: NDArray[np.float64],
    axes: list[NDArray[np.float64]],
    prior_scales: NDArray[np.float64],
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Bounds outside which the mass, counted with the variance it carries, is negligible."""
    # a large scale carries its square into the covariance of A, so far tails count more
    carried = log_mass + np.logaddexp(0.0, 2.0 * (grid - np.log(prior_scales)).max(axis=-1))
    mass = np.exp(carried - carried.max())
    low, high = [], []
    for i, axis in enumerate(axes):
        marginal = mass.sum(axis=tuple(j for j in range(3) if j != i))
        inside = np.flatnonzero(marginal > _EDGE * marginal.max())
        step = axis[1] - axis[0]
        low.append(max(axis[0], axis[inside[0]] - step))
        high.append(min(axis[-1], axis[inside[-1]] + step))
    return np.array(low), np.array(high)
