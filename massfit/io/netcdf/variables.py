"""Find the variable that is meant in a NetCDF file, and bring it to the package's names and units."""

from collections.abc import Hashable, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.io.netcdf.guarded import guarded
from massfit.io.netcdf.netcdf_file import damage_as_fault, open_netcdf
from massfit.io.network.reading import did_you_mean, nearest
from massfit.io.records.units import pascal_per_unit

_HEIGHTS = ("mm", "cm", "m")
_NAMES = {"latitude": "lat", "longitude": "lon"}
_EAGER_BYTES = 64_000_000  # smaller variables are read at once, so that their file can be closed
_MOST_VALUES = 2**26  # brought into memory at once


def read_pressure(
    path: Path, shapes: Sequence[tuple[str, ...]], *, source: str, variable: str | None = None
) -> xr.DataArray:
    """Read the one pressure variable that has one of the wanted shapes.

    The unit goes into the packing attributes, so that a big variable stays lazy.

    Parameters
    ----------
    path : pathlib.Path
        NetCDF.
    shapes : sequence of tuple of str
        Dimensions that are read, any order in the file.
    source : str
        File as the analyst wrote it.
    variable : str, optional
        Which variable; optional where unambiguous.

    Returns
    -------
    xarray.DataArray
        Pa, in the order of its shape; float64 in memory when small, else lazy with the
        file left open. `time` is the middle of each interval, UTC.

    Raises
    ------
    InputError
        Not NetCDF; no such variable or several; unit missing or unknown; coordinates
        missing; times that are not UTC instants in order.
    """
    raw = open_netcdf(path, source=source, decode=False)
    with damage_as_fault(source):
        dataset = canonical(raw)
        name = pick(dataset, shapes, source=source, variable=variable)
        (dims,) = [shape for shape in shapes if set(shape) == set(dataset[name].dims)]
        data = _in_pascal(dataset, name, source=source).transpose(*dims)
        if data.nbytes <= _EAGER_BYTES:
            data = load(data, source=source).astype(np.float64)
            raw.close()
        else:
            data = guarded(data, source=source)
        return data.assign_attrs(units="Pa").rename(name)


def load(data: xr.DataArray, *, source: str) -> xr.DataArray:
    """Bring a lazy variable into memory; a damaged file is the analyst's to know.

    Raises
    ------
    InputError
    """
    if data.size > _MOST_VALUES:
        problem = f"the variable has {data.size} values"
        raise InputError(Fault(source, str(data.name), problem, f"Must be at most {_MOST_VALUES}", "Thin it out"))
    with damage_as_fault(source, str(data.name)):
        return data.load()


def canonical(dataset: xr.Dataset) -> xr.Dataset:
    """Rename dimensions to time, lat and lon where name or CF unit says what they are.

    Parameters
    ----------
    dataset : xarray.Dataset
        Not decoded.

    Returns
    -------
    xarray.Dataset
        The same variables, still lazy.
    """
    names = {name: _canonical_name(dataset, str(name)) for name in dataset.dims}
    changes = {old: new for old, new in names.items() if new != old and list(names.values()).count(new) == 1}
    return dataset.rename(changes)


def _canonical_name(dataset: xr.Dataset, name: str) -> str:
    units = str(dataset[name].attrs.get("units", "")) if name in dataset.variables else ""
    if units.startswith(("degrees_north", "degree_north")):
        return "lat"
    if units.startswith(("degrees_east", "degree_east")):
        return "lon"
    return "time" if " since " in units else _NAMES.get(name.lower(), name)


def pick(dataset: xr.Dataset, shapes: Sequence[tuple[str, ...]], *, source: str, variable: str | None = None) -> str:
    """Name of the one variable that has the wanted dimensions.

    Parameters
    ----------
    dataset : xarray.Dataset
        With canonical names.
    shapes : sequence of tuple of str
        Dimensions that are read, in any order.
    source : str
        File, for the fault.
    variable : str, optional
        The analyst's choice; then its dimensions are checked.

    Returns
    -------
    str

    Raises
    ------
    InputError
        When there is no such variable, or more than one that could be meant.
    """
    fitting = [str(n) for n, data in dataset.data_vars.items() if set(data.dims) in [set(s) for s in shapes]]
    wanted = "Must be over " + " or ".join("(" + ", ".join(shape) + ")" for shape in shapes)
    if variable is not None:
        if variable in fitting:
            return variable
        known = [str(name) for name in dataset.data_vars]
        if variable not in known:
            action = did_you_mean(nearest(variable, known), "Variables are " + ", ".join(known))
            raise InputError(Fault(source, variable, f'no variable "{variable}"', wanted, action))
        raise InputError(
            Fault(source, variable, f"the dimensions are {_dims(dataset[variable])}", wanted, "Choose another")
        )
    if len(fitting) > 1:
        with_units = [name for name in fitting if "units" in dataset[name].attrs and not _is_bounds(dataset, name)]
        fitting = with_units if len(with_units) == 1 else fitting
    if len(fitting) == 1:
        return fitting[0]
    if fitting:
        problem = "several variables could be meant: " + ", ".join(fitting)
        raise InputError(Fault(source, "variable", problem, "Must be one", "Keep one in the file, or state `variable`"))
    found = ", ".join(f"{name} {_dims(data)}" for name, data in dataset.data_vars.items()) or "none"
    raise InputError(Fault(source, "variable", f"no variable has the wanted dimensions; there are {found}", wanted))


def _in_pascal(dataset: xr.Dataset, name: str, *, source: str) -> xr.DataArray:
    attributes = dataset[name].attrs
    factor = pascal_of_field(attributes.get("units"), source=source, name=name)
    packing = {"scale_factor": float(attributes.get("scale_factor", 1.0)) * factor}
    if "add_offset" in attributes:
        packing["add_offset"] = float(attributes["add_offset"]) * factor
    scaled = dataset if factor == 1.0 else dataset.assign({name: dataset[name].assign_attrs(packing)})
    return decoded(scaled, name, source=source)


def decoded(dataset: xr.Dataset, name: str, *, source: str) -> xr.DataArray:
    """One variable with fill values, packing and times decoded, still lazy.

    Raises
    ------
    InputError
        A dimension without coordinate (other than member and month), or times out of order.
    """
    data = dataset[name]
    lacking = [str(dim) for dim in data.dims if dim not in dataset.coords and dim not in ("member", "month")]
    if lacking:
        raise InputError(
            [Fault(source, dim, "the dimension has no coordinate variable", action="Add it") for dim in lacking]
        )
    if "time" not in data.dims:
        return xr.decode_cf(dataset[[name]])[name]
    bounds = dataset["time"].attrs.get("bounds")
    wanted: list[Hashable] = [name, bounds] if bounds in dataset.variables else [name]
    try:
        clear = xr.decode_cf(dataset[wanted])
    except (ValueError, TypeError, ImportError, OverflowError) as error:
        told = {key: dataset["time"].attrs.get(key) for key in ("units", "calendar")}
        shown = ", ".join(f"{key} {value!r}" for key, value in told.items() if value is not None)
        problem = f"the times cannot be read ({shown})"
        allowed = "Must be like 'days since 2014-01-01', UTC, standard calendar"
        raise InputError(Fault(source, "time", problem, allowed, "Convert them")) from error
    stamps = clear[bounds].to_numpy() if len(wanted) > 1 else clear["time"].to_numpy()
    stamps = _instants(stamps, source=source)
    if stamps.ndim == 2:  # CF bounds: first and last instant of each interval
        stamps = stamps[:, 0] + (stamps[:, 1] - stamps[:, 0]) // 2
    elif "start" in (dataset["time"].attrs.get("stamp"), dataset.attrs.get("stamp")):
        stamps = middle_of_intervals(stamps)
    require_order(stamps, source=source)
    return clear[name].assign_coords(time=stamps)


def middle_of_intervals(starts: NDArray[np.datetime64]) -> NDArray[np.datetime64]:
    """Middles of intervals that follow each other without a gap, from their starts.

    Parameters
    ----------
    starts : (n,) array of datetime64[ns]
        In order; the last interval is as long as the one before.

    Returns
    -------
    (n,) array of datetime64[ns]

    Examples
    --------
    >>> months = np.array(["2015-01-01", "2015-02-01", "2015-03-01"], dtype="datetime64[ns]")
    >>> middle_of_intervals(months).astype("datetime64[h]").tolist()[1].isoformat()
    '2015-02-15T00:00:00'
    """
    if starts.size < 2:
        return starts
    lengths = np.diff(starts)
    return np.asarray(starts + np.append(lengths, lengths[-1]) // 2)


def require_order(time: NDArray[np.datetime64], *, source: str) -> None:
    """Refuse times that are missing or not strictly increasing.

    Raises
    ------
    InputError
    """
    if np.isnat(time).any():
        raise InputError(Fault(source, "time", f"{int(np.isnat(time).sum())} times are missing", "Must be none"))
    wrong = np.flatnonzero(np.diff(time) <= np.timedelta64(0))
    if wrong.size:
        first, second = (np.datetime_as_string(time[wrong[0] + k], unit="s") for k in (0, 1))
        problem = f"{second} follows {first}"
        raise InputError(Fault(source, "time", problem, "Times must increase", "Sort them and drop repeats"))


def pascal_of_field(units: Any, *, source: str, name: str) -> float:
    """Pascals in the unit of a field or series, where a height of water has no density.

    Raises
    ------
    InputError
        Unit missing, unknown or a height.
    """
    if not isinstance(units, str):
        raise InputError(Fault(source, name, "no units are stated", "Must be a pressure such as Pa or hPa", "Add them"))
    if units.strip() in _HEIGHTS:
        problem = f"the unit {units!r} is a height, not a pressure"
        raise InputError(Fault(source, name, problem, "Must be a pressure such as Pa or hPa", "Convert the values"))
    return pascal_per_unit(units, source=source, name=name)


def _instants(stamps: NDArray[Any], *, source: str) -> NDArray[np.datetime64]:
    if stamps.dtype.kind != "M":
        problem = "the times are not instants of the Gregorian calendar"
        raise InputError(Fault(source, "time", problem, "Must be CF times in UTC, standard calendar", "Convert them"))
    return stamps.astype("datetime64[ns]")


def _dims(data: xr.DataArray) -> str:
    return "(" + ", ".join(str(dim) for dim in data.dims) + ")"


def _is_bounds(dataset: xr.Dataset, name: str) -> bool:
    return any(variable.attrs.get("bounds") == name for variable in dataset.variables.values())
