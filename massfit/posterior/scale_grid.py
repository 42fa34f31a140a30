"""A third route for normal scatter: a product grid over the scales, without any random number.

The posterior of a scale is smooth and even in the scale, so that the trapezoid rule in v, with the scale a multiple of
sinh v, converges faster than any power of its step, at v = 0 too (Trefethen & Weideman 2014, SIAM Review 56, 385-458).
Where the posterior lies is found on coarse grids, the same for all load members. The page carries the same steps in its
own script, so that both give the same numbers.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import logsumexp

from massfit.posterior.importance import ScalePosterior
from massfit.posterior.likelihood import collapse, log_scale_prior
from massfit.posterior.regression import LinearModel

Floats = NDArray[np.float64]

NODES = {3: (11, 11, 14), 4: (10, 10, 14, 8)}
"""Nodes of the axes of s_site, s_local, s_common and s_group, by the number of scales."""

_SEARCH = 7  # nodes of each axis while the posterior is looked for
_PASSES = 6
_HIGHEST = 8.7  # v: a scale 3000 times that of its prior, above which the prior leaves 1e-13
_LEAST = 1e-8  # of the largest marginal weight, below which an axis ends
_SMALLEST = 1e-4  # stands for a scale of zero, in units: a variance needs its digits
_UNIT = 0.5  # of the mean scale: below, nodes are evenly spaced
_BLOCK = 512  # nodes at a time: their matrices stay in the cache of the processor


def integrate_on_grid(model: LinearModel, prior_scales: Floats) -> list[ScalePosterior]:
    """Integrate the scales of every load member on one grid.

    Parameters
    ----------
    model : LinearModel
        Of normal scatter, every site with one part.
    prior_scales : (n_scale,) array
        Scales of the half-t priors, Pa.

    Returns
    -------
    list of ScalePosterior
        One a load member.
    """
    middle = replace(model, design=model.design.mean(axis=0, keepdims=True))
    axes = _axes(middle, prior_scales)
    return [_on_axes(model, prior_scales, axes, member) for member in range(model.member_count)]


@dataclass(frozen=True)
class _Axis:
    """Nodes of one scale: unit sinh(v), with v evenly spaced.

    Parameters
    ----------
    unit : float
        Pa; below, the nodes are evenly spaced in the scale, above in its logarithm.
    nodes : (n,) array
        v.
    """

    unit: float
    nodes: Floats

    @property
    def scales(self) -> Floats:
        """(n,), Pa."""
        return self.unit * np.maximum(np.sinh(self.nodes), _SMALLEST)

    @property
    def log_rule(self) -> Floats:
        """Logarithms (n,) of the weights of the trapezoid rule, for a density per unit of log scale."""
        rule = np.full(len(self.nodes), self.nodes[1] - self.nodes[0])
        rule[[0, -1]] *= 0.5
        # d log(sinh v) = dv / tanh v
        return np.asarray(np.log(rule * np.cosh(self.nodes) / np.maximum(np.sinh(self.nodes), _SMALLEST)))


def _axes(middle: LinearModel, prior_scales: Floats) -> list[_Axis]:
    """Nodes of every axis, about where the posterior at the mean admittance lies."""
    size = len(prior_scales)
    axes = [_Axis(float(prior), np.linspace(0.0, _HIGHEST, _SEARCH)) for prior in prior_scales]
    for passed in range(1, _PASSES + 1):
        weight = _on_axes(middle, prior_scales, axes, 0, every=True).weight.reshape([_SEARCH] * size)
        last = passed == _PASSES
        axes = [
            _closer(
                axis,
                weight.sum(axis=tuple(other for other in range(size) if other != place)),
                NODES[size][place] if last else _SEARCH,
                last=last,
            )
            for place, axis in enumerate(axes)
        ]
    return axes


def _closer(axis: _Axis, marginal: Floats, count: int, *, last: bool) -> _Axis:
    """Lay nodes where the weight is, evenly in the scale up to half its mean."""
    unit = _UNIT * float(marginal @ axis.scales)
    low, high = np.arcsinh(axis.unit * np.sinh(_ends(axis.nodes, marginal, last=last)) / unit)
    return _Axis(unit, np.linspace(low, high, count))


def _ends(nodes: Floats, marginal: Floats, *, last: bool) -> tuple[float, float]:
    """Find the ends of an axis: the nodes next to those that count; at last, where the weight falls below what counts.

    Between nodes the logarithm of the weight is taken as straight. That is too narrow while they lie far apart.
    """
    height = np.log(np.maximum(marginal / marginal.max(), 1e-300)) - np.log(_LEAST)
    counting = np.flatnonzero(height >= 0.0)
    low, high = (max(counting[0] - 1, 0), counting[0]), (counting[-1], min(counting[-1] + 1, len(nodes) - 1))
    if not last:
        return float(nodes[low[0]]), float(nodes[high[1]])
    return _crossing(nodes, height, *low), _crossing(nodes, height, *high)


def _crossing(axis: Floats, height: Floats, left: int, right: int) -> float:
    if left == right:
        return float(axis[left])
    share = height[left] / (height[left] - height[right])
    return float(axis[left] + share * (axis[right] - axis[left]))


def _on_axes(
    model: LinearModel, prior_scales: Floats, axes: Sequence[_Axis], member: int, *, every: bool = False
) -> ScalePosterior:
    log_scales = np.log(_product([axis.scales for axis in axes]))
    log_weight = _product([axis.log_rule for axis in axes]).sum(axis=1) + log_scale_prior(log_scales, prior_scales)
    parts = [collapse(model, model.at(block, member)) for block in _blocks(log_scales)]
    log_weight += np.concatenate([part.log_likelihood for part in parts])
    moments = [part.moments() for part in parts]
    mean, covariance = (np.concatenate([pair[k] for pair in moments]) for k in (0, 1))
    weight = np.exp(log_weight - log_weight.max())
    weight /= weight.sum()
    kept = np.ones(len(weight), dtype=bool) if every else weight > 1e-14
    condition = model.at(log_scales[kept], member)
    return ScalePosterior(
        condition.log_scales,
        condition.stretch,
        condition.part,
        member,
        weight[kept],
        mean[kept],
        covariance[kept],
        float(logsumexp(log_weight)),
    )


def _blocks(log_scales: Floats) -> list[Floats]:
    return np.array_split(log_scales, max(1, len(log_scales) // _BLOCK))


def _product(values: Sequence[Floats]) -> Floats:
    """Every combination (n, n_axis), the last axis fastest."""
    return np.stack(np.meshgrid(*values, indexing="ij"), axis=-1).reshape(-1, len(values))
