"""The network answer for any subset of its sites, all load members pooled, the scales integrated anew for each."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.network_model import Choices, inflation, network_model, scale_priors
from massfit.posterior.node_terms import NodeTable, SubsetMoments, node_table, subset_moments
from massfit.posterior.observations import Observations
from massfit.posterior.sharing import places_of

Floats = NDArray[np.float64]
Kept = NDArray[np.bool_]


@dataclass(frozen=True)
class SubsetTables:
    """A network ready for its subsets.

    Parameters
    ----------
    alone : NodeTable
        For subsets of which no two places share scatter: there is no s_group then.
    sharing : NodeTable, optional
        For the others; absent where no subset shares any.
    place : (n_site,) array of int
    label : (n_site,) array of int
        Group of each site, -1 for none; one group for all where scatter falls with distance.
    """

    alone: NodeTable
    sharing: NodeTable | None
    place: NDArray[np.int64]
    label: NDArray[np.int64]

    @property
    def member_count(self) -> int:
        """Number of load members."""
        return len(self.alone.design)

    def shares(self, kept: Kept) -> Kept:
        """Whether two places of one group are in the subset, (n,) from (n, n_site)."""
        found = np.zeros(len(kept), dtype=bool)
        for name in set(self.label.tolist()) - {-1}:
            of_place = [kept[:, (self.label == name) & (self.place == p)].any(axis=1) for p in set(self.place.tolist())]
            found |= np.sum(of_place, axis=0) > 1
        return found


def subset_tables(observations: Observations, admittance: NDArray[np.complex128], choices: Choices) -> SubsetTables:
    """Prepare a network for its subsets; the scatter is taken as normal, and every site enters by one Gaussian.

    Parameters
    ----------
    observations : Observations
    admittance : (n_member, n_site) array of complex
    choices : Choices

    Returns
    -------
    SubsetTables

    Raises
    ------
    InputError
        A correlation length is asked for and the sites have no positions.
    """
    own = replace(choices.settings, group_scatter=False)
    model = network_model(observations, admittance, choices)
    bare = network_model(observations, admittance, replace(choices, settings=own)) if model.sharing.has_group else model
    tables = [node_table(each, scale_priors(choices.priors, each.scale_count)) for each in (bare, model)]
    return SubsetTables(
        tables[0],
        tables[1] if model.sharing.has_group else None,
        places_of(observations),
        _labels(observations, choices.settings.group_scatter),
    )


def _labels(observations: Observations, group_scatter: bool | float) -> NDArray[np.int64]:
    count = len(observations.sites)
    if not isinstance(group_scatter, bool):
        return np.zeros(count, dtype=np.int64)
    if not group_scatter or not observations.group:
        return np.full(count, -1)
    names = [name for name in dict.fromkeys(observations.group) if name]
    return np.array([names.index(name) if name else -1 for name in observations.group])


def subset_posteriors(tables: SubsetTables, kept: Kept) -> SubsetMoments:
    """Answer every subset, all load members pooled.

    Parameters
    ----------
    tables : SubsetTables
    kept : (n, n_site) array of bool
        Sites of each subset; one without any site has the prior for its answer.

    Returns
    -------
    SubsetMoments
        The evidence and the scales are means over the members; the scales are s_site, s_local and s_common.

    Notes
    -----
    Equals the answer of a network that never had the other sites, under normal site scatter.

    Examples
    --------
    Two sites, both kept and one of them left out:

    >>> from massfit.settings import PosteriorSettings, Priors
    >>> phasor, wide = np.array([[[[5.0, 90.0]]], [[[9.0, 94.0]]]]), np.tile(100.0 * np.eye(2), (2, 1, 1, 1))
    >>> seen = Observations(("north", "south"), ("invented",), np.ones((2, 1)), phasor, wide, np.zeros((2, 2, 2)))
    >>> tables = subset_tables(seen, np.full((1, 2), 1.1 + 0j), Choices(PosteriorSettings(), Priors(), 0.04))
    >>> answer = subset_posteriors(tables, np.array([[True, True], [True, False]]))
    >>> answer.mean.shape, bool(answer.width[1] > answer.width[0])
    ((2, 2), True)
    """
    kept = np.asarray(kept, dtype=bool)
    shares = tables.shares(kept) if tables.sharing is not None else np.zeros(len(kept), dtype=bool)
    found = [
        (np.flatnonzero(chosen), _pooled(table, kept[chosen]))
        for chosen, table in ((~shares, tables.alone), (shares, tables.sharing))
        if table is not None and chosen.any()
    ]
    order = np.argsort(np.concatenate([index for index, _ in found]))
    return SubsetMoments(
        *(
            np.concatenate([getattr(moments, name) for _, moments in found])[order]
            for name in ("mean", "covariance", "log_evidence", "log_scales")
        )
    )


def _pooled(table: NodeTable, kept: Kept) -> SubsetMoments:
    members = [subset_moments(table, kept, member=k) for k in range(len(table.design))]
    means = np.array([each.mean for each in members])
    shift = means - means.mean(axis=0)
    spread = inflation(len(members)) * np.einsum("kni,knj->nij", shift, shift) / len(members)
    return SubsetMoments(
        means.mean(axis=0),
        np.mean([each.covariance for each in members], axis=0) + spread,
        np.mean([each.log_evidence for each in members], axis=0),
        np.mean([each.log_scales[:, :3] for each in members], axis=0),
    )
