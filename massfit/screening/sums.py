"""Sums over the times of a field, cell by cell, that add up over parts of it: one pass is enough."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from massfit.screening.design import FITTED

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Gaps:
    """What single cells lack of the sums over the design that all cells share, or have against expectation.

    Parameters
    ----------
    cell : (m,) array of int
        Ascending.
    products : (m, columns, FITTED) array
        Added to the shared products of a cell; negative where an expected value is missing.
    year_products : (m, FITTED, FITTED) array
        The same for the products of yearly means.
    """

    cell: NDArray[np.intp]
    products: Floats
    year_products: Floats

    @classmethod
    def none(cls, columns: int) -> "Gaps":
        """No cell."""
        return cls(np.empty(0, dtype=np.intp), np.empty((0, columns, FITTED)), np.empty((0, FITTED, FITTED)))

    def plus(self, other: "Gaps") -> "Gaps":
        """Both together, in a fixed order of addition."""
        if not other.cell.size:
            return self
        if not self.cell.size:
            return other
        cell = np.union1d(self.cell, other.cell)
        products = np.zeros((cell.size, *self.products.shape[1:]))
        year_products = np.zeros((cell.size, FITTED, FITTED))
        for each in (self, other):
            place = np.searchsorted(cell, each.cell)
            products[place] += each.products
            year_products[place] += each.year_products
        return Gaps(cell, products, year_products)


@dataclass(frozen=True, eq=False)
class Sums:
    """Sums over some times of a field.

    Parameters
    ----------
    products : (columns, FITTED) array
        Of the design with its fitted columns, over the times that have any value.
    total : (columns, n_cell) array
        Of the design with the pressure, Pa.
    squares : (n_cell,) array
        Of the pressure, Pa2.
    count : (n_cell,) array
        Values.
    times : int
        Times with any value.
    year_products : (FITTED, FITTED) array
        Of yearly means of the fitted columns.
    year_total : (FITTED, n_cell) array
        Of these means with yearly means of the pressure, Pa.
    year_squares : (n_cell,) array
        Of yearly means, Pa2.
    years : (n_cell,) array
        Years whose mean counts.
    gaps : Gaps
    mean_above, mean_below : (n_time, 2) array
        Pressure times area and area at every time, Pa m2 and m2: with whole cells, and with their part of ocean.
    """

    products: Floats
    total: Floats
    squares: Floats
    count: Floats
    times: int
    year_products: Floats
    year_total: Floats
    year_squares: Floats
    years: Floats
    gaps: Gaps
    mean_above: Floats
    mean_below: Floats


def add_sums(first: Sums, second: Sums) -> Sums:
    """Add the sums of two parts of the same cells, the second of later times.

    Parameters
    ----------
    first : Sums
        Its big arrays are added to in place: it must not be used again.
    second : Sums

    Returns
    -------
    Sums
    """
    for name in ("total", "squares", "count", "year_total", "year_squares", "years"):
        grown = getattr(first, name)
        grown += getattr(second, name)
    return replace(
        first,
        products=first.products + second.products,
        times=first.times + second.times,
        year_products=first.year_products + second.year_products,
        gaps=first.gaps.plus(second.gaps),
        mean_above=np.concatenate([first.mean_above, second.mean_above]),
        mean_below=np.concatenate([first.mean_below, second.mean_below]),
    )
