"""The first days of a deployment, in which the recorder settles on the bottom and to its temperature."""

import numpy as np
from numpy.typing import NDArray

_STEP_DAYS = 7
"""The record has come to rest where it moves no more over a week than weeks do later."""
_AT_REST_AFTER_DAYS = 60
"""From here on weeks show what is usual; nothing beyond is ever trimmed."""
_LEAST_WEEKS = 30
"""Changes over a week that the usual one is told from."""
_THRESHOLD = 3.0
"""Robust standard deviations of the change over a week."""
_SD_PER_MEDIAN = 1.4826

RULE = (
    f"up to the first day after which a week changes the level by less than {_THRESHOLD:.0f} robust standard "
    f"deviations of such changes after day {_AT_REST_AFTER_DAYS}"
)


def settled_after(day: NDArray[np.int64], level: NDArray[np.float64], start: float) -> int:
    """Count the daily means before the recorder has come to rest.

    Parameters
    ----------
    day : (n,) array of int
        Increasing, gaps allowed.
    level : (n,) array
        Daily means, Pa, changes of level taken out.
    start : float
        First instant of the deployment, in the clock of `day`.

    Returns
    -------
    int
        Zero where the record is too short to say what is usual.

    Examples
    --------
    >>> day = np.arange(200)
    >>> settled_after(day, np.sin(2.0 * day) + 3000.0 * np.exp(-day / 4.0), 0.0)
    25
    """
    later = np.searchsorted(day, day + _STEP_DAYS)
    pairs = np.flatnonzero(later < day.size)
    pairs = pairs[day[later[pairs]] == day[pairs] + _STEP_DAYS]
    change = np.abs(level[later[pairs]] - level[pairs])
    usual = change[day[pairs] - start > _AT_REST_AFTER_DAYS]
    if usual.size < _LEAST_WEEKS:
        return 0
    at_rest = pairs[change <= _THRESHOLD * _SD_PER_MEDIAN * float(np.median(usual))]
    latest = int(np.searchsorted(day, start + _AT_REST_AFTER_DAYS))
    return min(int(at_rest[0]), latest) if at_rest.size else latest
