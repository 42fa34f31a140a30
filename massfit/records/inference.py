"""What a larger neighbour lets expect of a line that a record cannot part from it."""

from collections.abc import Collection, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.records.nodal import nodal_modulation
from massfit.records.tidal_lines import greenwich_argument

# the larger neighbour, and amplitude over its amplitude in the developed potential (Doodson 1921)
_OF_NEIGHBOUR = {
    "P1": ("K1", 0.331),
    "K2": ("S2", 0.272),
    "T2": ("S2", 0.0585),
    "pi1": ("K1", 0.0194),
    "nu2": ("N2", 0.190),
}
_LIKENESS = 0.15
"""The ocean answers alike at so near frequencies: within so much of the line, in each component (common practice)."""


@dataclass(frozen=True)
class Companion:
    """A line that stands too near a larger one.

    Parameters
    ----------
    name, larger : str
        Darwin names.
    ratio : float
        Expected amplitude over that of the larger one, as modulated by the node.
    turn : float
        Radians by which it is expected to lag more behind its phase at the epoch than the larger one behind its own.
    """

    name: str
    larger: str
    ratio: float
    turn: float


def companions(parted: Collection[str], days: float) -> tuple[Companion, ...]:
    """List the lines that a record does not part from a larger one, but of which that one lets expect something.

    Parameters
    ----------
    parted : collection of str
        Lines that the record tells apart.
    days : float
        Middle of the record, days from 1 January 2000 00:00 UTC.

    Returns
    -------
    tuple of Companion

    References
    ----------
    Schureman, P. (1958), Manual of Harmonic Analysis and Prediction of Tides, on the inference of constants.

    Examples
    --------
    >>> [each.name for each in companions({"M2", "K1", "S2", "O1"}, 5844.0)]
    ['P1', 'K2', 'T2', 'pi1']
    """
    found = []
    for name, (larger, ratio) in _OF_NEIGHBOUR.items():
        if name not in parted and larger in parted:
            (own, own_turn), (its, its_turn) = (nodal_modulation(each, days) or (1.0, 0.0) for each in (name, larger))
            turn = greenwich_argument(larger) - greenwich_argument(name) + its_turn - own_turn
            found.append(Companion(name, larger, ratio * own / its, float(np.remainder(turn, 2.0 * np.pi))))
    return tuple(found)


def expected_of(
    inferred: Sequence[Companion], names: Sequence[str], lines: NDArray[np.float64], noise: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Precision of the expectation, to be added to the normal equations of samples of weight 1.

    Parameters
    ----------
    inferred : sequence of Companion
    names : sequence of str
        All lines of the fit.
    lines : (2 n,) array
        Cosine coefficients of `names` and then sine coefficients, of an earlier fit; only sizes are taken from them.
    noise : (n,) array
        Variance of a sample at the frequency of each line.

    Returns
    -------
    (2 n, 2 n) array

    Examples
    --------
    >>> one = Companion("P1", "K1", 0.3, 0.0)
    >>> precision = expected_of([one], ["K1", "P1"], np.array([10.0, 3.0, 0.0, 0.0]), np.ones(2))
    >>> bool(np.allclose(precision @ [10.0, 3.0, 0.0, 0.0], 0.0))
    True
    """
    count = len(names)
    precision = np.zeros((2 * count, 2 * count))
    for each in inferred:
        own, its = names.index(each.name), names.index(each.larger)
        expected = each.ratio * np.hypot(lines[its], lines[its + count])
        if expected == 0.0:
            continue
        cosine, sine = each.ratio * np.cos(each.turn), each.ratio * np.sin(each.turn)
        departure = np.zeros((2, 2 * count))
        departure[0, [own, its, its + count]] = 1.0, -cosine, sine
        departure[1, [own + count, its, its + count]] = 1.0, -sine, -cosine
        precision += noise[its] / (_LIKENESS * expected) ** 2 * departure.T @ departure
    return precision
