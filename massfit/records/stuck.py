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
    if pressure.size < _LEAST_SAMPLES:
        return np.zeros(pressure.size, dtype=bool)
    first = np.flatnonzero(np.diff(pressure, prepend=np.nan) != 0.0)
    lengths = np.diff(first, append=pressure.size)
    usual = float(np.quantile(lengths, _USUAL))
    lasting = time[first + lengths - 1] - time[first] >= _LEAST_TIME
    stuck = lasting & (lengths >= _LEAST_SAMPLES) & (lengths > _BEYOND_USUAL * usual)
    return np.repeat(stuck, lengths)
