"""Coefficients that come in tables of their own: degree one, C20 and C30."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from massfit.gravity.field import Span, TideSystem

Name = tuple[str, int, int]
"""Kind (\"C\" or \"S\"), degree, order."""


@dataclass(frozen=True)
class TableRow:
    """Coefficients of one span.

    Parameters
    ----------
    span : Span
    values : mapping of (kind, degree, order) to float
        Kind is "C" or "S"; a coefficient without a value in this span is left out.
    """

    span: Span
    values: dict[Name, float]


@dataclass(frozen=True)
class CoefficientTable:
    """A table of a few coefficients over time.

    Parameters
    ----------
    rows : tuple of TableRow
        In order of time.
    tide_system : str
        Of C20.
    notes : tuple of str
        What was done to the values, and what the table says of itself.
    source : str
        File as the analyst wrote it.
    """

    rows: tuple[TableRow, ...]
    tide_system: TideSystem = "unknown"
    notes: tuple[str, ...] = ()
    source: str = ""

    @property
    def coefficients(self) -> tuple[Name, ...]:
        """Every coefficient that some row gives."""
        return tuple(sorted({name for row in self.rows for name in row.values}))

    def value(self, name: Name, span: Span) -> float | None:
        """Give a coefficient for a span.

        Parameters
        ----------
        name : (kind, degree, order)
        span : Span

        Returns
        -------
        float or None
            Of the row that shares most days with the span; None where none shares half of the shorter of the two.
        """
        values, edges = self._columns.get(name, (np.empty(0), np.empty((0, 2), dtype="datetime64[s]")))
        if not values.size:
            return None
        day = np.timedelta64(86400, "s")
        shared = (np.minimum(edges[:, 1], span.end) - np.maximum(edges[:, 0], span.start)) / day
        best = int(np.argmax(shared))
        shorter = min(float((edges[best, 1] - edges[best, 0]) / day), span.days)
        return float(values[best]) if shared[best] > 0.0 and shared[best] >= 0.5 * shorter else None

    @cached_property
    def _columns(self) -> dict[Name, tuple[NDArray[np.float64], NDArray[np.datetime64]]]:
        """Values and spans of each coefficient."""
        found = {}
        for name in self.coefficients:
            rows = [row for row in self.rows if name in row.values]
            edges = np.array([(row.span.start, row.span.end) for row in rows], dtype="datetime64[s]")
            found[name] = np.array([row.values[name] for row in rows]), edges
        return found
