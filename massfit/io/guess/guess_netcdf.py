"""Guess the deployments of a NetCDF file: its stations, where they are, and what the reader asks for."""

from pathlib import Path, PurePosixPath
from typing import Any

import numpy as np
import xarray as xr

from massfit.errors import Fault, InputError
from massfit.io.guess.described import Guess, RecordGuess, fill_in
from massfit.io.guess.guess_text_record import span_and_sampling, stamp_guess
from massfit.io.netcdf.netcdf_file import open_netcdf
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.flags import without_flagged
from massfit.io.records.record_netcdf import read_netcdf
from massfit.io.records.units import PRESSURE_UNITS
from massfit.records.record import Action

NO_RECORD = "a field, or a model at sites: name it in [corrections] or a [[circulation]] where it belongs"
"""What a file is in which no record was found."""
_STATIONS = ("station", "station_id", "station_name", "site", "timeseries_id")
_STANDARD_NAMES = {
    "latitude": ("latitude",),
    "longitude": ("longitude",),
    "depth_m": ("sea_floor_depth_below_sea_surface", "sea_floor_depth_below_geoid", "depth"),
}
_PLAIN_NAMES = {"latitude": ("lat", "latitude"), "longitude": ("lon", "longitude"), "depth_m": ("depth", "water_depth")}
_ATTRIBUTES = {
    "latitude": ("latitude", "geospatial_lat_min"),
    "longitude": ("longitude", "geospatial_lon_min"),
    "depth_m": ("water_depth", "depth_m"),
}


def guess_netcdf_records(folder: Path, file: str) -> list[RecordGuess]:
    """Guess every deployment that a NetCDF file holds.

    Parameters
    ----------
    folder : pathlib.Path
    file : str
        Relative to the folder.

    Returns
    -------
    list of RecordGuess
        One a station; empty for a field, or a table of sites that neither is called a series of stations nor says
        where they are: a model at the sites, most likely.

    Raises
    ------
    InputError
        The file is damaged or no NetCDF.
    """
    with open_netcdf(folder / file, source=file, decode=False) as dataset:
        if _is_field(dataset):
            return []
        ids = _station_ids(dataset)
        places = [_place(dataset, k, len(ids)) for k in range(max(len(ids), 1))]
        called = "featureType" in dataset.attrs or any("cf_role" in data.attrs for data in dataset.variables.values())
    if len(ids) > 1 and not called and not any(places):
        return []
    stations: list[str | None] = [*ids] if len(ids) > 1 else [None]
    records = []
    for k, station in enumerate(stations):
        place = dict(places[k])
        if ids:
            place["id"] = Guess(ids[k], "the station of the file")
        records.append(_record(folder, file, station, place, alone=len(stations) == 1))
    return records


def _is_field(dataset: xr.Dataset) -> bool:
    return any(
        sum(data.sizes[dim] > 1 for dim in data.dims if str(dim).casefold()[:3] in ("lat", "lon")) == 2
        for data in dataset.variables.values()
    )


def _station_ids(dataset: xr.Dataset) -> list[str]:
    names = [name for name, data in dataset.variables.items() if data.attrs.get("cf_role") == "timeseries_id"]
    names += [name for name in _STATIONS if name in dataset.variables]
    if not names:
        return []
    values = np.atleast_1d(dataset[names[0]].values).tolist()
    return [(value.decode() if isinstance(value, bytes) else str(value)).strip(" \0") for value in values]


def _place(dataset: xr.Dataset, station: int, count: int) -> dict[str, Guess]:
    place = {}
    for key in _STANDARD_NAMES:
        for name, data in dataset.variables.items():
            known = data.attrs.get("standard_name") in _STANDARD_NAMES[key] or str(name).casefold() in _PLAIN_NAMES[key]
            if known and data.size in (1, count):
                value = float(np.ravel(data.values)[station if data.size > 1 else 0])
                if np.isfinite(value):
                    place[key] = Guess(value, f"the variable {name}")
                break
        for name in _ATTRIBUTES[key]:
            if key not in place and _is_number(dataset.attrs.get(name)):
                place[key] = Guess(float(dataset.attrs[name]), f"the attribute {name}")
    return place


def _is_number(value: Any) -> bool:
    try:
        return bool(np.isfinite(float(value)))
    except (TypeError, ValueError):
        return False


def _record(folder: Path, file: str, station: str | None, place: dict[str, Guess], *, alone: bool) -> RecordGuess:
    keys: dict[str, Guess] = {}
    if station is not None:
        keys["station"] = Guess(station, "one of the stations of the file")
    name = PurePosixPath(file).stem if alone else str(station)
    entry: dict[str, Any] = {"file": file, "station": station}
    try:
        samples = without_flagged(read_netcdf(folder / file, DeploymentFile(**entry)), DeploymentFile(**entry))
    except InputError as error:
        notes: list[str] = []
        for fault in error.faults:
            _asked(fault, keys, notes)
        return RecordGuess(file, name, keys, place, notes=tuple(notes))
    span, sampling = span_and_sampling(samples.time)
    if not samples.centred:
        keys["stamp"] = stamp_guess(samples.time, sampling)
    return RecordGuess(file, name, keys, place, span, sampling, tuple(map(_noted, samples.actions)))


def _noted(action: Action) -> str:
    return f"{action.what}: {action.count}" + (f" ({action.detail})" if action.detail else "")


def _asked(fault: Fault, keys: dict[str, Guess], notes: list[str]) -> None:
    """Turn what the reader misses into keys to be filled in."""
    if fault.name == "variable":
        keys["variable"] = fill_in(f"{fault.problem}. {fault.action}")
    elif "no units" in fault.problem:
        keys["units"] = fill_in(f"one of {', '.join(PRESSURE_UNITS)}; the variable {fault.name} has none")
    elif "such samples are good" in fault.problem or "its flags are bits" in fault.problem:
        keys["keep_flags"] = fill_in(f"a list of the flags of good samples: {fault.name}: {fault.problem}")
    elif "its times are in" in fault.problem:
        keys["utc_offset_hours"] = fill_in(f"{fault.problem}. {fault.action}")
    elif "height of water" in fault.problem:
        keys["density_kg_m3"] = fill_in(f"density of the water column, kg m-3, for {fault.name}")
    else:
        notes.append(f"read like this: {fault}")
