"""`[[site.deployment]]`: how one record file is to be read."""

from datetime import date, datetime
from typing import Annotated, Literal

import numpy as np
from pydantic import ConfigDict, Field, PositiveFloat
from pydantic.dataclasses import dataclass

from massfit.io.network.schema import utc, utc_end
from massfit.settings import DriftForm

Text = Annotated[str, Field(min_length=1)]
_STRICT = ConfigDict(extra="forbid", allow_inf_nan=False)


@dataclass(frozen=True, config=_STRICT)
class RampEntry:
    """One interval of `ramps`.

    Parameters
    ----------
    start, end : datetime.date or datetime.datetime
        Keys `from` and `to`, UTC: when the level began to change, and when it was at rest again. A date as `to`
        means its last instant.
    """

    start: Annotated[date | datetime, Field(alias="from")]
    end: Annotated[date | datetime, Field(alias="to")]

    def span(self) -> tuple[np.datetime64, np.datetime64]:
        """Give its first and its last instant."""
        return utc(self.start), utc_end(self.end)


@dataclass(frozen=True, config=_STRICT)
class DeploymentFile:
    """One instrument on the bottom and the file that holds its record.

    Parameters
    ----------
    file : str
        CF NetCDF (timeSeries), MATLAB or text, relative to the network file.
    units : str, optional
        Required for text and MATLAB; must agree with the file where both say.
    station : str, optional
        Which station of a multi-station file.
    variable : str, optional
        NetCDF or MATLAB variable or text column; optional where unambiguous.
    drift : str
        "exponential+linear", "logarithm+linear", "linear", "none" or "compare".
    calibrations : str, optional
        CSV file of readings at a known pressure, relative to the network file.
    steps : str or tuple of datetime
        "find", "none", or the UTC times of declared changes of level.
    ramps : tuple of RampEntry
        Declared changes of level that took time; the days they touch are left out, one step is fitted across each.
    settling : str or float
        "model", "trim", or how many days are left out after the first sample.
    columns : tuple of str, optional
        Names of the columns of a text file without a header; "year", "month", "day", "hour", "minute",
        "second", "kind" and "flag" have a meaning, and one is the pressure.
    time_column, time_format : str, optional
        Text: column that holds the whole time (or several, "date clock", which are joined by a space) and its
        strptime format; "iso" for ISO 8601, or a count like "days since 1950-01-01".
    time_variable : str, optional
        MATLAB: variable that holds the time, a count as `time_format` says; "datenum" (default) for MATLAB's own
        count of days, in which 719529 is 1 January 1970. NetCDF: which of several times.
    start_time, interval_s : datetime and float, optional
        Text and MATLAB without times: UTC time of the first sample, and seconds from one sample to the next.
    comment, delimiter : str, optional
        Text: comment prefix (default "#") and column delimiter (default white space).
    missing : tuple of float
        Values that mean missing, as they stand in the file.
    scale_factor, add_offset : float
        What makes pressure in `units` of the values of the file: value * scale_factor + add_offset, as in CF. A
        negative factor turns a depth that is counted downwards.
    keep_kinds : tuple of str, optional
        Text with a "kind" column: the kinds of rows that are used.
    flag_variable : str, optional
        Variable or column of quality flags; by default the status flags that a NetCDF file ties to the pressure, and
        a text column "flag". "none" uses no flags.
    keep_flags : tuple of int, optional
        Flags of the samples that are used; by default what the file calls good or not evaluated, in the numbers of
        QARTOD 1 and 2.
    stamp : str
        "middle" or "start": where in its interval a time stamp lies.
    utc_offset_hours : float, optional
        Hours by which the zone of the stamps is ahead of UTC; they are taken off.
    clock_offset_s, clock_offset_end_s : float
        Seconds by which the recorder's clock is ahead of UTC at its first sample and at its last, linear in between;
        constant where the second is not given.
    density_kg_m3 : float, optional
        Density of the water column, needed when the unit is a height of water.
    """

    file: Text
    units: Text | None = None
    station: Text | None = None
    variable: Text | None = None
    drift: DriftForm = "exponential+linear"
    calibrations: Text | None = None
    steps: Literal["find", "none"] | tuple[datetime, ...] = "find"
    ramps: tuple[RampEntry, ...] = ()
    settling: Literal["model", "trim"] | Annotated[float, Field(ge=0, le=365)] = "model"
    columns: tuple[str, ...] | None = None
    time_column: Text | None = None
    time_format: Text | None = None
    time_variable: Text | None = None
    start_time: datetime | None = None
    interval_s: PositiveFloat | None = None
    comment: Text = "#"
    delimiter: Text | None = None
    missing: tuple[float, ...] = ()
    scale_factor: float = 1.0
    add_offset: float = 0.0
    keep_kinds: tuple[str, ...] | None = None
    flag_variable: Text | None = None
    keep_flags: tuple[int, ...] | None = None
    stamp: Literal["middle", "start"] = "middle"
    utc_offset_hours: Annotated[float, Field(ge=-14, le=14)] | None = None
    clock_offset_s: float = 0.0
    clock_offset_end_s: float | None = None
    density_kg_m3: PositiveFloat | None = None
