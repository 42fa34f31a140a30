"""Stretches in which a recorder repeats one value: a stalled counter, a logger that lost its sensor."""

import numpy as np
from numpy.typing import NDArray

_LEAST_SAMPLES = 6
"""Shorter runs happen by chance in a calm."""
_BEYOND_USUAL = 5.0
"""A stuck run is longer than so many times the run that one sample in a hundred belongs to, or more than which."""
_USUAL = 0.99
_LEAST_TIME = np.timedelta64(1, "h")
"""Around high and low water a coarse count stands still for less."""

RULE = "an hour or more, and far longer than the counting step explains"


def find_stuck(time: NDArray[np.datetime64], pressure: NDArray[np.float64]) -> NDArray[np.bool_]:
    """Find samples that repeat the one before for longer than the counting step of the record explains.

    Parameters
    ----------
    time : (n,) array of datetime64
        Increasing.
    pressure : (n,) array
        Pa, as recorded: tides are what makes a repeated value suspicious.

    Returns
    -------
    (n,) array of bool
        True over the whole of each run, its first sample too.

    Notes
    -----
    A run counts when it has six samples, lasts an hour, and is five times longer than 99 of 100 runs. The last
    condition spares a record of coarse counts, where runs are the rule.

    Examples
    --------
    >>> pressure = np.sin(np.arange(40.0))
    >>> pressure[20:29] = 0.5
    >>> hours = np.datetime64("2016-01-01", "ns") + np.arange(40) * np.timedelta64(1, "h")
    >>> np.flatnonzero(find_stuck(hours, pressure)).tolist()
    [20, 21, 22, 23, 24, 25, 26, 27, 28]
    """
    stuck = np.zeros(pressure.size, dtype=bool)
    edges = np.flatnonzero(np.diff(pressure[1:] == pressure[:-1], prepend=False, append=False))
    first, last = edges[::2], edges[1::2]
    if not first.size:
        return stuck
    lengths = last - first + 1
    far_longer = lengths > _BEYOND_USUAL * _usual_length(lengths, pressure.size)
    found = far_longer & (lengths >= _LEAST_SAMPLES) & (time[last] - time[first] >= _LEAST_TIME)
    for start, stop in zip(first[found], last[found], strict=True):
        stuck[start : stop + 1] = True
    return stuck


def _usual_length(lengths: NDArray[np.int64], samples: int) -> int:
    """Length that 99 of 100 runs do not exceed; a sample that differs from both neighbours is a run of one."""
    runs = samples - int((lengths - 1).sum())
    singles = runs - lengths.size
    rank = int(_USUAL * (runs - 1))
    return 1 if rank < singles else int(np.partition(lengths, rank - singles)[rank - singles])
