"""The network answer for any subset of its sites, all load members pooled, the scales integrated anew for each.

The scales are integrated with the mean fingerprint of the members; how far each member's answer lies from that of the
mean is computed at the posterior mean of the scales, where it hardly depends on them. Normal scatter is integrated by
quadrature (:mod:`massfit.posterior.node_terms`). Student scatter and mixtures go by expectation propagation on the same
nodes (:mod:`massfit.posterior.robust_terms`).
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.importance import integrate_scales
from massfit.posterior.network_model import Choices, inflation, network_model, scale_priors
from massfit.posterior.node_integral import BLOCK, SubsetMoments, integrate_nodes, join_moments
from massfit.posterior.node_terms import NodeTable, NodeValues, node_table, node_values
from massfit.posterior.observations import Observations
from massfit.posterior.regression import LinearModel
from massfit.posterior.robust_terms import Factors, Points, subset_factors
from massfit.posterior.sharing import Sharing, places_of

Floats = NDArray[np.float64]
Kept = NDArray[np.bool_]

_WHOLE_DRAWS = 1000  # nodes on which the whole network tells which places are far off
_GROUP_LEVELS = 4  # of s_group, at which the effect of Student scatter is computed


@dataclass(frozen=True)
class PreparedNetwork:
    """A network with or without s_group, ready for its subsets.

    Parameters
    ----------
    table : NodeTable
        Of the mean of the load members.
    factors : Factors
        Of the same.
    member_design : (n_member, n_factor, 2, n_column) array
        Design of the factors for every load member.
    plain : bool
        Whether all is normal: no Student scatter and no mixture.
    """

    table: NodeTable
    factors: Factors
    member_design: Floats
    plain: bool


@dataclass(frozen=True)
class SubsetTables:
    """A network ready for its subsets.

    Parameters
    ----------
    alone : PreparedNetwork
        For subsets of which no two places share scatter: there is no s_group then.
    sharing : PreparedNetwork, optional
        For the others; absent where no subset shares any.
    place : (n_site,) array of int
    label : (n_site,) array of int
        Group of each site, -1 for none; one group for all where scatter falls with distance.
    observations : Observations
    admittance : (n_member, n_site) array of complex
    choices : Choices
    mixed : tuple of str
        What the tables were made from.
    """

    alone: PreparedNetwork
    sharing: PreparedNetwork | None
    place: NDArray[np.int64]
    label: NDArray[np.int64]
    observations: Observations
    admittance: NDArray[np.complex128]
    choices: Choices
    mixed: tuple[str, ...]

    @property
    def site_count(self) -> int:
        """Number of sites."""
        return len(self.place)

    def shares(self, kept: Kept) -> Kept:
        """Whether two places of one group are in the subset, (n,) from (n, n_site)."""
        found = np.zeros(len(kept), dtype=bool)
        for name in set(self.label.tolist()) - {-1}:
            of_place = [kept[:, (self.label == name) & (self.place == p)].any(axis=1) for p in set(self.place.tolist())]
            found |= np.sum(of_place, axis=0) > 1
        return found


def subset_tables(
    observations: Observations, admittance: NDArray[np.complex128], choices: Choices, *, mixed: tuple[str, ...] = ()
) -> SubsetTables:
    """Prepare a network for its subsets.

    Parameters
    ----------
    observations : Observations
    admittance : (n_member, n_site) array of complex
    choices : Choices
        Student or normal scatter, as they say.
    mixed : tuple of str
        Sites that enter by their mixture; the others by its mean and covariance.

    Returns
    -------
    SubsetTables

    Raises
    ------
    InputError
        A correlation length is asked for and the sites have no positions.
    """
    own = replace(choices, settings=replace(choices.settings, group_scatter=False))
    alone = _prepared(observations, admittance, own, mixed)
    shared = network_model(observations, admittance[:1], choices).sharing.has_group
    return SubsetTables(
        alone,
        _prepared(observations, admittance, choices, mixed) if shared else None,
        places_of(observations),
        _labels(observations, choices.settings.group_scatter),
        observations,
        admittance,
        choices,
        mixed,
    )


def _prepared(
    observations: Observations, admittance: NDArray[np.complex128], choices: Choices, mixed: tuple[str, ...]
) -> PreparedNetwork:
    model = network_model(observations, admittance.mean(axis=0)[None], choices, mixed=mixed)
    return _with_tables(observations, admittance, choices, mixed, model.sharing, _extra(model, choices))


def _with_tables(
    observations: Observations,
    admittance: NDArray[np.complex128],
    choices: Choices,
    mixed: tuple[str, ...],
    sharing: Sharing,
    extra: Floats,
) -> PreparedNetwork:
    tables = []
    for own in (admittance.mean(axis=0)[None], *admittance[:, None]):
        model = network_model(observations, own, choices, sharing=sharing)
        tables.append(node_table(model, scale_priors(choices.priors, model.scale_count), extra=extra))
    factors = [subset_factors(table, observations, mixed) for table in tables]
    designs = np.array([each.design for each in factors[1:]])
    return PreparedNetwork(tables[0], factors[0], designs, not (mixed or tables[0].model.student))


def full_scales(network: PreparedNetwork) -> Floats:
    """Posterior means (n_scale,) of the logarithms of the scales, s_group included, with all sites."""
    everything = np.ones((1, len(network.table.model.sharing.place)), dtype=bool)
    return np.asarray(_middle(network, everything).log_scales[0])


def moved_tables(tables: SubsetTables, site: NDArray[np.int64], offset: Floats) -> SubsetTables:
    """Add copies of sites whose phasors are moved off; a subset takes a site or one of its copies, not both.

    Parameters
    ----------
    tables : SubsetTables
    site : (n,) array of int
        Site that each copy is of.
    offset : (n, 2) array
        Pa, added to its phasors of all models.

    Returns
    -------
    SubsetTables
        The copies follow the sites.
    """
    seen, count = tables.observations, tables.site_count
    chosen = np.concatenate([np.arange(count), site])
    names = (*seen.sites, *(f"{seen.sites[s]} moved {i + 1}" for i, s in enumerate(site)))
    phasor = seen.part_phasor[chosen]
    phasor[count:] += offset[:, None, None]
    own = [seen.sites[s] for s in chosen]
    mean_only = frozenset(name for name, s in zip(names, own, strict=True) if s in seen.mean_only)
    moved = replace(seen.take(chosen), sites=names, part_phasor=phasor, mean_only=mean_only)
    # a copy has a place of its own, unless several sites lie at that of its site
    several = np.bincount(tables.place)[tables.place[site]] > 1
    new_place = np.where(several, tables.place[site], tables.place.max() + 1 + np.arange(len(site)))
    place = np.concatenate([tables.place, new_place])
    made = replace(
        tables,
        place=place,
        label=tables.label[chosen],
        observations=moved,
        admittance=tables.admittance[:, chosen],
        mixed=tuple(name for name, s in zip(names, own, strict=True) if s in tables.mixed),
    )
    # a site that is moved far off is compared with normal scatter that reaches there
    far = 0.5 * (offset**2).sum(axis=1)
    return replace(
        made,
        alone=_moved(made, tables.alone, chosen, far),
        sharing=None if tables.sharing is None else _moved(made, tables.sharing, chosen, far),
    )


def _moved(made: SubsetTables, network: PreparedNetwork, chosen: NDArray[np.int64], far: Floats) -> PreparedNetwork:
    """Prepare a network with copies of its sites; what these share with others is known."""
    own, extra = network.table.model.sharing, network.table.extra
    sharing = Sharing(
        made.place, own.group[chosen], own.alone[chosen], own.year[chosen], own.period_share, own.unmodelled[chosen]
    )
    beyond = np.zeros(len(far)) if network.plain else extra[own.place[chosen[len(own.place) :]]] + far
    return _with_tables(
        made.observations, made.admittance, made.choices, made.mixed, sharing, np.concatenate([extra, beyond])
    )


def _extra(model: LinearModel, choices: Choices) -> Floats:
    """Variance (n_place,) of each place's scatter beyond s_site^2, Pa2, as the whole network sees it."""
    if not model.student:
        return np.zeros(model.place_count)
    rng = np.random.default_rng(choices.settings.seed)
    route = integrate_scales(model, scale_priors(choices.priors, model.scale_count), rng=rng, draws=_WHOLE_DRAWS)
    square = np.exp(2.0 * route.log_scales[:, :1])
    whole, usual = 1.0 / (route.weight @ (1.0 / (square * route.stretch))), 1.0 / (route.weight @ (1.0 / square))
    return np.maximum(whole - usual, 0.0)


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
    Equals the answer of a network that never had the other sites: exactly under normal scatter but for the quadrature,
    to the error of expectation propagation otherwise (:mod:`massfit.posterior.robust_terms`).

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
    joined = join_moments([moments for _, moments in found])
    return joined.take(np.argsort(np.concatenate([index for index, _ in found])))


def _pooled(network: PreparedNetwork, kept: Kept) -> SubsetMoments:
    size = max(1, (BLOCK if network.plain else BLOCK // 8) // len(network.table.rules[3].knot))
    blocks = np.split(kept, range(size, len(kept), size))
    return join_moments([_with_members(network, block, _middle(network, block)) for block in blocks])


def _middle(network: PreparedNetwork, kept: Kept) -> SubsetMoments:
    """Answer a block of subsets with the mean fingerprint."""
    values = node_values(network.table, kept)
    found = integrate_nodes(network.table, values)
    if network.plain:
        return found
    return integrate_nodes(network.table, _robust(network, kept.astype(float), values, found.log_scales))


def _with_members(network: PreparedNetwork, kept: Kept, found: SubsetMoments) -> SubsetMoments:
    """Add how far the load members lie apart, at the posterior mean of the scales."""
    points = Points(network.table, network.factors, kept.astype(float), found.log_scales)
    fitted = points.normal_factors() if network.plain else points.fitted_factors()[:2]
    shift = points.member_means(network.member_design, *fitted) - points.answers(*fitted, normal=True).mean
    away = shift - shift.mean(axis=0)
    spread = inflation(len(shift)) * np.einsum("kni,knj->nij", away, away) / len(shift)
    return SubsetMoments(
        found.mean + shift.mean(axis=0), found.covariance + spread, found.log_evidence, found.log_scales[:, :3]
    )


def _robust(network: PreparedNetwork, inside: Floats, values: NodeValues, log_scales: Floats) -> NodeValues:
    """Add to the nodes what Student scatter and mixtures change, by s_site and s_group."""
    site, _, _, group = (rule.knot for rule in network.table.rules)
    levels = group[np.unique(np.linspace(0, 0.7 * (len(group) - 1), _GROUP_LEVELS).round().astype(int))]
    at = np.tile(log_scales, (len(site), len(levels), 1, 1))
    at[..., 0] = site[:, None, None]
    if len(group) > 1:
        at[..., 3] = levels[:, None]
    count = len(site) * len(levels)
    points = Points(network.table, network.factors, np.tile(inside, (count, 1)), at.reshape(-1, at.shape[3]))
    normal = points.answers(*points.normal_factors(), normal=True)
    precision, shift, settled = points.fitted_factors()
    robust = points.answers(precision, shift, normal=False)
    upper = (robust.covariance - normal.covariance)[:, [0, 0, 1], [0, 1, 1]]
    rows = np.column_stack([robust.log_evidence - normal.log_evidence, robust.mean - normal.mean, upper])
    rows = _settled(rows.reshape(len(site), len(levels), len(inside), 6), settled)
    # straight lines along the logarithm of s_group, level beyond
    lines = np.array([np.interp(group, levels, row) for row in np.eye(len(levels))])
    change = np.einsum("slnq,lg->qsgn", rows, lines)[:, :, None, None]
    return NodeValues(values.log_likelihood + change[0], values.mean + change[1:3], values.covariance + change[3:])


def _settled(rows: Floats, settled: NDArray[np.bool_]) -> Floats:
    """Take (n_site_knot, n_level, n, 6) from the level, or the knot, before where the factors did not settle."""
    there = settled.reshape(rows.shape[:3])
    for i in range(rows.shape[0]):
        for k in range(rows.shape[1]):
            before = rows[i, k - 1] if k else rows[i - 1, k] if i else np.zeros_like(rows[i, k])
            rows[i, k] = np.where(there[i, k][:, None], rows[i, k], before)
    return rows
