"""The tables of the network file that become data, not settings."""

from datetime import date, datetime
from typing import Annotated, Literal

import numpy as np
from pydantic import ConfigDict, Field
from pydantic.dataclasses import dataclass

from massfit.constants import PASCAL_PER_HPA
from massfit.network import ReducedSite
from massfit.settings import Corrections, Fingerprint, Frame, PosteriorSettings, Priors
from massfit.site import Interval, Site

_STRICT = ConfigDict(extra="forbid", allow_inf_nan=False)
_LAST_INSTANT = np.timedelta64(86_400 * 10**9 - 1, "ns")  # of a day

Text = Annotated[str, Field(min_length=1)]
Year = Annotated[int, Field(ge=1900, le=2200)]
Pair = tuple[float, float]
Matrix = tuple[Pair, Pair]

ALREADY_REDUCED = ("phasor_hpa", "phasor_covariance_hpa2", "model_noise_hpa2", "years", "subtracted")
"""Keys of a site that was reduced elsewhere."""


@dataclass(frozen=True, config=_STRICT)
class ExcludeEntry:
    """One interval of `exclude`.

    Parameters
    ----------
    start, end : datetime.date or datetime.datetime
        Keys `from` and `to`, UTC, both included; a date as `to` means its last instant.
    reason : str
        Why.
    """

    start: Annotated[date | datetime, Field(alias="from")]
    end: Annotated[date | datetime, Field(alias="to")]
    reason: Text

    def interval(self) -> Interval:
        """Make the interval as the rest of the package knows it."""
        return Interval(utc(self.start), utc_end(self.end), self.reason)


@dataclass(frozen=True, config=_STRICT)
class SiteEntry:
    """`[[site]]` without its deployments, which are read one by one.

    Parameters
    ----------
    id : str
        Unique in the network.
    latitude, longitude : float
        Degrees north and degrees east, either convention.
    depth_m : float, optional
        Water depth, m.
    group : str, optional
        Free label.
    exclude : tuple of ExcludeEntry, or str
        Intervals not used; or the reason why the whole site is left out.
    phasor_hpa : tuple of float, or dict of str to tuple of float, optional
        Of a site that was reduced elsewhere: its annual phasor with the mean of the models subtracted,
        or one for each model, by name.
    phasor_covariance_hpa2, model_noise_hpa2 : tuple of tuple of float, optional
        Covariance of the record less the mean of the models, and of each model's own weather.
    years : tuple of int, optional
        First and last year of the record.
    subtracted : tuple of str, optional
        The models, where `phasor_hpa` does not name them.
    reference : str
        Whose records these are and how they are cited.
    """

    id: Text
    latitude: Annotated[float, Field(ge=-90, le=90)]
    longitude: Annotated[float, Field(ge=-180, le=360)]
    depth_m: Annotated[float, Field(ge=0, le=12_000)] | None = None
    group: Text | None = None
    exclude: Text | tuple[ExcludeEntry, ...] = ()
    phasor_hpa: Pair | dict[Text, Pair] | None = None
    phasor_covariance_hpa2: Matrix | None = None
    model_noise_hpa2: Matrix = ((0.0, 0.0), (0.0, 0.0))
    years: tuple[Year, Year] | None = None
    subtracted: tuple[Text, ...] | None = None
    reference: str = ""

    def site(self) -> Site:
        """Make the site as the rest of the package knows it."""
        whole = isinstance(self.exclude, str)
        return Site(
            self.id,
            self.latitude,
            self.longitude,
            self.depth_m,
            self.group,
            exclude=() if whole else tuple(entry.interval() for entry in self.exclude),  # type: ignore[union-attr]
            excluded_because=str(self.exclude) if whole else None,
            reference=self.reference,
        )

    def reduced(self) -> ReducedSite | None:
        """Make the phasor of a site that was reduced elsewhere, where nothing of it is missing."""
        phasor, covariance = self.phasor_hpa, self.phasor_covariance_hpa2
        if phasor is None or covariance is None or self.years is None:
            return None
        if isinstance(phasor, dict):
            models, values = tuple(phasor), np.array(list(phasor.values()))
        elif self.subtracted is not None:
            models, values = self.subtracted, np.array(phasor)
        else:
            return None
        return ReducedSite(
            site=self.id,
            phasor=PASCAL_PER_HPA * values,
            covariance=PASCAL_PER_HPA**2 * np.array(covariance),
            years=self.years,
            models=models,
            model_noise=PASCAL_PER_HPA**2 * np.array(self.model_noise_hpa2),
        )


@dataclass(frozen=True, config=_STRICT)
class CirculationEntry:
    """`[[circulation]]`: one ocean model.

    Parameters
    ----------
    name : str
        Unique in the network.
    file : str
        NetCDF of bottom pressure over (time, site) or (time, lat, lon).
    ocean_mean : str
        "removed", or the file of the model's own ocean-mean series.
    air_pressure : str
        "not-forced", "forced-included" or "forced-excluded".
    variable : str, optional
        Which variable of the file; optional where unambiguous.
    assimilates_satellite_gravity : bool
        Whether the model has seen what it will be compared with.
    partial : str
        Where the model covers a part of a record only: "missing" leaves it out there, "cut" cuts the record.
    reference : str
        Whose model it is and how it is cited.
    """

    name: Text
    file: Text
    ocean_mean: Text
    air_pressure: Literal["not-forced", "forced-included", "forced-excluded"]
    variable: str | None = None
    assimilates_satellite_gravity: bool = False
    partial: Literal["missing", "cut"] = "missing"
    reference: str = ""


@dataclass(frozen=True, config=_STRICT)
class NamedModelEntry:
    """`[[circulation]]` of a model that only sites reduced elsewhere have subtracted: its name and no file.

    Parameters
    ----------
    name : str
        Unique in the network.
    subtracted_elsewhere : bool
        True.
    """

    name: Text
    subtracted_elsewhere: Literal[True]


SETTINGS = {
    "network": Frame,
    "corrections": Corrections,
    "fingerprint": Fingerprint,
    "posterior": PosteriorSettings,
    "priors": Priors,
}
"""Sections that are settings, by name."""

SECTIONS = (*SETTINGS, "site", "circulation", "gravity")
"""Every name that may stand at the top of a network file."""


def utc(moment: date | datetime) -> np.datetime64:
    """Convert a date or time of the network file to datetime64[ns]; without a zone it is UTC.

    Examples
    --------
    >>> from datetime import date
    >>> str(utc(date(2016, 3, 1)))
    '2016-03-01T00:00:00.000000000'
    """
    if isinstance(moment, datetime) and moment.tzinfo is not None:
        offset = moment.utcoffset()
        moment = moment.replace(tzinfo=None)
        return np.datetime64(moment, "ns") - np.timedelta64(offset, "ns")
    return np.datetime64(moment, "ns")


def utc_end(moment: date | datetime) -> np.datetime64:
    """Convert the end of an interval: a date means its last instant.

    Examples
    --------
    >>> from datetime import date
    >>> str(utc_end(date(2016, 3, 1)))
    '2016-03-01T23:59:59.999999999'
    """
    return utc(moment) + (_LAST_INSTANT if type(moment) is date else np.timedelta64(0, "ns"))
