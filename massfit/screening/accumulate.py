"""From blocks of a field to sums: what a worker does with its part."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.screening.design import FITTED, Design
from massfit.screening.field import BlockSource, FirstLook
from massfit.screening.sums import Floats, Gaps, Sums


@dataclass(frozen=True, eq=False)
class Part:
    """Some years of some rows of a field.

    Parameters
    ----------
    source : BlockSource
    design : Design
    days : (n_time,) array
        All times of the field, days since 1 January of the reference year of the design.
    year : (n_time,) array of int
        Calendar year of each time; 0 where the mean of the year does not count.
    when, rows : slice
        Times and rows of the part.
    block : int
        Times that are read at once.
    look : FirstLook
        Of the cells of the rows.
    weights : (n_row * n_lon, 2) array
        Area of each cell of the rows, and the part of it that is ocean, m2.
    mean : (n_time,) array, "own" or None
        Ocean mean that is subtracted, Pa; "own" when the rows are the whole field: it is made on the way.
    """

    source: BlockSource
    design: Design
    days: Floats
    year: NDArray[np.int64]
    when: slice
    rows: slice
    block: int
    look: FirstLook
    weights: Floats
    mean: Floats | str | None


def part_sums(part: Part) -> Sums:
    """Read a part block by block and sum it up.

    Parameters
    ----------
    part : Part

    Returns
    -------
    Sums
        The same to the last bit wherever and whenever it is made.
    """
    tally = _Tally(part)
    for when, values in _blocks(part):
        tally.add(when, values)
    return tally.finished()


def mean_sums(part: Part) -> tuple[Floats, Floats]:
    """Sum up only what the ocean mean needs.

    Parameters
    ----------
    part : Part

    Returns
    -------
    above, below : (n, 2) array
        As in :class:`massfit.screening.sums.Sums`.
    """
    above, below = [], []
    for _, values in _blocks(part):
        finite = np.isfinite(values)
        above.append(np.where(finite, values, 0.0) @ part.weights)
        below.append(finite @ part.weights)
    return np.concatenate(above), np.concatenate(below)


def _blocks(part: Part) -> Iterator[tuple[slice, Floats]]:
    """Give times and values (n_when, n_cell) of blocks that begin where the stored ones do."""
    length = part.block
    start = part.when.start
    while start < part.when.stop:
        when = slice(start, min((start // length + 1) * length, part.when.stop))
        values = part.source.read(when, part.rows)
        yield when, values.reshape(values.shape[0], -1)
        start = when.stop


class _Tally:
    """Grows sums block by block."""

    def __init__(self, part: Part) -> None:
        self._part = part
        self._wet, self._first = part.look.wet, part.look.pressure
        self._wet_weights = part.weights * self._wet[:, None]
        self._counted_from = bool(self._first.any())
        self._least_area = part.weights[:, 0].min()
        self._first_mean = self._first @ self._wet_weights
        cells, columns = self._wet.size, part.design.columns
        self._products = np.zeros((columns, FITTED))
        self._total = np.zeros((columns, cells))
        self._squares, self._count = np.zeros((2, cells))
        self._times = 0
        self._year_products = np.zeros((FITTED, FITTED))
        self._year_total = np.zeros((FITTED, cells))
        self._year_squares, self._years = np.zeros((2, cells))
        self._gaps = Gaps.none(columns)
        self._means: list[tuple[Floats, Floats]] = []
        self._year = 0
        self._begin_year(0)

    def add(self, when: slice, values: Floats) -> None:
        """Take in a block, (n_when, n_cell); it is used up."""
        finite = np.isfinite(values)
        odd = np.flatnonzero((finite != self._wet).any(axis=0))
        if self._counted_from:
            values -= self._first
        np.copyto(values, 0.0, where=~finite)
        mean, known = self._ocean_mean(values, finite, odd)
        mean = mean if mean is not None else self._given(when)
        if mean is not None:
            values -= mean[:, None]
        if odd.size:
            values[:, odd] *= finite[:, odd]
        year = self._part.year[when]
        ends = [*np.flatnonzero(np.diff(year)) + 1, year.size]
        for start, stop in zip([0, *ends[:-1]], ends, strict=True):
            if year[start] != self._year:
                self._end_year()
                self._begin_year(int(year[start]))
            rows = np.flatnonzero(known[start:stop]) + start
            days = self._part.days[when.start + rows]
            chosen = slice(start, stop) if rows.size == stop - start else rows
            self._add_rows(self._part.design.rows(days), values[chosen], finite[chosen], odd)

    def finished(self) -> Sums:
        """Give the sums."""
        self._end_year()
        above, below = (np.concatenate([pair[k] for pair in self._means]) for k in (0, 1))
        return Sums(
            self._products,
            self._total,
            self._squares,
            self._count,
            self._times,
            self._year_products,
            self._year_total,
            self._year_squares,
            self._years,
            self._gaps,
            above,
            below,
        )

    def _ocean_mean(
        self, values: Floats, finite: NDArray[np.bool_], odd: NDArray[np.intp]
    ) -> tuple[Floats | None, NDArray[np.bool_]]:
        """Note the ocean mean; give what of it is subtracted from `values`, and the times that have any value."""
        weights, first = self._part.weights, self._first
        below = np.tile(self._wet_weights.sum(axis=0), (values.shape[0], 1))
        above = values @ self._wet_weights + self._first_mean
        if odd.size:
            more = finite[:, odd].astype(np.float64) - self._wet[odd]
            below += more @ weights[odd]
            above += more @ (weights[odd] * first[odd, None])
            late = odd[~self._wet[odd]]
            above += values[:, late] @ weights[late]
        self._means.append((above, below))
        any_value = np.asarray(below[:, 0] > 0.5 * self._least_area)
        if not isinstance(self._part.mean, str):
            return None, any_value
        mean = np.divide(above[:, 0], below[:, 0], out=np.zeros(above.shape[0]), where=below[:, 0] > 0.0)
        area = self._wet_weights[:, 0].sum()
        return mean - (self._first_mean[0] / area if area > 0.0 else 0.0), any_value

    def _given(self, when: slice) -> Floats | None:
        mean = self._part.mean
        return np.nan_to_num(mean[when] - np.nanmean(mean)) if isinstance(mean, np.ndarray) else None

    def _add_rows(self, design: Floats, values: Floats, finite: NDArray[np.bool_], odd: NDArray[np.intp]) -> None:
        if not design.size:
            return
        fitted = design[:, :FITTED]
        self._products += design.T @ fitted
        self._times += design.shape[0]
        self._total += design.T @ values
        self._squares += np.einsum("tc,tc->c", values, values)
        count = np.where(self._wet, float(design.shape[0]), 0.0)
        if odd.size:
            count[odd] = finite[:, odd].sum(axis=0)
            more = finite[:, odd].astype(np.float64) - self._wet[odd]
            each = (design[:, :, None] * fitted[:, None, :]).reshape(design.shape[0], -1)
            products = (more.T @ each).reshape(odd.size, design.shape[1], FITTED)
            self._gaps = self._gaps.plus(Gaps(odd, products, np.zeros((odd.size, FITTED, FITTED))))
        self._count += count
        if self._year:
            self._year_times += design.shape[0]
            self._year_design += fitted.sum(axis=0)
            self._year_count += count

    def _begin_year(self, year: int) -> None:
        cells = self._wet.size
        self._year = year
        self._year_times, self._year_design = 0, np.zeros(FITTED)
        self._year_count = np.zeros(cells)
        self._before_year = self._total[0].copy()  # the first column is one: its total is the sum of the pressure

    def _end_year(self) -> None:
        if not self._year or not self._year_times:
            return
        whole = self._year_count == self._year_times
        design = self._year_design / self._year_times
        mean = np.where(whole, (self._total[0] - self._before_year) / self._year_times, 0.0)
        self._year_products += np.outer(design, design)
        self._year_total += np.outer(design, mean)
        self._year_squares += mean**2
        self._years += whole
        odd = np.flatnonzero(whole != self._wet)
        if odd.size:
            sign = np.where(whole[odd], 1.0, -1.0)
            products = sign[:, None, None] * np.outer(design, design)
            empty = np.zeros((odd.size, self._products.shape[0], FITTED))
            self._gaps = self._gaps.plus(Gaps(odd, empty, products))
