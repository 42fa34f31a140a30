"""Error of the network's answer when what a site says changes, or a site is added: rank-two updates on nodes.

Given the scales the posterior of everything linear is normal, so that other information at some rows changes its
covariance by the matrix inversion lemma, whatever the rows would read. The scales, the stretches of Student scatter and
the parts of mixtures are summed over nodes of equal weight of the posterior that the network has.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.importance import ScalePosterior
from massfit.posterior.likelihood import base_variance, collapse, units
from massfit.posterior.network_model import inflation, pooled_moments
from massfit.posterior.regression import Condition, LinearModel

Floats = NDArray[np.float64]

NODES = 120
"""Nodes of all load members together."""


@dataclass(frozen=True)
class SiteRows:
    """Mean over models of one site on its two axes, on n nodes.

    Parameters
    ----------
    design : (n, 2, n_column) array
        In units of the columns' scales.
    variance, scatter, record : (n, 2) array
        Pa2, of everything that is not in the columns; what of it is the scatter of the place, and what the record with
        the models' own weather.
    axes : (n, 2, 2) array
        Unit vectors in (in phase, quadrature).
    value : (n, 2) array
        Pa.
    """

    design: Floats
    variance: Floats
    scatter: Floats
    record: Floats
    axes: Floats
    value: Floats


@dataclass(frozen=True)
class NetworkError:
    """What the answer of a network rests on, node by node.

    Parameters
    ----------
    model : LinearModel
    condition : Condition
        n nodes, those of each load member together.
    unit : (n, n_column) array
        Scale of every column.
    mean : (n, n_column) array
        Of the columns, in prior standard deviations.
    covariance : (n, n_column, n_column) array
        The same.
    pooled_mean : (2,) array
        Of A, Pa, by all nodes of the second route.
    pooled_covariance : (2, 2) array
        Pa2.
    """

    model: LinearModel
    condition: Condition
    unit: Floats
    mean: Floats
    covariance: Floats
    pooled_mean: Floats
    pooled_covariance: Floats

    def __len__(self) -> int:
        return len(self.condition)

    @property
    def annual_mean(self) -> Floats:
        """(n, 2), Pa."""
        return self.model.annual_sd * self.mean[:, -2:]

    @property
    def annual_covariance(self) -> Floats:
        """(n, 2, 2), Pa2."""
        return self.model.annual_sd**2 * self.covariance[:, -2:, -2:]

    def changed(self, within: Floats, mean: Floats | None = None) -> Floats:
        """Covariance (..., 2, 2) of the answer when its moments on the nodes become others.

        Parameters
        ----------
        within : (..., n, 2, 2) array
            Covariance of A on every node, Pa2.
        mean : (..., n, 2) array, optional
            Its mean, Pa; as it is by default.

        Returns
        -------
        (..., 2, 2) array
            Pa2: the pooled covariance and how much that of the nodes changes.
        """
        own = self.annual_mean
        change = _total(within, own if mean is None else mean, self.model.member_count)
        return self.pooled_covariance + change - _total(self.annual_covariance, own, self.model.member_count)

    def site_rows(self, site: int) -> SiteRows:
        """Rows of one site's mean over models, by its index, on every node."""
        rows, condition = self.model.rows, self.condition
        own = np.flatnonzero(rows.site[: rows.mean_count] == site)
        parts = rows.part[own].reshape(-1, 2)[:, 0]
        pair = np.searchsorted(parts, condition.part[:, site])
        chosen = own.reshape(-1, 2)[pair]
        design = self.model.design[condition.member[:, None], chosen] * self.unit[:, None]
        base, _, scatter = base_variance(self.model, condition)
        every = np.arange(len(condition))[:, None]
        return SiteRows(
            design,
            (base + scatter)[every, chosen],
            scatter[every, chosen],
            rows.variance[chosen],
            rows.direction[chosen],
            rows.value[chosen],
        )


def network_error(model: LinearModel, posteriors: Sequence[ScalePosterior], *, nodes: int = NODES) -> NetworkError:
    """Prepare a network for changes.

    Parameters
    ----------
    model : LinearModel
    posteriors : sequence of ScalePosterior
        One a load member.
    nodes : int
        Of all members together, at least.

    Returns
    -------
    NetworkError
    """
    count = -(-nodes // len(posteriors))
    conditions = [posterior.equal_nodes(count, seed=k)[0] for k, posterior in enumerate(posteriors)]
    names = ("log_scales", "stretch", "part", "member")
    condition = Condition(*(np.concatenate([getattr(each, name) for each in conditions]) for name in names))
    return at_nodes(model, condition, *pooled_moments(posteriors))


def at_nodes(model: LinearModel, condition: Condition, mean: Floats, covariance: Floats) -> NetworkError:
    """Collapse a network on nodes; mean (2,) and covariance (2, 2) of the answer are those of all its nodes, Pa."""
    collapsed = collapse(model, condition)
    root = collapsed.root[:, :-1, :-1]
    inverse = np.linalg.inv(root)
    return NetworkError(
        model,
        condition,
        units(model, condition),
        collapsed.solution(),
        np.swapaxes(inverse, 1, 2) @ inverse,
        np.asarray(mean),
        np.asarray(covariance),
    )


def _total(within: Floats, mean: Floats, members: int) -> Floats:
    """Covariance of the mixture over nodes and load members, the spread of the members inflated."""
    by_member = mean.reshape(*mean.shape[:-2], members, -1, 2)
    centre = by_member.mean(axis=-2, keepdims=True)
    apart = by_member - centre
    spread = centre[..., 0, :] - centre[..., 0, :].mean(axis=-2, keepdims=True)
    return np.asarray(
        within.mean(axis=-3)
        + np.einsum("...kqi,...kqj->...ij", apart, apart) / mean.shape[-2]
        + inflation(members) * np.einsum("...ki,...kj->...ij", spread, spread) / members
    )


def updated_covariance(error: NetworkError, design: Floats, information: Floats) -> Floats:
    """Covariance of A on every node when information on some rows is added, or taken away where it is negative.

    Parameters
    ----------
    error : NetworkError
    design : (n, r, n_column) array
        Columns of the rows, in units of the columns' scales.
    information : (n, r, r) array
        Pa-2, symmetric.

    Returns
    -------
    (n, 2, 2) array
        Pa2.

    Notes
    -----
    Matrix inversion lemma: P - P H' J (I + H P H' J)^-1 H P, its last two rows and columns.
    """
    of_rows = error.covariance @ np.swapaxes(design, 1, 2)
    between = of_rows[:, -2:]
    inner = np.eye(design.shape[1]) + design @ of_rows @ information
    change = between @ information @ np.linalg.solve(inner, np.swapaxes(between, 1, 2))
    return np.asarray(error.model.annual_sd**2 * (error.covariance[:, -2:, -2:] - change))
