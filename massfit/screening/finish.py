"""From sums to the numbers of each cell."""

from collections.abc import Sequence
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from massfit.screening.design import ANNUAL, FITTED
from massfit.screening.line_noise import LineNoise, noise_at_line
from massfit.screening.sums import Floats, Sums

LEAST_COVERAGE = 0.5
"""Share of the times at which a cell needs a value for its standard deviation and phasor."""

LEAST_COVERAGE_AT_LINE = 0.9
"""Share it needs for the noise at the annual line, whose lines know of no gaps."""

LEAST_YEARS = 3
"""Whole years from which a standard deviation of yearly means is taken: level and trend go off."""

_AT_ONCE = 100_000  # cells


@dataclass(frozen=True, eq=False)
class CellNumbers:
    """Numbers of each cell, NaN where it has too few values.

    Parameters
    ----------
    sd, annual_mean_sd : (n_cell,) array
        Pa.
    phasor : (2, n_cell) array
        In phase and quadrature, Pa.
    annual_sd : (n_record, n_cell) array
        Of one component of the annual phasor of a record, Pa.
    density, slope : (n_cell,) array
        At the annual line: Pa2 yr, and the power by which it falls.
    coverage : (n_cell,) array
        Share of the times with a value; 0 on land.
    """

    sd: Floats
    annual_mean_sd: Floats
    phasor: Floats
    annual_sd: Floats
    density: Floats
    slope: Floats
    coverage: Floats


def joined_cells(parts: Sequence[CellNumbers]) -> CellNumbers:
    """Join the numbers of bands of cells, in order.

    Parameters
    ----------
    parts : sequence of CellNumbers

    Returns
    -------
    CellNumbers
    """
    return CellNumbers(
        *(np.concatenate([getattr(part, each.name) for part in parts], axis=-1) for each in fields(CellNumbers))
    )


def cell_numbers(sums: Sums, wet: NDArray[np.bool_], tables: LineNoise, *, attenuation: float) -> CellNumbers:
    """Solve every cell.

    Parameters
    ----------
    sums : Sums
        Of all times.
    wet : (n_cell,) array of bool
        Cells that had water at the beginning.
    tables : LineNoise
    attenuation : float
        Share of the annual line that the means over intervals keep; it is made good.

    Returns
    -------
    CellNumbers
    """
    records = tables.record.shape[1]
    nothing = np.full(wet.size, np.nan)
    numbers = CellNumbers(
        sd=nothing.copy(),
        annual_mean_sd=nothing.copy(),
        phasor=np.tile(nothing, (2, 1)),
        annual_sd=np.tile(nothing, (records, 1)),
        density=nothing.copy(),
        slope=nothing.copy(),
        coverage=sums.count / max(sums.times, 1),
    )
    enough = sums.count >= max(LEAST_COVERAGE * sums.times, FITTED + 1)
    whole = enough.copy()
    whole[sums.gaps.cell] = False
    cells = np.flatnonzero(whole)
    for first in range(0, cells.size, _AT_ONCE):
        some = cells[first : first + _AT_ONCE]
        shared = np.broadcast_to(sums.products, (1, *sums.products.shape))
        _solve(numbers, sums, some, shared, sums.year_products[None], tables, attenuation)
    place = np.flatnonzero(enough[sums.gaps.cell])
    for first in range(0, place.size, _AT_ONCE // 10):
        some = place[first : first + _AT_ONCE // 10]
        cell = sums.gaps.cell[some]
        expected = wet[cell].astype(np.float64)[:, None, None]
        products = expected * sums.products + sums.gaps.products[some]
        year_products = expected * sums.year_products + sums.gaps.year_products[some]
        _solve(numbers, sums, cell, products, year_products, tables, attenuation)
    return numbers


def _solve(
    numbers: CellNumbers,
    sums: Sums,
    cell: NDArray[np.intp],
    products: Floats,
    year_products: Floats,
    tables: LineNoise,
    attenuation: float,
) -> None:
    """Fill in some cells; `products` are theirs, or one for all."""
    total, count = sums.total[:, cell], sums.count[cell]
    gram = products[:, :FITTED]
    # (n or 1, 6, 6) on (n, 6, 1): cells last outside
    solved = np.asarray((np.linalg.inv(gram) @ total[:FITTED].T[..., None])[..., 0].T, dtype=float)
    left = sums.squares[cell] - np.einsum("fc,fc->c", solved, total[:FITTED])
    numbers.sd[cell] = np.sqrt(np.maximum(left, 0.0) / (count - FITTED))
    numbers.phasor[:, cell] = solved[ANNUAL] / attenuation
    numbers.annual_mean_sd[cell] = _yearly(sums, cell, solved, year_products)
    expected = (products[:, FITTED:] @ solved.T[..., None])[..., 0].T
    waves = total[FITTED:] - expected
    squares = (waves[0::2] ** 2 + waves[1::2] ** 2) * (sums.times / count)
    known = count >= LEAST_COVERAGE_AT_LINE * sums.times
    noise = noise_at_line(squares[:, known], tables)
    numbers.density[cell[known]], numbers.slope[cell[known]] = noise.density, noise.slope
    numbers.annual_sd[:, cell[known]] = np.sqrt(noise.record_variance)


def _yearly(sums: Sums, cell: NDArray[np.intp], solved: Floats, year_products: Floats) -> Floats:
    """Spread of the yearly means of what the fit leaves."""
    squares = sums.year_squares[cell] - 2.0 * np.einsum("fc,fc->c", solved, sums.year_total[:, cell])
    squares += np.einsum("fc,fc->c", solved, (year_products @ solved.T[..., None])[..., 0].T)
    years = sums.years[cell]
    spread = np.sqrt(np.maximum(squares, 0.0) / np.maximum(years - 2.0, 1.0))
    return np.asarray(np.where(years >= LEAST_YEARS, spread, np.nan))
