"""Bottom pressure of ocean circulation models from NetCDF."""

from collections.abc import Collection
from pathlib import Path

import numpy as np
import xarray as xr

from massfit.errors import Fault, InputError
from massfit.io.netcdf.netcdf_file import as_text
from massfit.io.netcdf.variables import read_pressure
from massfit.io.network.reading import did_you_mean, nearest
from massfit.io.network.schema import CirculationEntry
from massfit.network import CirculationModel, Series

_SHAPES = (("time", "site"), ("time", "lat", "lon"))


def read_circulation(
    path: Path, entry: CirculationEntry, *, ocean_mean: Series | None, sites: Collection[str], source: str
) -> CirculationModel:
    """Read one circulation model.

    Parameters
    ----------
    path : pathlib.Path
        NetCDF of bottom pressure over (time, site), with a `site` coordinate of ids, or over
        (time, lat, lon).
    entry : CirculationEntry
    ocean_mean : Series or None
        The model's own whole-ocean mean, None where it is removed.
    sites : collection of str
        Ids of the network.
    source : str
        File as the analyst wrote it.

    Returns
    -------
    CirculationModel
        Pa; lazy when big.

    Raises
    ------
    InputError
        As for any pressure variable; a file of sites that holds none of the network's.
    """
    data = read_pressure(path, _SHAPES, source=source, variable=entry.variable)
    data = _by_site(data, sites, source) if "site" in data.dims else _by_cell(data, source)
    return CirculationModel(
        entry.name,
        data,
        ocean_mean,
        entry.air_pressure,
        entry.assimilates_satellite_gravity,
        entry.partial,
        entry.reference,
    )


def _by_site(data: xr.DataArray, sites: Collection[str], source: str) -> xr.DataArray:
    ids = [as_text(value) for value in data["site"].to_numpy()]
    repeated = sorted({site for site in ids if ids.count(site) > 1})
    if repeated:
        raise InputError(
            Fault(source, "site", f"sites stand twice: {', '.join(repeated)}", "Must be unique", "Keep one of each")
        )
    if not set(ids) & set(sites):
        problem = f"none of its {len(ids)} sites ({', '.join(ids[:3])}, ...) is in the network"
        action = did_you_mean(nearest(ids[0], sites) if ids else None, "Use the ids of the network file")
        raise InputError(Fault(source, "site", problem, "Must be site ids of the network", action))
    return data.assign_coords(site=ids)


def _by_cell(data: xr.DataArray, source: str) -> xr.DataArray:
    for name in ("lat", "lon"):
        steps = np.diff(data[name].to_numpy().astype(float))
        if not (steps > 0).all() and not (steps < 0).all():
            raise InputError(
                Fault(source, name, "the coordinate is not monotonic", "Must rise or fall throughout", "Sort it")
            )
    return data
