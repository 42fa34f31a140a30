"""What is fitted to every cell, and the lines beside the annual one that tell of the noise under it."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.constants import TROPICAL_YEAR_DAYS
from massfit.phasor import annual_basis
from massfit.screening.times import TimeAxis

FITTED = 6
"""Columns that are fitted: level, trend, annual and semi-annual cosine and sine."""

ANNUAL = slice(2, 4)
"""Columns of the annual cycle."""

_MOST_LINES = 6  # on each side of the annual line
_BAND = (0.6, 0.8)  # how far the lines reach below and above the annual one, cycles per year


@dataclass(frozen=True)
class Design:
    """Columns over the times of one field.

    Parameters
    ----------
    reference_year : int
        Phases count from its 1 January.
    begin_days, span_days : float
        Begin of the first interval, in days since then, and length of the field.
    lines : tuple of float
        Frequencies beside the annual line, cycles per tropical year, ascending.
    """

    reference_year: int
    begin_days: float
    span_days: float
    lines: tuple[float, ...]

    @property
    def columns(self) -> int:
        """Number of columns: those that are fitted, then cosine and sine of each line."""
        return FITTED + 2 * len(self.lines)

    def rows(self, days: NDArray[np.float64]) -> NDArray[np.float64]:
        """Columns at some times.

        The lines carry a half-wave taper, the square root of two times the sine of the share of the field that has
        passed times pi: red noise then leaks a hundred times less from below (Percival & Walden 1993, section 3.4).

        Parameters
        ----------
        days : (n,) array
            Days since 1 January 00:00 UTC of the reference year.

        Returns
        -------
        (n, columns) array
        """
        share = (days - self.begin_days) / self.span_days
        taper = np.sqrt(2.0) * np.sin(np.pi * np.clip(share, 0.0, 1.0))
        angle = 2.0 * np.pi / TROPICAL_YEAR_DAYS * np.outer(days, self.lines)
        waves = np.stack([np.cos(angle), np.sin(angle)], axis=-1).reshape(days.size, -1)
        fitted = [np.ones_like(days), 2.0 * share - 1.0, annual_basis(days), annual_basis(days, 2)]
        return np.column_stack([*fitted, taper[:, None] * waves])


def make_design(axis: TimeAxis, reference_year: int) -> Design:
    """Columns for the times of a field.

    Parameters
    ----------
    axis : TimeAxis
    reference_year : int

    Returns
    -------
    Design

    Examples
    --------
    >>> from massfit.screening.times import time_axis
    >>> months = np.arange("2010-01", "2015-01", dtype="datetime64[M]").astype("datetime64[ns]")
    >>> [round(line, 2) for line in make_design(time_axis("invented", months), 2010).lines]
    [0.6, 0.8, 1.2, 1.4, 1.6]
    """
    begin = float(axis.days(reference_year)[0]) - 0.5 * axis.step_days
    return Design(reference_year, begin, axis.span_days, line_frequencies(axis.span_days / TROPICAL_YEAR_DAYS))


def line_frequencies(years: float) -> tuple[float, ...]:
    """Frequencies on both sides of the annual line, no nearer to it than one cycle over the whole field.

    Parameters
    ----------
    years : float
        Length of the field, at least 3.

    Returns
    -------
    tuple of float
        Cycles per tropical year, ascending; at most 12, between 0.4 and 1.8.
    """
    below, above = (
        np.unique(np.rint(np.linspace(1, farthest, min(_MOST_LINES, farthest)))) / years
        for farthest in (max(1, int(width * years + 1e-6)) for width in _BAND)
    )
    return tuple(float(line) for line in np.concatenate([1.0 - below[::-1], 1.0 + above]))
