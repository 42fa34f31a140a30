"""Times of a record whose file holds none: a first instant and an interval, from the network file."""

import numpy as np
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.io.network.schema import utc
from massfit.io.records.deployment import DeploymentFile


def stated_time(count: int, entry: DeploymentFile) -> NDArray[np.datetime64]:
    """Make times of samples that follow each other at one interval.

    Parameters
    ----------
    count : int
        Number of samples.
    entry : DeploymentFile
        Its `start_time` and `interval_s`.

    Returns
    -------
    (n,) array of datetime64[ns]

    Raises
    ------
    InputError
        One of the two is missing, or there are more samples than years that are read.

    Examples
    --------
    >>> from datetime import datetime
    >>> entry = DeploymentFile("a.mat", start_time=datetime(2011, 1, 31, 23, 59, 52, 525000), interval_s=15.0)
    >>> stated_time(3, entry).astype("datetime64[ms]").tolist()[2].isoformat()
    '2011-02-01T00:00:22.525000'
    """
    if entry.start_time is None or entry.interval_s is None:
        lacking = "start_time" if entry.start_time is None else "interval_s"
        allowed = "start_time and interval_s go together"
        raise InputError(Fault(entry.file, lacking, "the key is missing", allowed, "Add it"))
    first = utc(entry.start_time)
    days = count * entry.interval_s / 86_400.0
    last_year = first.astype("datetime64[Y]").astype(int) + 1970 + days / 365.25
    if not last_year < 2200:
        problem = f"{count} samples every {entry.interval_s:g} s end in the year {last_year:.0f}"
        raise InputError(Fault(entry.file, "interval_s", problem, "Must end before 2200", "Correct it"))
    # whole nanoseconds: an interval that binary fractions cannot hold does not add up
    return np.asarray(first + np.round(np.arange(count) * (entry.interval_s * 1e9)).astype("timedelta64[ns]"))
