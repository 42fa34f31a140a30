"""Integrate the scales out of subsets of a network, from what they are on fixed nodes."""

from collections.abc import Sequence
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.node_terms import NodeTable, NodeValues
from massfit.posterior.scale_rule import ScaleRule

Floats = NDArray[np.float64]

BLOCK = 512
"""Subsets and knots of s_group at a time: their matrices stay in the cache of the processor."""


@dataclass(frozen=True)
class SubsetMoments:
    """Posterior of A for each of n subsets, the scales integrated out.

    Parameters
    ----------
    mean : (n, 2) array
        Pa.
    covariance : (n, 2, 2) array
        Pa2.
    log_evidence : (n,) array
        Logarithm of the density of the subset's phasors.
    log_scales : (n, n_scale) array
        Posterior means of the logarithms of the scales in Pa.
    """

    mean: Floats
    covariance: Floats
    log_evidence: Floats
    log_scales: Floats

    def take(self, chosen: NDArray[np.int64]) -> "SubsetMoments":
        """Subsets of the indices given."""
        return SubsetMoments(*(getattr(self, f.name)[chosen] for f in fields(self)))

    @property
    def sd(self) -> Floats:
        """(n, 2), Pa."""
        return np.sqrt(np.diagonal(self.covariance, axis1=1, axis2=2))

    @property
    def width(self) -> Floats:
        """(n,), Pa: root of the mean variance of the two components."""
        return np.asarray(np.sqrt(0.5 * np.trace(self.covariance, axis1=1, axis2=2)))


def join_moments(blocks: Sequence[SubsetMoments]) -> SubsetMoments:
    """Put the subsets of several blocks one after the other."""
    return SubsetMoments(*(np.concatenate([getattr(block, f.name) for block in blocks]) for f in fields(SubsetMoments)))


def integrate_nodes(table: NodeTable, values: NodeValues) -> SubsetMoments:
    """Integrate the scales out of subsets.

    Parameters
    ----------
    table : NodeTable
    values : NodeValues

    Returns
    -------
    SubsetMoments
    """
    weight, log_evidence = node_weights(table, values.log_likelihood)
    a, b = values.mean
    square = values.covariance + np.stack([a * a, a * b, b * b])
    mean, square = (np.einsum("slcgn,aslcgn->an", weight, each) for each in (values.mean, square))
    covariance = square - np.stack([mean[0] ** 2, mean[0] * mean[1], mean[1] ** 2])
    scales = [np.einsum(f"slcgn,{axis}->n", weight, rule.knot) for axis, rule in zip("slcg", table.rules, strict=True)]
    log_scales = np.stack(scales[: table.model.scale_count], axis=1)
    return SubsetMoments(mean.T, covariance[[0, 1, 1, 2]].T.reshape(-1, 2, 2), log_evidence, log_scales)


def node_weights(table: NodeTable, log_likelihood: Floats) -> tuple[Floats, Floats]:
    """Posterior weights of the nodes: the integral over all cells, read back through the splines.

    Parameters
    ----------
    table : NodeTable
    log_likelihood : (n_site_knot, n_local_knot, n_common_knot, n_group_knot, n) array

    Returns
    -------
    weight : (n_site_knot, n_local_knot, n_common_knot, n_group_knot, n) array
        Sum 1 over the knots; some are a little negative, as weights of a spline are.
    log_evidence : (n,) array
    """
    site, local, *others = table.rules
    # s_local first, at each knot of the others: what is left is smooth in s_site
    by_site = [_over_cells(local, each) for each in log_likelihood]
    outer, given_site = _over_cells(site, np.array([each for each, _ in by_site]))
    top = outer.max(axis=(0, 1))
    mass = np.exp(outer - top) * others[0].mass[:, None, None] * others[1].mass[:, None]
    total = mass.sum(axis=(0, 1))
    weight = (given_site * (mass / total))[:, None] * np.array([each for _, each in by_site])
    return weight, top + np.log(total)


def _over_cells(rule: ScaleRule, log_density: Floats) -> tuple[Floats, Floats]:
    """Integrate the first axis (n_knot, ...) out: log of the integral (...), and weights (n_knot, ...), sum 1."""
    shape = log_density.shape
    cells = rule.spline @ log_density.reshape(shape[0], -1)
    top = cells.max(axis=0)
    mass = np.exp(cells - top) * rule.mass[:, None]
    total = mass.sum(axis=0)
    weight = (rule.spline.T @ mass) / total
    return (top + np.log(total)).reshape(shape[1:]), weight.reshape(shape)
