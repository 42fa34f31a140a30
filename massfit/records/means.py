"""Daily means from the hours of a record, each hour weighted by the time it stands for."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.records.hourly import Hourly

LEAST_SHARE = 0.75
"""Of a day: 18 of 24 hours."""
_LONGEST_HOURS = 6.0
"""An hour stands for at most so long."""


@dataclass(frozen=True)
class Days:
    """Daily means.

    Parameters
    ----------
    day : (n,) array of int
        Days from 1 January 2000, increasing.
    pressure : (n,) array
        Mean brought to noon, Pa.
    left_out : int
        Days with data but not enough of them on one level.
    """

    day: NDArray[np.int64]
    pressure: NDArray[np.float64]
    left_out: int


def daily_means(hours: Hourly, breaks: NDArray[np.float64]) -> Days:
    """Average the hours of each day, and bring the mean to noon along the slope of the days around.

    An hour stands for the time to its nearer neighbour: one in a three-hourly stretch counts three
    times as much as one in an hourly stretch. A day needs three quarters of its time. A day
    that holds a change of level is split there, and its longer part may stand for it.

    Parameters
    ----------
    hours : Hourly
        Free of short tides.
    breaks : (k,) array
        Times at which a new level begins, days, increasing.

    Returns
    -------
    Days

    Examples
    --------
    >>> hour = np.concatenate([np.arange(24), np.arange(24, 48, 3)])
    >>> days = daily_means(Hourly(hour, hour / 24, np.zeros(32), np.where(hour < 24, 1.0, 3.0)), np.empty(0))
    >>> days.day.tolist()
    [0, 1]
    """
    if not hours.hour.size:
        return Days(np.empty(0, np.int64), np.empty(0), 0)
    day = hours.hour // 24
    level = np.searchsorted(breaks, hours.days, side="right")
    changed = (np.diff(day, prepend=day[:1] - 1) != 0) | (np.diff(level, prepend=level[:1]) != 0)
    first = np.flatnonzero(changed)
    weight = _hours_stood_for(hours.hour)
    total = np.add.reduceat(weight, first)
    enough = total >= LEAST_SHARE * 24
    mean = (np.add.reduceat(weight * hours.pressure, first) / total)[enough]
    middle = (np.add.reduceat(weight * hours.days, first) / total)[enough]
    left_out = int(np.unique(day).size - np.count_nonzero(enough))
    day, level = day[first][enough], level[first][enough]
    return Days(day, mean + _slopes(middle, mean, level) * (day + 0.5 - middle), left_out)


def _hours_stood_for(hour: NDArray[np.int64]) -> NDArray[np.float64]:
    """Distance to the nearer neighbour; a gap on one side is not taken for a long interval."""
    step = np.diff(hour).astype(float)
    if not step.size:
        return np.ones(hour.size)
    nearer = np.minimum(np.append(step, step[-1]), np.insert(step, 0, step[0]))
    return np.asarray(np.minimum(nearer, _LONGEST_HOURS))


def _slopes(days: NDArray[np.float64], values: NDArray[np.float64], level: NDArray[np.int64]) -> NDArray[np.float64]:
    """Slope at each day along its neighbours on the same level; zero for a day alone."""
    slopes = np.zeros(days.size)
    for one in np.unique(level):
        here = np.flatnonzero(level == one)
        if here.size > 1:
            slopes[here] = np.gradient(values[here], days[here])
    return slopes
