"""Annual load patterns and air pressure from gridded NetCDF."""

import calendar
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import ANNUAL_RATE
from massfit.errors import Fault, InputError
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.pattern import LoadPattern
from massfit.fingerprint.transforms import SphereGrid
from massfit.io.fields.load_checks import land_load
from massfit.io.netcdf.netcdf_file import as_text, damage_as_fault, open_netcdf
from massfit.io.netcdf.variables import canonical, decoded, load, pascal_of_field, read_pressure

_LOAD_UNITS = ("kg m-2", "kg m^-2", "kg/m2", "kg/m^2", "kg m**-2")
_GAUSSIAN = 0.01  # degrees: latitudes of Gaussian grids are often rounded to hundredths
_MOST_GAUSSIAN = 4096  # rows
_EVEN = 1e-3  # of a cell: coordinates stored as float32 are uneven by less


def read_loads(path: Path, *, reference_year: int, source: str, water_vapour: complex = 0j) -> tuple[LoadPattern, ...]:
    """Read the load members of one file.

    Parameters
    ----------
    path : pathlib.Path
        NetCDF with `load_in_phase` and `load_quadrature` over ([member,] lat, lon), or with a
        monthly climatology `load` over ([member,] month, lat, lon), or over twelve times; kg m-2. NaN is no load. The
        attribute `load_area` of the file or the variable says whether values count for the whole
        "cell" (default) or its "land" part.
    reference_year : int
        Year whose calendar months a climatology is laid on.
    source : str
        File as the analyst wrote it.
    water_vapour : complex
        Annual phasor of the mass of water vapour in the air, kg: what a file that covers the ocean must leave over.

    Returns
    -------
    tuple of LoadPattern
        kg m-2 of whole-cell area, in the file's order; without the ocean's own part, see
        :func:`massfit.io.fields.load_checks.land_load`.

    Raises
    ------
    InputError
        Variables missing, of another unit, on a grid that is not regular and global; more load in a
        cell than there can be, or a water budget that does not close.
    """
    with open_netcdf(path, source=source, decode=False) as raw, damage_as_fault(source):
        dataset = canonical(raw)
        if "load" in dataset:
            phasor = month_phasor(_months(dataset, source), reference_year)
            first = "load"
        else:
            phasor = _joined(dataset, "load_in_phase", "load_quadrature", source)
            first = "load_in_phase"
        _require_load_units(dataset, source)
        patterns = tuple(_patterns(dataset, phasor, path.stem, source))
        whole = _on_whole_cells(patterns, _load_area(dataset, first, source))
    return tuple(land_load(pattern, water_vapour=water_vapour, source=source) for pattern in whole)


def read_atmosphere_load(path: Path, *, source: str) -> LoadPattern:
    """Read the annual phasor of air pressure on land.

    Parameters
    ----------
    path : pathlib.Path
        NetCDF with `pressure_in_phase` and `pressure_quadrature` over (lat, lon); NaN counts as zero.
    source : str
        File as the analyst wrote it.

    Returns
    -------
    LoadPattern
        Pa.

    Raises
    ------
    InputError
        Variables missing, of an unknown unit, on a grid that is not regular and global.
    """
    names = ("pressure_in_phase", "pressure_quadrature")
    with open_netcdf(path, source=source, decode=False) as raw, damage_as_fault(source):
        dataset = canonical(raw)
        phasor = _joined(dataset, *names, source)
        units = {dataset[name].attrs.get("units") for name in names}
        if len(units) > 1 or "member" in phasor.dims:
            problem = "the two components have different units or several members"
            raise InputError(Fault(source, names[0], problem, "Must be one phasor over (lat, lon)"))
        factor = pascal_of_field(units.pop(), source=source, name=names[0])
        (pattern,) = _patterns(dataset, phasor * factor, path.stem, source)
        return pattern


def read_air_pressure(path: Path, *, source: str) -> xr.DataArray:
    """Read surface air pressure over (time, lat, lon).

    Returns
    -------
    xarray.DataArray
        Pa, lazy when big; time is the middle of each interval, UTC.

    Raises
    ------
    InputError
        As for any pressure variable, and a grid that is not regular and global.
    """
    data = read_pressure(path, [("time", "lat", "lon")], source=source)
    require_global_grid(data["lat"].to_numpy(), data["lon"].to_numpy(), source=source)
    return data


def month_phasor(climatology: xr.DataArray, reference_year: int) -> xr.DataArray:
    """Annual phasor of twelve monthly means.

    Offset, annual and semi-annual lines are fitted by least squares, each basis function
    averaged over its month, so that the attenuation of a monthly mean (0.98862 for the
    annual line) is undone exactly.

    Parameters
    ----------
    climatology : xarray.DataArray
        January to December along `month`.
    reference_year : int

    Returns
    -------
    xarray.DataArray
        Complex, without `month`.
    """
    edges = np.cumsum([0, *(calendar.monthrange(reference_year, month)[1] for month in range(1, 13))])
    columns = [np.ones(12)]  # means of 1, cos and sin over each month
    for rate in (ANNUAL_RATE, 2.0 * ANNUAL_RATE):
        columns += [np.diff(np.sin(rate * edges)) / (rate * np.diff(edges))]
        columns += [-np.diff(np.cos(rate * edges)) / (rate * np.diff(edges))]
    solve = np.linalg.pinv(np.column_stack(columns))
    return xr.DataArray(solve[1] + 1j * solve[2], dims="month").dot(climatology.fillna(0.0), dim="month")


def require_global_grid(latitude: NDArray[Any], longitude: NDArray[Any], *, source: str) -> None:
    """Refuse a grid that is irregular or does not cover the sphere once.

    Raises
    ------
    InputError
        With one fault a coordinate.
    """
    faults = []
    for name, centres, span in (("lat", latitude, 180.0), ("lon", longitude, 360.0)):
        steps = np.diff(centres.astype(float)) if centres.ndim == 1 and centres.size > 1 else np.array([np.nan])
        step = float(np.mean(steps))
        # rows of points from pole to pole are cells too, cut in half at the poles
        extents = (centres.size * abs(step), (centres.size - 1) * abs(step) if name == "lat" else np.nan)
        if not np.all(np.abs(steps - step) <= _EVEN * abs(step)) or step == 0.0:
            problem, action = "the cells are not equally spaced", "Interpolate onto a regular grid"
        elif not any(abs(extent - span) <= _EVEN * abs(step) * centres.size for extent in extents):
            problem = f"{centres.size} cells of {abs(step):g} degrees cover {extents[0]:g} degrees"
            action = "Drop a repeated meridian" if extents[0] > span else "Pad the grid with NaN"
        else:
            continue
        allowed = f"Must be a regular grid of cells that covers {span:g} degrees once"
        faults.append(Fault(source, name, problem, allowed, action))
    if faults:
        raise InputError(faults)


def _variable(dataset: xr.Dataset, name: str, dims: tuple[str, ...], source: str) -> xr.DataArray:
    allowed = "Must be over ([member,] " + ", ".join(dims) + ")"
    if name not in dataset.data_vars:
        raise InputError(Fault(source, name, "the variable is missing", allowed, "Add it"))
    if set(dataset[name].dims) - {"member"} != set(dims):
        found = ", ".join(str(dim) for dim in dataset[name].dims)
        raise InputError(Fault(source, name, f"the dimensions are ({found})", allowed, "Drop the others"))
    data = _around(load(decoded(dataset, name, source=source), source=source).astype(np.float64))
    gaussian = _gaussian_rows(data["lat"].to_numpy())
    rows = data["lat"].to_numpy() if gaussian is None else _even_rows(data.sizes["lat"])
    require_global_grid(rows, data["lon"].to_numpy(), source=source)
    if np.isinf(data.to_numpy()).any():
        raise InputError(
            Fault(source, name, "some values are infinite", "Must be finite, or NaN for no load", "Correct them")
        )
    data = data.transpose(..., *dims)
    return data if gaussian is None else _on_even_rows(data, gaussian, rows)


def _gaussian_rows(latitude: NDArray[Any]) -> NDArray[np.float64] | None:
    """Bounds of the rows of a Gaussian grid, from its quadrature weights; None where the rows are others."""
    if latitude.ndim != 1 or not 8 <= latitude.size <= _MOST_GAUSSIAN or latitude.size % 2:
        return None
    grid = SphereGrid(latitude.size // 2 - 1)
    for step in (1, -1):
        if np.allclose(latitude, grid.latitude_deg[::step], rtol=0.0, atol=_GAUSSIAN):
            return grid.cells.latitude_bounds_deg[::step]
    return None


def _even_rows(count: int) -> NDArray[np.float64]:
    return np.asarray((np.arange(count) + 0.5) * (180.0 / count) - 90.0, dtype=np.float64)


def _on_even_rows(data: xr.DataArray, bounds: NDArray[np.float64], rows: NDArray[np.float64]) -> xr.DataArray:
    """Average the rows of a Gaussian grid over as many even ones; masses stay, NaN counts as zero."""
    even = CellGrid.from_centres(rows, data["lon"].to_numpy().astype(float))
    source = CellGrid(bounds, even.longitude_bounds_deg)
    values = regrid(np.nan_to_num(data.to_numpy()), source, even)
    return xr.DataArray(values, dims=data.dims, coords={**data.drop_vars("lat").coords, "lat": rows})


def _around(data: xr.DataArray) -> xr.DataArray:
    """Begin a row of longitudes that jumps from 180 to -180 (or from 360 to 0) after its jump."""
    longitude = data["lon"].to_numpy().astype(float)
    steps = np.diff(longitude)
    if steps.size < 2:
        return data
    jumps = np.flatnonzero(np.sign(steps) != np.sign(np.median(steps)))
    return data.roll(lon=-int(jumps[0]) - 1, roll_coords=True) if jumps.size == 1 else data


def _joined(dataset: xr.Dataset, in_phase: str, quadrature: str, source: str) -> xr.DataArray:
    first = _variable(dataset, in_phase, ("lat", "lon"), source)
    second = _variable(dataset, quadrature, ("lat", "lon"), source)
    if first.dims != second.dims:
        raise InputError(Fault(source, quadrature, f"the dimensions are {second.dims}", f"Must be {first.dims}"))
    return first + 1j * second


def _months(dataset: xr.Dataset, source: str) -> xr.DataArray:
    if "time" in dataset["load"].dims and "month" not in dataset["load"].dims:
        timed = _variable(dataset, "load", ("time", "lat", "lon"), source)
        data = timed.assign_coords(time=timed["time"].dt.month).rename(time="month")
    else:
        data = _variable(dataset, "load", ("month", "lat", "lon"), source)
    if data.sizes["month"] != 12:
        problem = f"there are {data.sizes['month']} months"
        raise InputError(
            Fault(source, "load", problem, "Must be the twelve months of a climatology", "Average the years")
        )
    if "month" in data.coords and data["month"].dtype.kind in "iuf":
        if sorted(data["month"].to_numpy().tolist()) != list(range(1, 13)):
            problem = f"the months are {data['month'].to_numpy().tolist()}"
            raise InputError(Fault(source, "month", problem, "Must be 1 to 12", "Renumber them"))
        data = data.sortby("month")
    return data


def _require_load_units(dataset: xr.Dataset, source: str) -> None:
    units = {n: dataset[n].attrs.get("units") for n in ("load", "load_in_phase", "load_quadrature") if n in dataset}
    faults = [
        Fault(source, name, f"the unit is {unit!r}", "Must be 'kg m-2'", "Convert the values")
        for name, unit in units.items()
        if unit not in _LOAD_UNITS
    ]
    if faults:
        raise InputError(faults)


def _load_area(dataset: xr.Dataset, name: str, source: str) -> str:
    area = dataset[name].attrs.get("load_area", dataset.attrs.get("load_area", "cell"))
    if area not in ("cell", "land"):
        raise InputError(
            Fault(source, "load_area", f"the value is {area!r}", "Must be 'cell' or 'land'", "Correct the attribute")
        )
    return str(area)


def _patterns(dataset: xr.Dataset, phasor: xr.DataArray, stem: str, source: str) -> Iterator[LoadPattern]:
    reference = as_text(dataset.attrs.get("references") or dataset.attrs.get("title") or source)
    latitude, longitude = (phasor[dim].to_numpy().astype(float) for dim in ("lat", "lon"))
    members = phasor if "member" in phasor.dims else phasor.expand_dims("member")
    for position in range(members.sizes["member"]):
        values = members.isel(member=position).to_numpy()
        values = np.where(np.isnan(values), 0.0, values)
        name = _member_name(phasor, position, stem)
        if not values.any():
            allowed = "Must hold an annual pattern"
            raise InputError(Fault(source, name, "every value is zero or missing", allowed, "Check the file"))
        yield LoadPattern(name, latitude, longitude, values, reference)


def _member_name(phasor: xr.DataArray, position: int, stem: str) -> str:
    if "member" not in phasor.dims:
        return stem
    if "member" not in phasor.coords:
        return f"{stem} {position + 1}"
    return as_text(phasor["member"].to_numpy()[position])


def _on_whole_cells(patterns: tuple[LoadPattern, ...], area: str) -> tuple[LoadPattern, ...]:
    if area == "cell":
        return patterns
    ocean = OceanFunction.builtin()
    cells = CellGrid.from_centres(patterns[0].latitude_deg, patterns[0].longitude_deg)
    land = 1.0 - regrid(ocean.fraction, ocean.cells, cells)
    return tuple(LoadPattern(p.name, p.latitude_deg, p.longitude_deg, p.values * land, p.reference) for p in patterns)
