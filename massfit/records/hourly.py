"""Means over the hours of a record, whatever its sampling."""

from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray

from massfit.records.stretches import stretches

HOUR_NS = 3_600_000_000_000
DAY_NS = 24 * HOUR_NS
EPOCH = np.datetime64("2000-01-01T00:00:00", "ns")
"""Origin of times in days and of tidal phases."""
_JITTER_NS = 1_000_000_000
"""Stamps up to a second before the full hour belong to it: decimal days round either way."""


@dataclass(frozen=True)
class Hourly:
    """One value for every hour that has samples.

    Parameters
    ----------
    hour : (n,) array of int
        Hours from `EPOCH`, increasing.
    days : (n,) array
        Mean of the sample times, days from `EPOCH`.
    spread : (n,) array
        Variance of the sample times, days squared.
    pressure : (n,) array
        Mean of the samples, Pa.
    """

    hour: NDArray[np.int64]
    days: NDArray[np.float64]
    spread: NDArray[np.float64]
    pressure: NDArray[np.float64]

    def without(self, left_out: NDArray[np.bool_]) -> "Hourly":
        """Leave hours out."""
        kept = ~left_out
        return Hourly(self.hour[kept], self.days[kept], self.spread[kept], self.pressure[kept])


def days_from_epoch(time: NDArray[np.datetime64] | np.datetime64) -> NDArray[np.float64]:
    """Days from 1 January 2000 00:00 UTC.

    Examples
    --------
    >>> float(days_from_epoch(np.datetime64("2000-01-02T12:00", "ns")))
    1.5
    """
    return np.asarray((time - EPOCH) / np.timedelta64(DAY_NS, "ns"), dtype=float)


def instants(days: NDArray[np.floating[Any]]) -> NDArray[np.datetime64]:
    """Turn days from 1 January 2000 00:00 UTC into times, to the second.

    Examples
    --------
    >>> str(instants(np.array([1.5]))[0])
    '2000-01-02T12:00:00.000000000'
    """
    return np.asarray(EPOCH + np.round(days * 86_400).astype("timedelta64[s]"))


def hourly_means(time: NDArray[np.datetime64], pressure: NDArray[np.float64]) -> Hourly:
    """Average the samples of each hour, so that dense stretches do not weigh more.

    Parameters
    ----------
    time : (n,) array of datetime64[ns]
        Increasing.
    pressure : (n,) array
        Pa.

    Returns
    -------
    Hourly

    Examples
    --------
    >>> time = np.array(["2000-01-01T05:10", "2000-01-01T05:20", "2000-01-01T09:00"], dtype="datetime64[ns]")
    >>> hourly_means(time, np.array([1.0, 3.0, 7.0])).pressure.tolist()
    [2.0, 7.0]
    """
    if not time.size:
        return Hourly(np.empty(0, np.int64), *(np.empty(0) for _ in range(3)))
    since = time.astype("datetime64[ns]", copy=False).view(np.int64) - EPOCH.view(np.int64)
    every = np.arange((since[0] + _JITTER_NS) // HOUR_NS, (since[-1] + _JITTER_NS) // HOUR_NS + 2)
    edges = np.searchsorted(since, every * HOUR_NS - _JITTER_NS)
    filled = np.diff(edges) > 0
    hour, first, counts = every[:-1][filled], edges[:-1][filled], np.diff(edges)[filled]
    ends = np.append(first, time.size)
    offset, square, mean = (np.empty(hour.size) for _ in range(3))
    # whole hours, as many as a stretch begins
    seams = np.unique([*(np.searchsorted(first, part.start) for part in stretches(time.size)), hour.size])
    for begin, end in pairwise(seams.tolist()):
        hours, samples, starts = slice(begin, end), slice(ends[begin], ends[end]), first[begin:end] - first[begin]
        within = (since[samples] - np.repeat(hour[hours] * HOUR_NS, counts[hours])) / DAY_NS
        offset[hours] = np.add.reduceat(within, starts) / counts[hours]
        square[hours] = np.add.reduceat(within**2, starts) / counts[hours]
        mean[hours] = np.add.reduceat(pressure[samples], starts) / counts[hours]
    return Hourly(hour, hour / 24.0 + offset, np.maximum(square - offset**2, 0.0), mean)
