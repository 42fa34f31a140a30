"""Hours in which a recorder did not measure the sea floor it stands on: bumped, lifted, badly powered."""

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import median_filter

from massfit.records.clean import running_scale

_MEDIAN_HOURS = 49
"""Hours of the running median that the level is taken from: two days."""
_LONGEST_HOURS = 12
"""A stretch that lasts longer is weather, or for the analyst to judge."""
_THRESHOLD = 10.0
"""Robust standard deviations."""
_SMALLEST = 1000.0
"""Pa: 10 cm of water, more than the tides of a short record leave, and than the mean of an hour of a tsunami."""

RULE = (
    f"up to {_LONGEST_HOURS} hours apart from the median of two days by {_THRESHOLD:.0f} robust standard deviations "
    f"and {_SMALLEST / 100.0:.0f} hPa"
)


def find_disturbed(level: NDArray[np.float64]) -> NDArray[np.bool_]:
    """Find short runs of hours that stand apart from the days around them.

    The running median of five samples lets clusters of bad samples pass, on purpose, since a
    tsunami is such a cluster too. But the waves of a tsunami cancel in the mean of an hour,
    and what a bump or a bad battery leaves there does not.

    Parameters
    ----------
    level : (n,) array
        Hourly means, Pa, free of tides and with changes of level taken out.

    Returns
    -------
    (n,) array of bool

    Examples
    --------
    >>> level = 30.0 * np.sin(np.arange(200.0) ** 2)
    >>> level[90:95] += 4000.0
    >>> np.flatnonzero(find_disturbed(level)).tolist()
    [90, 91, 92, 93, 94]
    """
    if level.size < _MEDIAN_HOURS:
        return np.zeros(level.size, dtype=bool)
    apart = np.abs(level - median_filter(level, size=_MEDIAN_HOURS, mode="mirror"))
    outside = apart > np.maximum(_THRESHOLD * running_scale(apart), _SMALLEST)
    first = np.flatnonzero(np.diff(outside, prepend=not outside[0]))
    lengths = np.diff(first, append=outside.size)
    return np.asarray(outside & np.repeat(lengths <= _LONGEST_HOURS, lengths))
