"""A flexible curve below the diurnal tides: cubic splines that break at steps."""

from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

_KNOT_DAYS = 2.0
"""Distance of the knots: the curve follows periods above 4 days and no tide."""


def background_design(days: NDArray[np.float64], breaks: NDArray[np.float64]) -> csr_array:
    """Uniform cubic B-splines, a set of its own between two breaks.

    Parameters
    ----------
    days : (n,) array
        Times, days, increasing.
    breaks : (k,) array
        Times at which a new level begins, days, increasing.

    Returns
    -------
    (n, m) sparse array
        Four neighbouring splines a row, which sum to 1.

    References
    ----------
    de Boor, C. (1978), A Practical Guide to Splines, Springer.

    Examples
    --------
    >>> float(background_design(np.arange(5.0), np.array([2.5])).sum())
    5.0
    """
    edges = np.concatenate([[0], np.searchsorted(days, breaks), [days.size]])
    place, fraction = np.empty(days.size, dtype=np.int64), np.empty(days.size)
    first = 0
    for start, stop in pairwise(edges):
        if stop > start:
            piece = days[start:stop] - days[start]
            cells = max(1, int(np.ceil(piece[-1] / _KNOT_DAYS)))
            scaled = piece * (cells / max(piece[-1], _KNOT_DAYS))
            whole = np.minimum(np.floor(scaled), cells - 1)
            place[start:stop], fraction[start:stop] = first + whole.astype(np.int64), scaled - whole
            first += cells + 3
    columns = place[:, None] + np.arange(4)
    pointers = np.arange(0, 4 * days.size + 1, 4)
    return csr_array((_weights(fraction).ravel(), columns.ravel(), pointers), shape=(days.size, first))


def _weights(x: NDArray[np.float64]) -> NDArray[np.float64]:
    """Values of the four splines that overlap a cell, at the fraction x of it."""
    y = 1.0 - x
    return np.stack([y**3 / 6, (4 - 6 * x**2 + 3 * x**3) / 6, (4 - 6 * y**2 + 3 * y**3) / 6, x**3 / 6], axis=-1)
