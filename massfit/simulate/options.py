"""What may be chosen about an invented network."""

from typing import Annotated, Literal

from pydantic import ConfigDict, Field
from pydantic.dataclasses import dataclass


@dataclass(frozen=True, config=ConfigDict(extra="forbid", allow_inf_nan=False))
class SimulationOptions:
    """Size and character of an invented network.

    Parameters
    ----------
    sites : int
        Number of sites.
    years : float
        Length of the period, years.
    models : int
        Number of ocean circulation models given to the analyst.
    load_members : int
        Number of load patterns given to the analyst; the truth is none of them.
    noise : float
        Factor on the noise that no model holds (ocean and instrument); 0 switches it off.
    model_error : float
        Factor on the annual errors of the models, shared and own.
    sampling : str
        ``"hourly"``: raw records with short tides. ``"15s"``: the same, sampled every 15 s as recorders do; two million
        samples a year and recorder, so that few sites are enough. ``"daily"``: daily means with short tides already
        removed, for studies of many networks.
    first_year : int
        The period begins on 1 January of this year; polar motion must have been observed throughout.
    bad_site : bool
        One site lies in an eddy field that no model holds.
    incidents : bool
        Gaps, spikes, an overlapping pair, a declared step, a short record and a model that
        misses a site.
    satellites : int
        Number of centres that give monthly fields of satellite gravity; 0 for none.

    Examples
    --------
    >>> SimulationOptions(sites=5, sampling="daily").years
    5.0
    """

    sites: Annotated[int, Field(ge=1, le=60)] = 18
    years: Annotated[float, Field(ge=1.0, le=12.0)] = 5.0
    models: Annotated[int, Field(ge=0, le=12)] = 3
    load_members: Annotated[int, Field(ge=1, le=20)] = 5
    noise: Annotated[float, Field(ge=0.0, le=20.0)] = 1.0
    model_error: Annotated[float, Field(ge=0.0, le=20.0)] = 1.0
    sampling: Literal["hourly", "15s", "daily"] = "hourly"
    first_year: Annotated[int, Field(ge=1980, le=2100)] = 2014
    bad_site: bool = True
    incidents: bool = True
    satellites: Annotated[int, Field(ge=0, le=4)] = 0
