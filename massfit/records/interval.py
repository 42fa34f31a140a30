"""Intervals between samples: the usual one, and how they are spoken of."""

import numpy as np
from numpy.typing import NDArray

_RUNS, _RUN = 200, 1000
"""Of a longer record the intervals of so many stretches, of so many each, are looked at: a few seconds of work
for five years of 15 s samples otherwise. Whole stretches, since intervals may come in a rhythm."""


def distinct_stamps(time: NDArray[np.datetime64]) -> NDArray[np.datetime64]:
    """Stamps in order, each once; those that are missing are left out.

    Nearly all records are in order, and then nothing is sorted.

    Parameters
    ----------
    time : (n,) array of datetime64[ns]
        Any order.

    Returns
    -------
    (m,) array of datetime64[ns]

    Examples
    --------
    >>> distinct_stamps(np.array(["2016-01-02", "NaT", "2016-01-01", "2016-01-02"], dtype="datetime64[D]")).tolist()
    [datetime.date(2016, 1, 1), datetime.date(2016, 1, 2)]
    """
    known = ~np.isnat(time)
    stamps = time if known.all() else time[known]
    if (stamps[1:] > stamps[:-1]).all():
        return stamps
    stamps = np.sort(stamps)
    return stamps[np.insert(stamps[1:] > stamps[:-1], 0, True)]


def usual_interval_ns(time: NDArray[np.datetime64]) -> float:
    """Median interval between samples.

    Parameters
    ----------
    time : (n,) array of datetime64[ns]
        In order; two or more.

    Returns
    -------
    float
        Nanoseconds.

    Examples
    --------
    >>> usual_interval_ns(np.array(["2016-01-01T00", "2016-01-01T01", "2016-01-01T05"], dtype="datetime64[ns]")) / 1e9
    9000.0
    """
    steps = time.size - 1
    if steps <= _RUNS * _RUN:
        return float(np.median(np.diff(time).astype(np.int64)))
    first = np.linspace(0, steps - _RUN, _RUNS).astype(np.int64)
    place = (first[:, None] + np.arange(_RUN)).ravel()
    return float(np.median((time[place + 1] - time[place]).astype(np.int64)))


def spoken_interval(seconds: float | None) -> str:
    """Name an interval of time in the largest unit that it fills.

    Parameters
    ----------
    seconds : float or None
        None where it is not known.

    Returns
    -------
    str

    Examples
    --------
    >>> spoken_interval(900.0), spoken_interval(86400.0), spoken_interval(5400.0), spoken_interval(None)
    ('15 min', '1 d', '1.5 h', '?')
    """
    if seconds is None:
        return "?"
    for unit, length in (("d", 86_400.0), ("h", 3_600.0), ("min", 60.0)):
        if seconds >= length:
            return f"{seconds / length:.4g} {unit}"
    return f"{seconds:.4g} s"
