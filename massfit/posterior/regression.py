"""The network model as a regression with independent rows: what stands in its columns, for every load member."""

from collections.abc import Sequence
from dataclasses import dataclass, fields, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from massfit.phasor import admittance_matrix
from massfit.posterior.rows import Rows
from massfit.posterior.sharing import Sharing

Floats = NDArray[np.float64]

_OF_PAIRS = ("record", "noise")  # of Rows: one entry a pair of rows

SCALES = ("s_site", "s_local", "s_common", "s_group")
"""Names of the scales, in the order of every scale axis; the last only where sites share scatter."""

FREEDOM = 4.0
"""Degrees of freedom of Student site scatter and of the half-t priors of the scales."""


@dataclass(frozen=True)
class Condition:
    """Points at which everything else is normal.

    Parameters
    ----------
    log_scales : (n, n_scale) array
        Natural logarithms of the scales in Pa.
    stretch : (n, n_place) array
        Variance of each place's scatter in units of s_site^2; 1 where the scatter is normal.
    part : (n, n_site) array of int
        Part of each site's mixture.
    member : (n,) array of int
        Load member.
    """

    log_scales: Floats
    stretch: Floats
    part: NDArray[np.int64]
    member: NDArray[np.int64]

    def __len__(self) -> int:
        return len(self.log_scales)

    def take(self, chosen: NDArray[np.int64] | NDArray[np.bool_]) -> "Condition":
        """Points of the indices given."""
        return Condition(self.log_scales[chosen], self.stretch[chosen], self.part[chosen], self.member[chosen])


@dataclass(frozen=True)
class Columns:
    """Where each unknown stands among the columns of the regression, two columns each.

    Parameters
    ----------
    ends : tuple of int
        Where the columns end of the air-pressure correction, the models' common errors, group scatter, years,
        unmodelled circulation, scatter of places with several sites, and the phasor.
    shared_place : (n,) array of int
        Places with several sites.
    """

    ends: tuple[int, ...]
    shared_place: NDArray[np.int64]

    @property
    def common(self) -> slice:
        """Of the models' common errors."""
        return slice(self.ends[0], self.ends[1])

    @property
    def group(self) -> slice:
        """Of the scatter that groups or neighbours share."""
        return slice(self.ends[1], self.ends[2])

    @property
    def year(self) -> slice:
        """Of the years."""
        return slice(self.ends[2], self.ends[3])

    @property
    def unmodelled(self) -> slice:
        """Of the circulation where no model was subtracted."""
        return slice(self.ends[3], self.ends[4])

    @property
    def place(self) -> slice:
        """Of the scatter of places with several sites."""
        return slice(self.ends[4], self.ends[5])

    @property
    def size(self) -> int:
        """Number of columns."""
        return self.ends[6]


@dataclass(frozen=True)
class LinearModel:
    """Rows and design of all load members, ready for any condition.

    Parameters
    ----------
    rows : Rows
    sharing : Sharing
    columns : Columns
    design : (n_member, n_row, n_column) array
        Pa per prior standard deviation, and per scale where the standard deviation is one.
    annual_sd, year_sd, atmosphere_sd : float
        Prior standard deviations of A, of the cycle of a year, and of the air-pressure correction, Pa.
    truth : float
        r: variance of the truth about the models' centre in units of s_common^2.
    student : bool
        Whether the site scatter is Student's.
    """

    rows: Rows
    sharing: Sharing
    columns: Columns
    design: Floats
    annual_sd: float
    year_sd: float
    atmosphere_sd: float
    truth: float
    student: bool

    @property
    def member_count(self) -> int:
        """Number of load members."""
        return len(self.design)

    @property
    def scale_count(self) -> int:
        """Number of scales: with that of groups where sites share scatter."""
        return 4 if self.sharing.has_group else 3

    @property
    def place_count(self) -> int:
        """Number of places."""
        return int(self.sharing.place.max()) + 1

    @cached_property
    def own_scatter(self) -> NDArray[np.bool_]:
        """(n_mean_row,), whether the scatter of the row's place is its own: no other site lies there."""
        return ~np.isin(self.row_place, self.columns.shared_place)

    @cached_property
    def row_place(self) -> NDArray[np.int64]:
        """(n_mean_row,), place of each row."""
        return np.asarray(self.sharing.place[self.rows.site[: self.rows.mean_count]])

    @cached_property
    def mean_table(self) -> Floats:
        """(n_member, n_mean_row, ...), products of design and value that the weights of the means are summed with."""
        count = self.rows.mean_count
        value = np.broadcast_to(self.rows.value[:count, None], (self.member_count, count, 1))
        return _products(np.concatenate([self.design[:, :count], value], axis=2))

    @cached_property
    def contrast_table(self) -> Floats:
        """(n_contrast_row, ...), the same of the contrasts, which see the models' common errors only."""
        rest = np.s_[self.rows.mean_count :]
        return _products(np.column_stack([self.design[0, rest, self.columns.common], self.rows.value[rest]]))

    def at(self, log_scales: Floats, member: int = 0) -> Condition:
        """Condition of normal scatter and first parts at scales (n, n_scale)."""
        count = len(log_scales)
        return Condition(
            np.asarray(log_scales, dtype=float),
            np.ones((count, self.place_count)),
            np.zeros((count, len(self.sharing.place)), dtype=np.int64),
            np.full(count, member),
        )


def _products(values: Floats) -> Floats:
    """Products (..., n * n) of the last axis with itself."""
    size = values.shape[-1]
    return np.asarray((values[..., :, None] * values[..., None, :]).reshape(*values.shape[:-1], size * size))


def linear_model(
    rows: Rows,
    admittance: NDArray[np.complex128],
    sharing: Sharing,
    *,
    annual_sd: float,
    atmosphere_sd: float,
    year_sd: float,
    unmodelled_sd: float,
    truth: float,
    student: bool,
) -> LinearModel:
    """Prepare the regression of the load members.

    Parameters
    ----------
    rows : Rows
    admittance : (n_member, n_site) array of complex
    sharing : Sharing
    annual_sd, atmosphere_sd, year_sd, unmodelled_sd : float
        Prior standard deviations of A, a, the cycle of a year, and the circulation where no model was subtracted, Pa.
    truth : float
        r: variance of the truth about the models' centre in units of s_common^2; 1 where the truth is exchangeable
        with the models, 0 where they are centred on it.
    student : bool
        Whether the site scatter is Student's with 4 degrees of freedom; normal otherwise.

    Returns
    -------
    LinearModel
    """
    place = sharing.place
    shared_place = np.flatnonzero(np.bincount(place) > 1)
    total = np.where(np.arange(len(rows.site)) < rows.mean_count, 1.0, 0.0)[:, None]
    direction = total * rows.direction
    annual = np.einsum("rc,krcd->krd", direction, admittance_matrix(admittance)[:, rows.site])
    models = rows.model_weight.shape[1]
    root = np.linalg.cholesky(np.eye(models) + truth)
    common = np.einsum("rm,mn,rc->rnc", rows.model_weight, root, rows.direction)

    def spread(loading: Floats, effect: Floats) -> Floats:
        """Columns (..., n_row, 2 n) of loadings (n_site, n) on effects (..., n_row, 2)."""
        product = loading[rows.site][:, :, None] * effect[..., None, :]
        return product.reshape(*product.shape[:-2], -1)

    blocks = [
        atmosphere_sd * direction,
        common.reshape(len(total), -1),
        spread(sharing.group, direction),
        year_sd * spread(sharing.year, annual),
        unmodelled_sd * spread(sharing.unmodelled, direction),
        spread((place[:, None] == shared_place).astype(float), direction),
        annual_sd * annual,
    ]
    ends = tuple(np.cumsum([block.shape[-1] for block in blocks]).tolist())
    design = np.concatenate([np.broadcast_to(b, (len(admittance), *b.shape[-2:])) for b in blocks], axis=2)
    columns = Columns(ends, shared_place)
    return LinearModel(rows, sharing, columns, design, annual_sd, year_sd, atmosphere_sd, truth, student)


def without_site(model: LinearModel, site: int) -> LinearModel:
    """Leave out the rows of one site, by its index; the others keep theirs."""
    return _of_rows([(model, model.rows.site != site)], model.rows.log_weight)


def with_parts(model: LinearModel, mixed: LinearModel, site: int) -> LinearModel:
    """Let one site, by its index, enter by the mixture by which it enters `mixed`; the others as in `model`."""
    chosen = [
        (each, ((np.arange(len(each.rows.site)) < each.rows.mean_count) == means) & ((each.rows.site == site) == own))
        for means in (True, False)
        for each, own in ((model, False), (mixed, True))
    ]
    log_weight = np.full_like(mixed.rows.log_weight, -np.inf)
    log_weight[:, : model.rows.log_weight.shape[1]] = model.rows.log_weight
    log_weight[site] = mixed.rows.log_weight[site]
    return _of_rows(chosen, log_weight)


def _of_rows(chosen: Sequence[tuple[LinearModel, NDArray[np.bool_]]], log_weight: Floats) -> LinearModel:
    """Join rows of models that differ in their rows alone, in the order given; the two of a pair are both chosen."""
    joined = {
        field.name: np.concatenate(
            [getattr(each.rows, field.name)[kept[::2] if field.name in _OF_PAIRS else kept] for each, kept in chosen]
        )
        for field in fields(Rows)
        if field.name != "log_weight"
    }
    design = np.concatenate([each.design[:, kept] for each, kept in chosen], axis=1)
    return replace(chosen[0][0], rows=Rows(**joined, log_weight=log_weight), design=design)
