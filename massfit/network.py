"""The analyst's inputs in memory: everything that `estimate` needs, no files.

`io.read_network` makes a Network from a network file, `simulate` from a seed,
and a notebook from arrays.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.fingerprint.pattern import LoadPattern
from massfit.records.record import Record
from massfit.settings import Settings
from massfit.site import Site


@dataclass(frozen=True)
class Series:
    """An ocean-mean pressure series.

    Parameters
    ----------
    name : str
    time : (n,) array of datetime64[ns]
        Middle of each value's interval, UTC, strictly increasing.
    pressure : (n,) array of float64
        Pa; no NaN.
    """

    name: str
    time: NDArray[np.datetime64]
    pressure: NDArray[np.float64]


@dataclass(frozen=True)
class CirculationModel:
    """Bottom pressure of one ocean circulation model.

    Parameters
    ----------
    name : str
    pressure : xarray.DataArray
        Pa, over (time, site) with a coordinate of site ids, or over (time, lat, lon) in
        degrees; NaN on land. Time is the middle of each interval, UTC. May be lazy.
    ocean_mean : Series or None
        The model's own whole-ocean mean, to be subtracted; None where it is
        already removed.
    air_pressure : str
        "not-forced", "forced-included" or "forced-excluded".
    assimilates_satellite_gravity : bool
    """

    name: str
    pressure: xr.DataArray
    ocean_mean: Series | None
    air_pressure: str
    assimilates_satellite_gravity: bool = False


@dataclass(frozen=True)
class Network:
    """Everything a run needs.

    Parameters
    ----------
    settings : Settings
    sites : tuple of Site
        Including sites the analyst left out as a whole.
    records : tuple of Record
        Raw records, any number a site, each on its own clock.
    loads : tuple of LoadPattern
        Load ensemble, kg m-2.
    circulation : tuple of CirculationModel
    ocean_mean_atmosphere : Series, optional
        None where it is already removed from the records.
    atmosphere_load : LoadPattern, optional
        Annual phasor of air pressure on land, Pa (values over ocean are ignored).
    air_pressure : xarray.DataArray, optional
        Surface air pressure (time, lat, lon), Pa; replaces the two above.
    source : str
        Network file, as the analyst wrote it; empty when built in memory.
    inputs : mapping of str to str
        SHA-256 of every file read, by path relative to the network file.
    warnings : tuple of str
        What the reader noticed.
    """

    settings: Settings
    sites: tuple[Site, ...]
    records: tuple[Record, ...]
    loads: tuple[LoadPattern, ...]
    circulation: tuple[CirculationModel, ...] = ()
    ocean_mean_atmosphere: Series | None = None
    atmosphere_load: LoadPattern | None = None
    air_pressure: xr.DataArray | None = None
    source: str = ""
    inputs: Mapping[str, str] = field(default_factory=dict)
    warnings: tuple[str, ...] = ()
