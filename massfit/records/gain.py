"""A change of the gain of a sensor: one day the tide is larger or smaller, and stays so."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from massfit.records.nodal import nodal_modulation
from massfit.records.record import TidalConstant
from massfit.records.tidal_lines import greenwich_argument

_BLOCK_DAYS = 14.765
"""From spring tide to spring tide: the gain of a block depends least on lines that are a little wrong."""
_SIDE = 3
"""Blocks whose mean is the gain before, and the gain after."""
_LEAST_HOURS = 120
"""Of a block."""
_REFERENCE = ("M2", "S2", "N2", "K1", "O1", "P1", "K2", "Q1")
"""Lines of the reference. A change of gain goes into the near neighbours of these, which therefore stay out."""
_LEAST_TIDE = 100.0
"""Pa: of a smaller tide the gain cannot be told."""
_THRESHOLD = 8.0
"""Robust standard deviations of the change of gain."""
_SMALLEST = 0.02
"""Weather at the frequencies of the tides and what the modulation by the node leaves out are smaller."""
_REST_SHARE = 0.5
"""Before and after the gain changes by less than this share: a tide that is larger in summer does not rest so."""
_SD_PER_MEDIAN = 1.4826

RULE = "told by the tide: what is slow before and after is not on one scale either; leave one side out if it matters"


def find_gain_change(
    days: NDArray[np.float64], pressure: NDArray[np.float64], constants: Sequence[TidalConstant]
) -> tuple[float, float] | None:
    """Find the largest lasting change of the gain of a record, by its tide.

    Parameters
    ----------
    days : (n,) array
        Days from 1 January 2000, increasing; hours.
    pressure : (n,) array
        Pa, with the tide, without spikes.
    constants : sequence of TidalConstant
        Of the whole record.

    Returns
    -------
    (float, float) or None
        Day and gain after over gain before; None where there is none, or the record is shorter than three months.

    Examples
    --------
    >>> days = np.arange(0, 200, 1 / 24)
    >>> tide = 3000.0 * np.cos(2 * np.pi * 1.9322736 * days)
    >>> lag = greenwich_argument("M2")
    >>> constant = TidalConstant("M2", 1.9322736, 3200.0, lag, 1.0)
    >>> found = find_gain_change(days, np.where(days < 120, 1.0, 1.2) * tide, [constant])
    >>> round(found[0]), round(found[1], 2)
    (120, 1.2)
    """
    if days.size < 2 * _SIDE * _LEAST_HOURS:
        return None
    tide, seen = (_within_a_day(days, each) for each in (_reference(days, constants), pressure))
    if np.std(tide) < _LEAST_TIDE:
        return None
    block = np.floor((days - days[0]) / _BLOCK_DAYS).astype(np.int64)
    products, squares, counts = (np.bincount(block, each) for each in (tide * seen, tide**2, np.ones(days.size)))
    full = np.flatnonzero(counts >= _LEAST_HOURS)
    if full.size < 2 * _SIDE:
        return None
    gain = products[full] / squares[full]
    means = np.convolve(gain, np.full(_SIDE, 1.0 / _SIDE), mode="valid")
    change = means[_SIDE:] - means[:-_SIDE]
    scatter = _SD_PER_MEDIAN * float(np.median(np.abs(np.diff(gain)))) * np.sqrt(1.0 / _SIDE)
    place = int(np.argmax(np.abs(change)))
    beside = change[[each for each in (place - _SIDE, place + _SIDE) if 0 <= each < change.size]]
    least = max(_THRESHOLD * scatter, _SMALLEST * float(np.median(np.abs(gain))))
    if abs(change[place]) <= least or np.any(np.abs(beside) > _REST_SHARE * abs(change[place])):
        return None
    middle = days[0] + full[place + _SIDE] * _BLOCK_DAYS
    near = np.abs(days - middle) <= 2.0 * _BLOCK_DAYS
    day = _best_split(days[near], tide[near], seen[near])
    sides = days < day, days >= day
    before, after = ((tide[side] @ seen[side]) / (tide[side] @ tide[side]) for side in sides)
    return (day, float(after / before)) if abs(after - before) > least else None


def _reference(days: NDArray[np.float64], constants: Sequence[TidalConstant]) -> NDArray[np.float64]:
    """Tide of the main lines with one set of constants, followed through the turn of the node."""
    height = np.zeros(days.size)
    for constant in (each for each in constants if each.name in _REFERENCE):
        factor, turn = _modulation(constant, days)
        argument = 2.0 * np.pi * constant.cycles_per_day * days + greenwich_argument(constant.name) + turn
        height += constant.amplitude * factor * np.cos(argument - constant.greenwich_lag)
    return height


def _modulation(constant: TidalConstant, days: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Size and turn against those in the middle of the record, which the constant holds."""
    at = np.array([days[0], 0.5 * (days[0] + days[-1]), days[-1]])
    factor, turn = np.array([nodal_modulation(constant.name, float(day)) or (1.0, 0.0) for day in at]).T
    return np.interp(days, at, factor / factor[1]), np.interp(days, at, turn - turn[1])


def _within_a_day(days: NDArray[np.float64], values: NDArray[np.float64]) -> NDArray[np.float64]:
    """Take the mean of each day out."""
    day = np.floor(days - np.floor(days[0])).astype(np.int64)
    return np.asarray(values - (np.bincount(day, values) / np.maximum(np.bincount(day), 1))[day])


def _best_split(days: NDArray[np.float64], tide: NDArray[np.float64], seen: NDArray[np.float64]) -> float:
    """Time at which two gains, one before and one after, leave least."""
    products, squares = np.cumsum(tide * seen), np.cumsum(tide**2)
    inner = slice(24, -24)
    explained = products[inner] ** 2 / squares[inner]
    explained += (products[-1] - products[inner]) ** 2 / (squares[-1] - squares[inner])
    return float(days[inner][int(np.argmax(explained))] + 0.5 / 24.0)
