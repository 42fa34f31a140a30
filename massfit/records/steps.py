"""Sudden changes of level that nobody declared: a settling frame, a bump, a restarted counter."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

_WINDOW = 12
"""Samples of the level before and of the level after."""
_EDGE = 3
"""Samples on either side between which the change must happen."""
_LIKE = 0.7
"""Edge and change of level agree to this share: a ramp is not sharp, a wave does not last."""
_LEVEL_THRESHOLD = 4.0
"""Robust standard deviations of the change of level."""
_EDGE_THRESHOLD = 6.0
"""Robust standard deviations of the change at the edge."""
_BLOCK = 240
"""Samples over which the scale of restless stretches is taken: ten days of hours."""
_SMALLEST = 50.0
"""Pa; smaller steps are never called so."""
_LONGEST = 1.6
"""A window pair may last this much longer than without gaps."""
_SD_PER_MEDIAN = 1.4826


@dataclass(frozen=True)
class FoundSteps:
    """Steps of one record.

    Parameters
    ----------
    days : (k,) array
        Times at which a new level begins, in the clock of the samples, increasing.
    sizes : (k,) array
        Pa.
    threshold : float
        Smallest step that would have been found, Pa.
    """

    days: NDArray[np.float64]
    sizes: NDArray[np.float64]
    threshold: float


NO_STEPS = FoundSteps(np.empty(0), np.empty(0), np.inf)
"""The result of no search."""


def find_steps(
    days: NDArray[np.float64], pressure: NDArray[np.float64], *, known: NDArray[np.float64] | None = None
) -> FoundSteps:
    """Find sharp changes of level in a tide-free record.

    The mean of twelve samples is set against the mean of the twelve before, and three
    against three. At a step both differences stand far out of what weather and noise do
    to them, and agree: after a wave the level does not last, on a ramp the edge is small.

    Parameters
    ----------
    days : (n,) array
        Times, days, increasing.
    pressure : (n,) array
        Pa, free of short tides and spikes.
    known : (k,) array, optional
        Declared steps, which are not found again.

    Returns
    -------
    FoundSteps

    Notes
    -----
    A two-window comparison of means (Basseville & Nikiforov 1993, Detection of Abrupt
    Changes, chapter 2) on a robust scale, so that it needs no model of the noise. A step
    within half a day of hourly samples from the end of a record or a long gap is not seen.

    Examples
    --------
    >>> hours = np.arange(240) / 24
    >>> found = find_steps(hours, np.sin(hours) + 300.0 * (hours >= 5))
    >>> found.days.round(2).tolist(), found.sizes.round().tolist()
    ([4.98], [300.0])
    """
    if days.size < 2 * _WINDOW + 1:
        return NO_STEPS
    change, edge = _change(pressure, _WINDOW), _change(pressure, _EDGE)[_WINDOW - _EDGE : -(_WINDOW - _EDGE) or None]
    needed = np.maximum(_LEVEL_THRESHOLD * _scale(change), _EDGE_THRESHOLD * _scale(edge)).clip(_SMALLEST)
    lasting = days[2 * _WINDOW - 1 :] - days[: days.size - 2 * _WINDOW + 1]
    dense = lasting <= _LONGEST * 2 * _WINDOW * float(np.median(np.diff(days)))
    alike = (edge * change > 0) & (np.abs(edge) >= _LIKE * np.abs(change)) & (np.abs(change) >= _LIKE * np.abs(edge))
    strength = np.where(dense & alike, np.minimum(np.abs(change), np.abs(edge)) / needed, 0.0)
    begins = 0.5 * (days[_WINDOW - 1 : -_WINDOW] + days[_WINDOW : days.size - _WINDOW + 1])
    for step in () if known is None else known:
        _clear(strength, int(np.searchsorted(begins, step)))
    found = []
    while strength.size and strength[place := int(np.argmax(strength))] > 1.0:
        found.append(place)
        _clear(strength, place)
    found.sort()
    return FoundSteps(begins[found], change[found], float(needed.min()))


def _scale(change: NDArray[np.float64]) -> NDArray[np.float64]:
    """Robust scale of each ten days, never below that of the whole record."""
    size = np.abs(change)
    blocks = max(1, size.size // _BLOCK)
    local = np.median(size[: size.size // blocks * blocks].reshape(blocks, -1), axis=1)
    place = np.minimum(np.arange(size.size) // (size.size // blocks), blocks - 1)
    return np.asarray(_SD_PER_MEDIAN * np.maximum(local, np.median(size))[place])


def _change(pressure: NDArray[np.float64], window: int) -> NDArray[np.float64]:
    """Mean of a window less the mean of the window before, at every border between samples."""
    means = np.convolve(pressure - np.median(pressure), np.full(window, 1.0 / window), mode="valid")
    return np.asarray(means[window:] - means[:-window])


def _clear(strength: NDArray[np.float64], place: int) -> None:
    strength[max(0, place - _WINDOW) : place + _WINDOW + 1] = 0.0
