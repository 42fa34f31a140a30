"""The times of an ocean model: equal steps, whole years, long enough."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.constants import TROPICAL_YEAR_DAYS
from massfit.errors import Fault, InputError
from massfit.phasor import days_since

SHORTEST_YEARS = 3.0
"""Shortest field that is screened: with less the annual line has no neighbours that tell of the noise under it."""

LONGEST_STEP_DAYS = 31.0
"""Longest step: months. The semi-annual cycle needs no less."""

UNEVEN = 0.12
"""Share of the step by which a step may differ: months of 28 to 31 days are even."""

MOST_MISSING = 0.1
"""Largest share of the times that may be missing between the first and the last."""

WHOLE_YEAR = 0.95
"""Share of its times that a calendar year needs for its mean to count."""


@dataclass(frozen=True, eq=False)
class TimeAxis:
    """Times of a field, judged.

    Parameters
    ----------
    time : (n_time,) array of datetime64[ns]
        Middles of intervals.
    step_days : float
        Length of an interval.
    """

    time: NDArray[np.datetime64]
    step_days: float

    @property
    def span_days(self) -> float:
        """From the begin of the first interval to the end of the last."""
        return float((self.time[-1] - self.time[0]) / np.timedelta64(1, "D")) + self.step_days

    @property
    def years(self) -> NDArray[np.int64]:
        """Calendar year of each time, (n_time,)."""
        return np.asarray(self.time.astype("datetime64[Y]").astype(np.int64) + 1970)

    @property
    def whole_years(self) -> frozenset[int]:
        """Calendar years of which hardly a time is missing."""
        years, counts = np.unique(self.years, return_counts=True)
        enough = WHOLE_YEAR * TROPICAL_YEAR_DAYS / self.step_days
        # of months 12 are 0.99 of a year; a year of five-day means may have 73
        return frozenset(int(year) for year, count in zip(years, counts, strict=True) if count >= np.floor(enough))

    def days(self, reference_year: int) -> NDArray[np.float64]:
        """Days since 1 January 00:00 UTC of the reference year, (n_time,)."""
        return days_since(self.time, reference_year)


def time_axis(name: str, time: NDArray[np.datetime64]) -> TimeAxis:
    """Judge the times of a field.

    Parameters
    ----------
    name : str
        Of the model, for faults.
    time : (n_time,) array of datetime64[ns]

    Returns
    -------
    TimeAxis

    Raises
    ------
    InputError
        Too short, too coarse, of uneven steps, or with too much missing.

    Examples
    --------
    >>> months = np.arange("2010-01", "2016-01", dtype="datetime64[M]").astype("datetime64[ns]")
    >>> axis = time_axis("invented", months)
    >>> round(axis.step_days, 1), len(axis.whole_years)
    (30.4, 6)
    """
    steps = np.diff(time) / np.timedelta64(1, "D")
    if not steps.size or steps.min() <= 0.0:
        raise InputError(Fault(name, "time", "the times do not increase or are fewer than two", "Must be in order"))
    typical = float(np.median(steps))
    # a missing interval makes a step of a whole number of them
    number = np.maximum(np.rint(steps / typical), 1.0)
    step = float(steps.sum() / number.sum())
    axis = TimeAxis(time, step)
    uneven = np.flatnonzero(np.abs(steps - number * step) > UNEVEN * step)
    faults = []
    if uneven.size:
        first = str(time[uneven[0]])[:16]
        problem = f"the steps are uneven: mostly {typical:.4g} days, but {steps[uneven[0]]:.4g} days after {first}"
        allowed = "Must be equal steps or calendar months; a time that is missing may be left out"
        faults.append(Fault(name, "time", problem, allowed, "Average the field over equal intervals"))
    missing = 1.0 - time.size / (number.sum() + 1.0)
    if not uneven.size and missing > MOST_MISSING:
        problem = f"{100 * missing:.0f} % of the times between the first and the last are missing"
        allowed = f"At most {100 * MOST_MISSING:.0f} %"
        faults.append(Fault(name, "time", problem, allowed, "Give every file, or a stretch without gaps"))
    if typical > LONGEST_STEP_DAYS:
        problem, allowed = f"the step is {typical:.4g} days", "Must be a month or less"
        faults.append(Fault(name, "time", problem, allowed, "Give daily to monthly means"))
    if axis.span_days < SHORTEST_YEARS * 365.0:
        problem = f"the field is {axis.span_days / TROPICAL_YEAR_DAYS:.2f} years long"
        allowed = f"Must be {SHORTEST_YEARS:.0f} years or more"
        faults.append(Fault(name, "time", problem, allowed, "Give a longer run; ten years or more tell much better"))
    if faults:
        raise InputError(faults)
    return axis
