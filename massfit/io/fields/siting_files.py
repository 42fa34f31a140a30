"""Files of a siting study: candidates, a map of quietness, and depths of the sea floor."""

from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.contracts import QUIETNESS_MAP, require
from massfit.errors import Fault, InputError
from massfit.fingerprint.ocean import OceanFunction
from massfit.io.fields.csv_rows import csv_rows
from massfit.io.netcdf.netcdf_file import damage_as_fault, open_netcdf
from massfit.io.netcdf.variables import canonical
from massfit.siting.gain_map import Candidate

Floats = NDArray[np.float64]

_NEEDED = ("name", "latitude", "longitude")
_OPTIONAL = ("depth_m", "noise_hpa")
_LIMITS = {
    "latitude": (-90.0, 90.0),
    "longitude": (-180.0, 360.0),
    "depth_m": (0.0, 12_000.0),
    "noise_hpa": (0.01, 100.0),
}
_METRES = ("m", "metre", "metres", "meter", "meters")


def read_candidates(path: Path) -> tuple[Candidate, ...]:
    """Read the places that a user asks about.

    Parameters
    ----------
    path : pathlib.Path
        CSV with the header ``name,latitude,longitude`` and, where wanted, ``depth_m`` and ``noise_hpa`` (standard
        deviation of a daily mean); lines that begin with ``#`` are comments, an empty depth or noise is not known.

    Returns
    -------
    tuple of Candidate

    Raises
    ------
    InputError
        Every fault of the file, with lines.
    """
    source = str(path)
    rows = csv_rows(path)
    if len(rows) < 2:
        raise InputError(Fault(source, "", "the file holds no candidate", "A header and a line for each place"))
    header = rows[0][2]
    faults = list(_header_faults(source, rows[0][0], header))
    if faults:
        raise InputError(faults)
    found = []
    for number, _, values in rows[1:]:
        if len(values) != len(header):
            problem = f"{len(values)} values for {len(header)} columns"
            faults.append(Fault(source, "", problem, "One value a column", line=number))
            continue
        row = dict(zip(header, values, strict=True))
        own = list(_row_faults(source, number, row))
        faults += own
        if not own:
            found.append(_candidate(row))
    if faults:
        raise InputError(faults)
    return tuple(found)


def _header_faults(source: str, line: int, header: list[str]) -> Iterator[Fault]:
    allowed = f"Columns are {', '.join([*_NEEDED, *_OPTIONAL])}"
    for name in _NEEDED:
        if name not in header:
            yield Fault(source, name, "the column is missing", allowed, line=line)
    for name in header:
        if name not in (*_NEEDED, *_OPTIONAL):
            yield Fault(source, name, "unknown column", allowed, "Correct or remove it", line=line)
        elif header.count(name) > 1:
            yield Fault(source, name, "the column stands there twice", allowed, line=line)


def _row_faults(source: str, line: int, row: dict[str, str]) -> Iterator[Fault]:
    if not row["name"]:
        yield Fault(source, "name", "the candidate has no name", line=line)
    for name, (low, high) in _LIMITS.items():
        text = row.get(name, "")
        if not text and name in _OPTIONAL:
            continue
        try:
            inside = low <= float(text) <= high
        except ValueError:
            inside = False
        if not inside:
            yield Fault(source, name, f"the value is {text!r}", f"Must be a number in [{low:g}, {high:g}]", line=line)


def _candidate(row: dict[str, str]) -> Candidate:
    return Candidate(
        row["name"],
        float(row["latitude"]),
        float(row["longitude"]),
        float(row.get("depth_m") or np.nan),
        PASCAL_PER_HPA * float(row.get("noise_hpa") or np.nan),
    )


def read_quietness(path: Path) -> xr.Dataset:
    """Read a map of quietness that `massfit screen` made.

    Parameters
    ----------
    path : pathlib.Path

    Returns
    -------
    xarray.Dataset
        contracts.QUIETNESS_MAP.

    Raises
    ------
    InputError
        It is no such map.
    """
    _require_file(path)
    with open_netcdf(path) as data, damage_as_fault(str(path)):
        found = data.load()
    try:
        require(found, QUIETNESS_MAP)
    except InputError as error:
        problem = f"it is no quietness map of massfit screen: {error.faults[0].name}: {error.faults[0].problem}"
        raise InputError(Fault(str(path), "", problem, "", "Give screening.nc of massfit screen")) from error
    return found


def read_depths(path: Path) -> Callable[[Floats, Floats], Floats]:
    """Read depths or heights of the sea floor on a grid.

    Parameters
    ----------
    path : pathlib.Path
        NetCDF with one variable over (lat, lon) in metres; depths below or heights above sea level, told apart by the
        sign that most of the ocean has.

    Returns
    -------
    callable
        From latitudes and longitudes (c,), degrees, to depths (c,) of the nearest values, m, positive down; NaN where
        the grid has none.

    Raises
    ------
    InputError
        There is no such variable, or more than one.
    """
    source = str(path)
    _require_file(path)
    with open_netcdf(path) as raw, damage_as_fault(source):
        dataset = canonical(raw)
        names = [name for name, data in dataset.data_vars.items() if set(data.dims) == {"lat", "lon"}]
        metric = [name for name in names if dataset[name].attrs.get("units") in _METRES]
        if len(metric) != 1:
            problem = f"{len(metric)} variables over (lat, lon) are in metres"
            raise InputError(Fault(source, "", problem, "Must be one: depths or heights of the sea floor"))
        field = dataset[metric[0]].transpose("lat", "lon").load()
    lat, lon = (field[axis].to_numpy().astype(float) for axis in ("lat", "lon"))
    north, east = np.meshgrid(lat, lon, indexing="ij")
    ocean = OceanFunction.builtin().fraction_at(north, east) > 0.5
    values = field.to_numpy().astype(float)
    if np.nanmedian(np.where(ocean, values, np.nan)) < 0.0:
        values = -values

    def depths(latitude_deg: Floats, longitude_deg: Floats) -> Floats:
        row = np.array([np.abs(lat - own).argmin() for own in np.atleast_1d(latitude_deg)])
        away = [np.abs((lon - own + 180.0) % 360.0 - 180.0) for own in np.atleast_1d(longitude_deg)]
        return np.asarray(values[row, np.array([own.argmin() for own in away])])

    return depths


def _require_file(path: Path) -> None:
    if not path.is_file():
        raise InputError(Fault(str(path), "", "the file does not exist", "", "Check the path"))
