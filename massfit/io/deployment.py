"""`[[site.deployment]]`: how one record file is to be read."""

from datetime import datetime
from typing import Annotated, Literal

from pydantic import ConfigDict, Field, PositiveFloat
from pydantic.dataclasses import dataclass

from massfit.settings import DriftForm

Text = Annotated[str, Field(min_length=1)]


@dataclass(frozen=True, config=ConfigDict(extra="forbid", allow_inf_nan=False))
class DeploymentFile:
    """One instrument on the bottom and the file that holds its record.

    Parameters
    ----------
    file : str
        CF NetCDF (timeSeries) or text, relative to the network file.
    units : str, optional
        Required for text; must agree with the file where both say.
    station : str, optional
        Which station of a multi-station file.
    variable : str, optional
        NetCDF variable or text column; optional where unambiguous.
    drift : str
        "exponential+linear", "linear" or "none".
    steps : str or tuple of datetime
        "find", "none", or the UTC times of declared changes of level.
    columns : tuple of str, optional
        Names of the columns of a text file without a header; "year", "month", "day", "hour", "minute",
        "second" and "kind" have a meaning, and one is the pressure.
    time_column, time_format : str, optional
        Text: column that holds the whole time (or several, "date clock", which are joined by a space) and its
        strptime format; "iso" for ISO 8601, or a count like "days since 1950-01-01".
    comment, delimiter : str, optional
        Text: comment prefix (default "#") and column delimiter (default white space).
    missing : tuple of float
        Values that mean missing.
    keep_kinds : tuple of str, optional
        Text with a "kind" column: the kinds of rows that are used.
    stamp : str
        "middle" or "start": where in its interval a time stamp lies.
    density_kg_m3 : float, optional
        Density of the water column, needed when the unit is a height of water.
    """

    file: Text
    units: Text | None = None
    station: Text | None = None
    variable: Text | None = None
    drift: DriftForm = "exponential+linear"
    steps: Literal["find", "none"] | tuple[datetime, ...] = "find"
    columns: tuple[str, ...] | None = None
    time_column: Text | None = None
    time_format: Text | None = None
    comment: Text = "#"
    delimiter: Text | None = None
    missing: tuple[float, ...] = ()
    keep_kinds: tuple[str, ...] | None = None
    stamp: Literal["middle", "start"] = "middle"
    density_kg_m3: PositiveFloat | None = None
