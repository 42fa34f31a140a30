"""Any subset of a network's sites on fixed nodes over the scales, by sums of what each site adds.

Given the scales every row of the regression adds its own information, w d d' with d its design and w one over its
variance, and its own constant; the information of a subset is the sum over its sites. The variances depend on s_site
and s_local alone (and s_group, where a site is the only one of its group); s_common and s_group stand in the prior of
columns. So for every pair of s_site and s_local the sums are one product of the table of the sites with the subsets,
the columns whose prior is fixed are eliminated once, and the other two scales follow on what is left. The algebra is
that of :mod:`massfit.posterior.likelihood`, in other coordinates of the same columns: the years by their singular
vectors, the models' common errors by their mean, which takes the air-pressure correction along, and their contrasts.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.likelihood import base_variance
from massfit.posterior.regression import Columns, LinearModel
from massfit.posterior.rows import contrast_weights
from massfit.posterior.scale_rule import ScaleRule, scale_rule

Floats = NDArray[np.float64]
Kept = NDArray[np.bool_]

_FLAT = 0.5  # largest sum of scale^2 / variance at the first knot: below, no density of data depends on the scale


@dataclass(frozen=True)
class NodeTable:
    """What the sites add to the information of any subset, row by row, in the coordinates of the elimination.

    Parameters
    ----------
    model : LinearModel
        Normal scatter, one Gaussian a site.
    rules : tuple of ScaleRule
        Of s_site, s_local, s_common and s_group; the last has one knot where the model has no such scale.
    design : (n_member, n_row, n_column + 1) array
        Columns in the order fixed, group, common, A; the value of the row stands last.
    fixed, group, common : int
        How many columns of each kind.
    from_place : int
        First of the fixed columns that are the scatter of a place with several sites.
    extra : (n_place,) array
        Pa2, variance of each place's scatter beyond s_site^2.
    """

    model: LinearModel
    rules: tuple[ScaleRule, ...]
    design: Floats
    fixed: int
    group: int
    common: int
    from_place: int
    extra: Floats


def node_table(model: LinearModel, prior_scales: Floats, *, extra: Floats | None = None) -> NodeTable:
    """Prepare a network for its subsets.

    Parameters
    ----------
    model : LinearModel
        The scatter is taken as normal; every site enters by one Gaussian.
    prior_scales : (n_scale,) array
        Scales of the half-t priors, Pa.
    extra : (n_place,) array, optional
        Pa2, variance of each place's scatter beyond s_site^2; none by default.

    Returns
    -------
    NodeTable

    Raises
    ------
    ValueError
        A site enters by its mixture.
    """
    if model.rows.has_parts:
        raise ValueError("the table holds one Gaussian a site")
    columns, rows, members = model.columns, model.rows, model.member_count
    models = rows.model_weight.shape[1]
    turned = rows.model_weight @ np.vstack([np.full(models, models**-0.5), contrast_weights(models)]).T
    common = (turned[:, :, None] * rows.direction[:, None, :]).reshape(len(turned), -1)
    kept = [_years(model), *(model.design[:, :, part] for part in (columns.unmodelled, columns.place))]
    fixed = np.concatenate(kept, axis=2)
    group = model.design[:, :, columns.group]
    ends = [np.broadcast_to(each, (members, *each.shape)) for each in (common, rows.value[:, None])]
    design = np.concatenate([fixed, group, ends[0], model.design[:, :, -2:], ends[1]], axis=2)
    places = columns.place.stop - columns.place.start
    return NodeTable(
        model,
        _rules(model, prior_scales),
        design,
        fixed.shape[2],
        group.shape[2],
        common.shape[1],
        fixed.shape[2] - places,
        np.zeros(model.place_count) if extra is None else extra,
    )


def _years(model: LinearModel) -> Floats:
    """Columns of the years that the sites tell apart: their loadings' singular vectors, nothing lost."""
    columns: Columns = model.columns
    whole = model.design[:, :, columns.year]
    if not whole.shape[2]:
        return whole
    _, size, turn = np.linalg.svd(model.sharing.year, full_matrices=False)
    axes = turn[size > 1e-9 * max(size.max(), 1e-300)]
    by_year = whole.reshape(*whole.shape[:2], -1, 2)
    return np.asarray(np.einsum("krya,ny->krna", by_year, axes).reshape(*whole.shape[:2], -1))


def _rules(model: LinearModel, prior_scales: Floats) -> tuple[ScaleRule, ...]:
    """Rules of the scales: from where the rows' densities become flat, as fine as the sharpest posterior asks for."""
    rows, columns = model.rows, model.columns
    variance = np.maximum(rows.variance, 1e-4 * np.median(rows.value**2))
    means, contrasts = (1.0 / part for part in np.split(variance, [rows.mean_count]))
    own = np.sqrt(_FLAT / np.array([means.sum(), means.sum() + contrasts.sum()]))
    lowest = np.clip([*own, 0.0, 0.0][: len(prior_scales)], 0.1 * prior_scales, 0.3 * prior_scales)
    effects = [len(means), len(contrasts), columns.common.stop - columns.common.start]
    effects.append(columns.group.stop - columns.group.start)
    rules = [
        scale_rule(float(prior), float(low), count, narrow=i < 2)
        for i, (prior, low, count) in enumerate(zip(prior_scales, lowest, effects, strict=False))
    ]
    nothing = ScaleRule(np.zeros(1), np.ones((1, 1)), np.ones(1))
    return tuple([*rules, nothing][:4])


@dataclass(frozen=True)
class NodeValues:
    """n subsets on the knots of the scales.

    Parameters
    ----------
    log_likelihood : (n_site_knot, n_local_knot, n_common_knot, n_group_knot, n) array
        Log density of the subset's phasors, everything but the scales integrated out.
    mean : (2, ...) array
        Pa.
    covariance : (3, ...) array
        Pa2: variance in phase, covariance, variance in quadrature.
    """

    log_likelihood: Floats
    mean: Floats
    covariance: Floats


def node_values(table: NodeTable, kept: Kept, *, member: int = 0) -> NodeValues:
    """Solve every subset on every node.

    Parameters
    ----------
    table : NodeTable
    kept : (n, n_site) array of bool
    member : int
        Load member.

    Returns
    -------
    NodeValues
    """
    shape = (*(len(rule.knot) for rule in table.rules), len(kept))
    values = NodeValues(np.empty(shape), np.empty((2, *shape)), np.empty((3, *shape)))
    tower = _Tower(table, member, np.ascontiguousarray(kept.T, dtype=float))
    for i, site in enumerate(table.rules[0].knot):
        for j, local in enumerate(table.rules[1].knot):
            values.log_likelihood[i, j], values.mean[:, i, j], values.covariance[:, i, j] = tower.solved(site, local)
    return values


class _Tower:
    """Eliminates the columns kind by kind; what is left of the earlier ones serves all scales of the later.

    Where every site has every model, the means over the models do not see the contrasts of the models' errors: these
    are integrated out by themselves, once for every s_local.
    """

    def __init__(self, table: NodeTable, member: int, subsets: Floats) -> None:
        self._table, self._subsets = table, subsets
        rows, design = table.model.rows, table.design[member]
        self._of_site = (np.arange(len(subsets))[:, None] == rows.site).astype(float)
        first = table.fixed + table.group
        contrasts = np.arange(first + 2, first + table.common)
        self._apart = bool(np.abs(design[: rows.mean_count, contrasts]).max(initial=0.0) < 1e-12)
        inner = contrasts if self._apart else contrasts[:0]
        self._main = _Products(design, np.setdiff1d(np.arange(design.shape[1]), inner))
        self._contrasts = _Products(design, np.append(inner, design.shape[1] - 1))
        self._known: dict[float, Floats] = {}

    def solved(self, site: float, local: float) -> tuple[Floats, Floats, Floats]:
        """Log likelihood, mean and covariance (..., n_common_knot, n_group_knot, n) at logarithms of the others."""
        table, means = self._table, self._table.model.rows.mean_count
        commons, groups = (rule.knot for rule in table.rules[2:])
        # the group scatter of a site that is the only one of its group stands in the variance of its rows
        inside = groups if table.model.sharing.alone.any() else groups[:1]
        rows = slice(means if self._apart else None)
        terms = [self._main.sums(self._of_site, self._variance(site, local, g), self._subsets, rows) for g in inside]
        upper, density = (np.stack(each, axis=-2) for each in zip(*terms, strict=True))
        prior = np.ones((table.fixed, 1, 1))
        prior[table.from_place :, 0, 0] = 1.0 / (np.exp(2.0 * site) + _extra(table))
        upper, density = _eliminate(upper, prior, density)
        upper = np.repeat(upper, len(groups) // upper.shape[2], axis=2)
        prior = np.broadcast_to(np.exp(-2.0 * groups)[:, None], (table.group, len(groups), 1))
        upper, density = _eliminate(upper, prior, density)
        upper = np.repeat(upper[:, :, None], len(commons), axis=2)
        prior = _common_prior(table, commons)[: 2 if self._apart else None, :, None, None]
        density, mean, covariance = self._phasor(*_eliminate(upper, prior, density))
        return (density + self._apart_density(local) if self._apart else density), mean, covariance

    def _variance(self, site: float, local: float, group: float) -> Floats:
        """Variances (n_row,) of the rows."""
        model = self._table.model
        log_scales = np.array([[site, local, 0.0, group]])[:, : model.scale_count]
        base, contrast, scatter = base_variance(model, model.at(log_scales))
        scatter += self._table.extra[model.row_place] * model.own_scatter
        return np.asarray(np.concatenate([base + scatter, contrast], axis=1)[0])

    def _apart_density(self, local: float) -> Floats:
        """Log density (n_common_knot, 1, n) of the contrasts, the models' errors integrated out."""
        if local not in self._known:
            table = self._table
            rows = slice(table.model.rows.mean_count, None)
            variance = self._variance(0.0, local, 0.0)
            upper, density = self._contrasts.sums(self._of_site, variance, self._subsets, rows)
            prior = _common_prior(table, table.rules[2].knot)[2:, :, None]
            upper = np.repeat(upper[:, :, None], prior.shape[1], axis=2)
            upper, density = _eliminate(upper, prior, density)
            self._known[local] = (density - 0.5 * upper[0, 0])[:, None]
        return self._known[local]

    def _phasor(self, upper: Floats, density: Floats) -> tuple[Floats, Floats, Floats]:
        """Solve for the two columns that are left, of unit prior."""
        (a, b, first), (c, second), square = upper[0], upper[1, 1:], upper[2, 2]
        a, c = a + 1.0, c + 1.0
        determinant = a * c - b**2
        mean = np.stack([c * first - b * second, a * second - b * first]) / determinant
        misfit = square - mean[0] * first - mean[1] * second
        sd = self._table.model.annual_sd
        covariance = sd**2 * np.stack([c, -b, a]) / determinant
        return density - 0.5 * (misfit + np.log(determinant)), sd * mean, covariance


class _Products:
    """Products of the columns of every row, in pairs, for sums over the sites of subsets."""

    def __init__(self, design: Floats, columns: NDArray[np.int64]) -> None:
        self._upper = np.triu_indices(len(columns))
        chosen = design[:, columns]
        self._values = chosen[:, self._upper[0]] * chosen[:, self._upper[1]]
        self._size = len(columns)

    def sums(self, of_site: Floats, variance: Floats, subsets: Floats, rows: slice) -> tuple[Floats, Floats]:
        """Information (n_column, n_column, n) of the subsets, and log density (n,) of their rows' variances."""
        own, spread = of_site[:, rows], variance[rows]
        upper = np.zeros((self._size, self._size, subsets.shape[1]))
        upper[self._upper] = ((own / spread) @ self._values[rows]).T @ subsets
        return upper, -0.5 * (own @ np.log(2.0 * np.pi * spread)) @ subsets


def _common_prior(table: NodeTable, log_common: Floats) -> Floats:
    """Precision (n_column, n) of the models' mean error, with the air-pressure correction, and of their contrasts."""
    squares, models = np.exp(2.0 * log_common), table.common // 2
    prior = np.tile(1.0 / squares, (table.common, 1))
    prior[:2] = 1.0 / ((1.0 + models * table.model.truth) * squares + models * table.model.atmosphere_sd**2)
    return prior


def _extra(table: NodeTable) -> Floats:
    """Variance beyond s_site^2 of the columns of places with several sites, two each."""
    return np.repeat(table.extra[table.model.columns.shared_place], 2)


def prior_precision(table: NodeTable, log_scales: Floats) -> Floats:
    """Prior precision of every column.

    Parameters
    ----------
    table : NodeTable
    log_scales : (n, n_scale) array

    Returns
    -------
    (n, n_column) array
    """
    prior = np.ones((len(log_scales), table.design.shape[2] - 1))
    prior[:, table.from_place : table.fixed] = 1.0 / (np.exp(2.0 * log_scales[:, :1]) + _extra(table))
    ends = np.cumsum([table.fixed, table.group, table.common])
    if table.group:
        prior[:, ends[0] : ends[1]] = np.exp(-2.0 * log_scales[:, 3:4])
    prior[:, ends[1] : ends[2]] = _common_prior(table, log_scales[:, 2]).T
    return prior


def _eliminate(upper: Floats, prior: Floats, density: Floats) -> tuple[Floats, Floats]:
    """Integrate the leading columns out.

    Parameters
    ----------
    upper : (n, n, ...) array
        Upper triangles of information, bordered by the data; used up.
    prior : (n_out, ...) array
        Precision of the columns beforehand.
    density : (...) array
        Log density so far.

    Returns
    -------
    upper : (n - n_out, n - n_out, ...) array
    density : (...) array
    """
    for k, own in enumerate(prior):
        pivot = upper[k, k] + own
        for i in range(k + 1, len(upper)):
            upper[i, i:] -= (upper[k, i] / pivot) * upper[k, i:]
        density = density - 0.5 * np.log(pivot / own)
    return upper[len(prior) :, len(prior) :], density
