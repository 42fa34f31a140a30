"""The clock on which an invented network lives."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from massfit.phasor import days_since
from massfit.simulate.options import SimulationOptions


@dataclass(frozen=True)
class Clock:
    """Regular time axis over whole days.

    Parameters
    ----------
    first_day : datetime64
        First day, UTC.
    n_days : int
    samples_per_day : int
        24 or 1; of recorders 5760 too.
    reference_year : int
        Origin of phases.
    """

    first_day: np.datetime64
    n_days: int
    samples_per_day: int
    reference_year: int

    @property
    def step_days(self) -> float:
        """Sampling interval, days."""
        return 1.0 / self.samples_per_day

    @property
    def time(self) -> NDArray[np.datetime64]:
        """Middle of each interval, (n_days * samples_per_day,) datetime64[ns]."""
        step = np.timedelta64(86_400 * 10**9 // self.samples_per_day, "ns")
        start = self.first_day.astype("datetime64[ns]") + step // 2
        return np.asarray(start + step * np.arange(self.n_days * self.samples_per_day))

    @property
    def days(self) -> NDArray[np.float64]:
        """Days from the phase origin at `time`."""
        return days_since(self.time, self.reference_year)

    @property
    def by_day(self) -> "Clock":
        """Clock of the same period with one value a day."""
        return replace(self, samples_per_day=1)

    @property
    def by_quarter_minute(self) -> "Clock":
        """Clock of the same period with a value every 15 s."""
        return replace(self, samples_per_day=5760)

    def daily(self, values: NDArray[np.float64]) -> NDArray[np.float64]:
        """Daily means of values whose last axis is this clock."""
        by_day = values.reshape(*values.shape[:-1], self.n_days, self.samples_per_day)
        return np.asarray(by_day.mean(axis=-1))


def make_clock(options: SimulationOptions) -> Clock:
    """Clock of a network: whole days from 1 January of the first year.

    Examples
    --------
    >>> make_clock(SimulationOptions(years=2, sampling="daily", first_year=2015)).time[0]
    np.datetime64('2015-01-01T12:00:00.000000000')
    """
    return Clock(
        first_day=np.datetime64(f"{options.first_year:04d}-01-01", "D"),
        n_days=round(365.25 * options.years),
        samples_per_day=1 if options.sampling == "daily" else 24,
        reference_year=options.first_year + int(options.years // 2),
    )
