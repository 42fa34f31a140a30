"""A pressure record as read, and as reduced to daily means."""

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

Settling = Literal["model", "trim"] | float
"""What is done about the first days on the bottom; a number is days that are left out."""


@dataclass(frozen=True)
class Action:
    """Something that was done to a record.

    Parameters
    ----------
    what : str
        A short verb phrase, for example "spikes rejected".
    count : int
        Number of samples (or days) concerned.
    detail : str
        Rule and values, for the report.
    """

    what: str
    count: int
    detail: str = ""


@dataclass(frozen=True)
class LevelChange:
    """A change of level within a deployment, across which one step is fitted.

    Parameters
    ----------
    start, end : numpy.datetime64
        The same instant for a step. The days a ramp touches are left out.
    found : bool
        Whether it was found in the record; otherwise the analyst declared it.
    size : float or None
        Level after less level before, Pa, as found; None where declared. The fit of the site has a better one.
    in_gap : bool
        Whether the record has nothing between start and end, so that it may have been a step.

    Examples
    --------
    >>> fall = LevelChange(np.datetime64("2016-03-01"), np.datetime64("2016-03-04"), found=True, size=9500.0)
    >>> fall.kind
    'ramp'
    """

    start: np.datetime64
    end: np.datetime64
    found: bool
    size: float | None = None
    in_gap: bool = False

    @property
    def kind(self) -> str:
        """Say what it is: "step", "ramp" or "change across a gap"."""
        if self.start == self.end:
            return "step"
        return "change across a gap" if self.in_gap else "ramp"


@dataclass(frozen=True)
class Calibrations:
    """Readings of a pressure recorder on the bottom at a known pressure, such as that of air inside it.

    They show the drift of the recorder and nothing of the ocean. Only their changes matter.

    Parameters
    ----------
    time : (m,) array of datetime64[ns]
        UTC.
    pressure : (m,) array of float64
        Reading less the known pressure, Pa; any constant may be added.
    sd : (m,) array of float64
        Standard deviation of each, Pa.
    """

    time: NDArray[np.datetime64]
    pressure: NDArray[np.float64]
    sd: NDArray[np.float64]


NO_CALIBRATIONS = Calibrations(np.array([], "datetime64[ns]"), np.zeros(0), np.zeros(0))


@dataclass(frozen=True)
class Record:
    """One instrument on the bottom, as read.

    Parameters
    ----------
    site, deployment : str
        Site id and a label of the deployment that is unique in the network, "A3/1".
    time : (n,) array of datetime64[ns]
        UTC, middle of each sample's interval.
    pressure : (n,) array of float64
        Anomaly from `reference`, Pa; NaN is missing.
    reference : float
        Pressure that was subtracted, Pa.
    drift : str
        "exponential+linear", "logarithm+linear", "linear", "none" or "compare".
    steps : tuple of datetime64
        Declared changes of level; a new level begins at each.
    ramps : tuple of (datetime64, datetime64)
        First and last instant of declared changes of level that took time.
    find_steps : bool
        Whether the analyst asked for changes of level to be found.
    settling : str or float
        "model": the drift of the fit takes it up; "trim": the first days are left out until the record has come to
        rest; or how many days are left out.
    source : str
        File, as the analyst wrote it.
    actions : tuple of Action
        What was done so far.
    units : str
        Unit in which the file was read; empty when built in memory.
    calibrations : Calibrations, optional
        Readings at a known pressure.

    Examples
    --------
    A year of hours, in Pa, from a recorder that settles by 20 hPa:

    >>> hours = np.arange(366 * 24)
    >>> time = np.datetime64("2016-01-01T00:30", "ns") + hours * np.timedelta64(1, "h")
    >>> record = Record("A3", "A3/1", time, 2000.0 * np.exp(-hours / 1000.0), reference=4.9e7)
    >>> record.drift, float(record.pressure[0])
    ('exponential+linear', 2000.0)
    """

    site: str
    deployment: str
    time: NDArray[np.datetime64]
    pressure: NDArray[np.float64]
    reference: float = 0.0
    drift: str = "exponential+linear"
    steps: tuple[np.datetime64, ...] = ()
    ramps: tuple[tuple[np.datetime64, np.datetime64], ...] = ()
    find_steps: bool = False
    settling: Settling = "model"
    source: str = ""
    actions: tuple[Action, ...] = ()
    units: str = ""
    calibrations: Calibrations | None = None


@dataclass(frozen=True)
class TidalConstant:
    """Amplitude and lag of one short tide over a record, by the fit that removed it.

    Parameters
    ----------
    name : str
        Darwin name.
    cycles_per_day : float
    amplitude : float
        As seen over the record, Pa; divided by `nodal_factor` it is that of 18.6 years.
    greenwich_lag : float
        Lag behind the equilibrium tide at Greenwich, radians in [0, 2 pi); `nodal_angle` is to be added for 18.6 years.
    amplitude_sd : float
        Standard error of the amplitude from what the record holds beside the line, Pa. That of the lag is this over the
        amplitude.
    nodal_factor, nodal_angle : float or None
        Modulation by the node of the Moon's orbit in the middle of the record; 1 and 0 (radians) for solar lines, None
        where it follows no simple rule.

    Examples
    --------
    >>> constant = TidalConstant("M2", 1.9322736, 3000.0, 1.2, 15.0)
    >>> round(float(np.degrees(constant.lag_sd)), 2)
    0.29
    """

    name: str
    cycles_per_day: float
    amplitude: float
    greenwich_lag: float
    amplitude_sd: float
    nodal_factor: float | None = None
    nodal_angle: float | None = None

    @property
    def lag_sd(self) -> float:
        """Standard error of the lag, radians; half a turn where the line is not seen at all."""
        return min(self.amplitude_sd / self.amplitude, np.pi) if self.amplitude > 0.0 else np.pi


@dataclass(frozen=True)
class DailyRecord:
    """Daily means of one deployment with short tides removed.

    Parameters
    ----------
    site, deployment : str
    time : (n,) array of datetime64[ns]
        Middle of each day, UTC; strictly increasing, gaps allowed.
    pressure : (n,) array of float64
        Pa; no NaN.
    start : datetime64[ns]
        First instant of the deployment, the origin of its drift.
    drift : str
    steps : tuple of datetime64
        Where the fit begins a new level: the instants of steps, the ends of ramps.
    tides : tuple of TidalConstant
        Largest first; empty where tides were already removed.
    actions : tuple of Action
        Everything done from file to daily mean.
    changes : tuple of LevelChange
        Steps and ramps, declared and found, in order of time.
    calibrations : Calibrations, optional
        Readings at a known pressure from the start on.
    """

    site: str
    deployment: str
    time: NDArray[np.datetime64]
    pressure: NDArray[np.float64]
    start: np.datetime64
    drift: str = "exponential+linear"
    steps: tuple[np.datetime64, ...] = ()
    tides: tuple[TidalConstant, ...] = ()
    actions: tuple[Action, ...] = ()
    changes: tuple[LevelChange, ...] = ()
    calibrations: Calibrations | None = None
