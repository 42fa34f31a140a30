"""Pressure records in CF NetCDF: one or more stations in any layout of timeSeries."""

from dataclasses import replace
from difflib import get_close_matches
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.errors import Fault, InputError, collect
from massfit.io.netcdf.cf_time import cf_instants, native
from massfit.io.netcdf.netcdf_file import as_text, damage_as_fault, open_netcdf
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.netcdf_flags import FlagNames, flag_names, flags_of
from massfit.io.records.samples import Samples, coarse, in_pascal
from massfit.io.records.units import PRESSURE_UNITS, pascal_per_unit
from massfit.io.records.zones import require_utc, zone_of_text
from massfit.records.record import Action
from massfit.records.stretches import stretches

# CF standard names, the most exact one first
_STANDARD_NAMES = (
    "sea_water_pressure_at_sea_floor",
    "sea_water_pressure",
    "sea_water_pressure_due_to_sea_water",
)
_STATION_NAMES = ("station", "station_id", "station_name", "site", "timeseries_id")
_ZONE_NAMES = ("time_zone", "timezone", "time_zone_name")
_CALENDARS = ("standard", "gregorian", "proleptic_gregorian")
_UNWRITTEN = 9.0e36
"""The NetCDF library fills floats that were never written with 9.97e36."""
_NUMBER_ATTRIBUTES = {
    "_FillValue": None, "missing_value": None, "valid_range": 2, "valid_min": 1, "valid_max": 1,
    "scale_factor": 1, "add_offset": 1,
}  # fmt: skip
"""Attributes that must be numbers, and how many; any number where None."""

Indexers = dict[str, Any]


def read_netcdf(path: Path, entry: DeploymentFile) -> Samples:
    """Read one station of a CF timeSeries file.

    Layouts: one series; (station, time) and (time, station); a time axis a
    station; contiguous and indexed ragged arrays (CF Conventions 1.13, chapter 9
    and appendix H). Where the time has bounds their middles are used.

    Parameters
    ----------
    path : pathlib.Path
    entry : DeploymentFile

    Returns
    -------
    Samples

    Raises
    ------
    InputError
        With every fault of variable, station, unit and time.
    """
    with open_netcdf(path, source=entry.file, decode=False) as dataset, damage_as_fault(entry.file):
        variable = _pressure_variable(dataset, entry)
        time = _time_variable(dataset, variable, entry)
        faults: list[Fault] = []
        factor, indexers, flagging = np.nan, Indexers(), FlagNames()
        with collect(faults):
            factor = _pascal_factor(variable, entry)
        with collect(faults):
            indexers = _station_indexers(dataset, variable, time, entry)
        with collect(faults):
            flagging = flag_names(dataset, variable, entry)
        with collect(faults):
            require_utc(_zones(dataset, time), entry)
        if faults:
            raise InputError(faults)
        with damage_as_fault(entry.file, str(variable.name)):
            stored = variable.isel(indexers, missing_dims="ignore").values
            stamps, centred = _stamps(dataset, time.isel(indexers, missing_dims="ignore"), entry)
            flags = [flags_of(dataset[name].isel(indexers, missing_dims="ignore"), entry) for name in flagging.used]
        _require_numbers(variable, entry)
        actions = coarse(stored, factor * entry.scale_factor)
        units = str(variable.attrs.get("units", entry.units))
        pressure = _unpacked(stored, variable.attrs, entry, factor)
        del stored
    known = ~np.isnat(stamps)
    actions += flagging.actions
    if not known.all():
        actions += (Action("samples without a time left out", int(np.count_nonzero(~known))),)
        stamps, pressure = stamps[known], pressure[known]
        flags = [replace(each, values=each.values[known]) for each in flags]
    return Samples(stamps, pressure, centred, actions, units, tuple(flags))


def _zones(dataset: xr.Dataset, time: xr.DataArray) -> list[tuple[str, int | None]]:
    """Zones that the attributes name; the units of the time, which hold an offset of their own, are not among them."""
    stated = [attributes.get(name) for attributes in (time.attrs, dataset.attrs) for name in _ZONE_NAMES]
    said = [zone_of_text(str(time.attrs.get(name, ""))) for name in ("long_name", "comment")]
    return [(str(zone), None) for zone in (*stated, *said) if zone]


def _pressure_variable(dataset: xr.Dataset, entry: DeploymentFile) -> xr.DataArray:
    numeric = {str(name): data for name, data in dataset.variables.items() if data.dtype.kind in "iuf" and data.dims}
    if entry.variable is not None:
        if entry.variable not in numeric:
            raise InputError(_absent(entry.file, "variable", entry.variable, list(numeric)))
        return dataset[entry.variable]
    for standard_name in _STANDARD_NAMES:
        names = [name for name, data in numeric.items() if data.attrs.get("standard_name") == standard_name]
        if names:
            return dataset[_only(names, entry)]
    names = [
        name
        for name, data in numeric.items()
        if data.attrs.get("units") in PRESSURE_UNITS
        and "standard_name" not in data.attrs
        and data.attrs.get("axis") != "Z"
        and (data.attrs["units"] not in ("mm", "cm", "m") or entry.density_kg_m3 is not None)
    ]
    if not names:
        problem = "no variable is recognised as pressure at the sea floor"
        allowed = f"Recognised by the standard names {', '.join(_STANDARD_NAMES)} or by a unit of pressure"
        action = f"State `variable`; the file has {', '.join(numeric) or 'none'}"
        raise InputError(Fault(entry.file, "variable", problem, allowed, action))
    return dataset[_only(names, entry)]


def _only(names: list[str], entry: DeploymentFile) -> str:
    if len(names) > 1:
        problem = f"more than one variable can be the pressure: {', '.join(names)}"
        raise InputError(Fault(entry.file, "variable", problem, "Must be one", "State `variable`"))
    return names[0]


def _absent(source: str, name: str, given: str, known: list[str]) -> Fault:
    near = get_close_matches(given, known, n=1)
    action = f"Did you mean {near[0]!r}?" if near else f"Correct or remove `{name}`"
    return Fault(source, name, f"{given!r} is not in the file", f"Must be one of {', '.join(known) or 'none'}", action)


def _time_variable(dataset: xr.Dataset, variable: xr.DataArray, entry: DeploymentFile) -> xr.DataArray:
    bounds = {data.attrs.get("bounds") for data in dataset.variables.values()}
    names = [
        str(name)
        for name, data in dataset.variables.items()
        if " since " in str(data.attrs.get("units", ""))
        and data.dims
        and set(data.dims) <= set(variable.dims)
        and name not in bounds
    ]
    if entry.time_variable is not None:
        if entry.time_variable not in names:
            raise InputError(_absent(entry.file, "time_variable", entry.time_variable, names))
        names = [entry.time_variable]
    named = [name for name in names if dataset[name].attrs.get("standard_name") == "time" or name == "time"]
    names = named or names
    if len(names) != 1:
        found = ", ".join(names) or "none"
        problem = f"time variables along {variable.name!r}: {found}"
        allowed = "Must be one, with units like 'seconds since 1970-01-01' and the standard name time"
        raise InputError(Fault(entry.file, "time", problem, allowed, "Add or correct these attributes"))
    time = dataset[names[0]]
    calendar = str(time.attrs.get("calendar", "standard"))
    if calendar not in _CALENDARS:
        problem = f"the calendar of {names[0]!r} is {calendar!r}"
        raise InputError(Fault(entry.file, "time", problem, f"Must be one of {', '.join(_CALENDARS)}", "Convert them"))
    return time


def _pascal_factor(variable: xr.DataArray, entry: DeploymentFile) -> float:
    in_file = variable.attrs.get("units")
    name = str(variable.name)
    if in_file is None and entry.units is None:
        raise InputError(Fault(entry.file, name, "the variable has no units", action="State `units`"))
    units = str(entry.units if in_file is None else in_file)
    factor = pascal_per_unit(units, density_kg_m3=entry.density_kg_m3, source=entry.file, name=name)
    if entry.units is None or in_file is None:
        return factor
    stated = pascal_per_unit(entry.units, density_kg_m3=entry.density_kg_m3, source=entry.file, name="units")
    if stated != factor:
        problem = f"the units are {in_file!r} in the file and {entry.units!r} in the network file"
        raise InputError(Fault(entry.file, name, problem, "Must agree", "Correct the wrong one"))
    return factor


def _station_indexers(
    dataset: xr.Dataset, variable: xr.DataArray, time: xr.DataArray, entry: DeploymentFile
) -> Indexers:
    """Indexers that leave one axis, that of the samples of one station."""
    identity = _station_identity(dataset)
    sample = variable.dims[0]
    for name, other in dataset.variables.items():
        if other.attrs.get("sample_dimension") == sample:
            return {str(sample): _contiguous(str(name), other, dataset.sizes[sample], identity, entry)}
        if "instance_dimension" in other.attrs and other.dims == (sample,):
            return {str(sample): _indexed(str(name), other, dataset, identity, entry)}
    along = time.dims if time.ndim == 1 else time.dims[-1:]
    extra = [str(dim) for dim in variable.dims if dim not in along]
    if time.ndim > 1 and identity is not None and identity.dims and identity.dims[0] == time.dims[-1]:
        extra = [str(identity.dims[0])]
    wide = [dim for dim in extra if dataset.sizes[dim] > 1]
    if len(wide) > 1:
        problem = f"{variable.name!r} has the dimensions {variable.dims}"
        allowed, action = "Must be time and at most station", "Write one series to a file of its own"
        raise InputError(Fault(entry.file, str(variable.name), problem, allowed, action))
    station = _station_index(identity, dataset.sizes[wide[0]] if wide else 1, entry)
    return {dim: station if dim in wide else 0 for dim in extra}


def _contiguous(
    name: str, sizes: xr.Variable, samples: int, identity: xr.DataArray | None, entry: DeploymentFile
) -> slice:
    """Find the samples of one station of a contiguous ragged array."""
    counts = sizes.values.astype(np.int64)
    if counts.min(initial=0) < 0 or counts.sum() != samples:
        problem = f"the stations have {', '.join(map(str, counts[:5].tolist()))}... samples, {counts.sum()} in all"
        allowed = f"Must be none below 0, and {samples} in all, the length of {sizes.attrs['sample_dimension']!r}"
        raise InputError(Fault(entry.file, name, problem, allowed, "Fetch it again, or write one file a station"))
    station = _station_index(identity, counts.size, entry)
    stop = int(counts[: station + 1].sum())
    return slice(stop - int(counts[station]), stop)


def _indexed(
    name: str, index: xr.Variable, dataset: xr.Dataset, identity: xr.DataArray | None, entry: DeploymentFile
) -> NDArray[np.int64]:
    """Find the samples of one station of an indexed ragged array."""
    stations = index.attrs["instance_dimension"]
    if stations not in dataset.sizes:
        problem = f"its instance_dimension {stations!r} is no dimension of the file"
        raise InputError(Fault(entry.file, name, problem, "Must be that of the stations", "Correct the attribute"))
    count, values = dataset.sizes[stations], index.values
    strange = ~((values >= 0) & (values < count))
    if strange.any():
        problem = f"{np.count_nonzero(strange)} samples are of no station, the first of {values[strange][0]}"
        raise InputError(Fault(entry.file, name, problem, f"Must be within [0, {count - 1}]", "Fetch it again"))
    return np.flatnonzero(values == _station_index(identity, count, entry))


def _station_identity(dataset: xr.Dataset) -> xr.DataArray | None:
    names = [name for name, data in dataset.variables.items() if data.attrs.get("cf_role") == "timeseries_id"]
    names += [name for name in _STATION_NAMES if name in dataset.variables]
    return dataset[names[0]] if names else None


def _station_index(identity: xr.DataArray | None, count: int, entry: DeploymentFile) -> int:
    if entry.station is None:
        if count == 1:
            return 0
        ids = _station_ids(identity)
        problem = f"the file holds {count} stations and none was chosen"
        raise InputError(Fault(entry.file, "station", problem, f"Must be one of {', '.join(ids)}", "State `station`"))
    ids = _station_ids(identity)
    if entry.station not in ids:
        raise InputError(_absent(entry.file, "station", entry.station, ids))
    return ids.index(entry.station)


def _station_ids(identity: xr.DataArray | None) -> list[str]:
    if identity is None:
        return []
    values = np.atleast_1d(identity.values).tolist()
    return [as_text(value) for value in values]


def _stamps(dataset: xr.Dataset, time: xr.DataArray, entry: DeploymentFile) -> tuple[NDArray[np.datetime64], bool]:
    """UTC stamps, and whether they are known to be the middles of intervals."""
    stamps = cf_instants(time.values, time.attrs, source=entry.file)
    name = time.attrs.get("bounds")
    if name not in dataset.variables:
        return stamps, False
    bounds = dataset[name]
    bounds = bounds.isel({dim: slice(None) for dim in bounds.dims})
    if bounds.shape != (*time.shape, 2):
        return stamps, False
    edges = cf_instants(bounds.values, {**time.attrs, **bounds.attrs}, source=entry.file)
    return edges[:, 0] + (edges[:, 1] - edges[:, 0]) // 2, True


def _require_numbers(variable: xr.DataArray, entry: DeploymentFile) -> None:
    faults = []
    for key, size in _NUMBER_ATTRIBUTES.items():
        value = np.asarray(variable.attrs.get(key, np.zeros(size or 1)))
        if value.dtype.kind not in "iufb" or (size is not None and value.size != size):
            problem, allowed = f"{key} is {value.tolist()!r}", "Must be a number"
            allowed = "Must be two numbers" if size == 2 else allowed
            faults.append(Fault(entry.file, str(variable.name), problem, allowed, "Correct the attribute"))
    if faults:
        raise InputError(faults)


def _unpacked(
    stored: NDArray[Any], attributes: dict[str, Any], entry: DeploymentFile, factor: float
) -> NDArray[np.float64]:
    """Packed numbers as Pa, with NaN for everything the attributes call invalid."""
    flat, values = stored.ravel(), np.empty(stored.size)
    for part in stretches(flat.size):
        values[part] = _unpacked_part(native(flat[part]), attributes, entry, factor)
    return values.reshape(stored.shape)


def _unpacked_part(
    stored: NDArray[Any], attributes: dict[str, Any], entry: DeploymentFile, factor: float
) -> NDArray[np.float64]:
    bad = ~(np.abs(stored) < _UNWRITTEN) if stored.dtype.kind == "f" else np.zeros(stored.shape, dtype=bool)
    for key in ("_FillValue", "missing_value"):
        for number in np.asarray(attributes.get(key, ()), dtype=stored.dtype).ravel():
            bad |= stored == number
    low, high = attributes.get("valid_range", (None, None))
    low, high = attributes.get("valid_min", low), attributes.get("valid_max", high)
    if low is not None:
        bad |= stored < low
    if high is not None:
        bad |= stored > high
    scale, offset = float(attributes.get("scale_factor", 1.0)), float(attributes.get("add_offset", 0.0))
    if (scale, offset) != (1.0, 0.0):
        stored = stored * np.float64(scale)
        stored += offset
    values = in_pascal(stored, entry, factor)
    values[bad] = np.nan
    return values
