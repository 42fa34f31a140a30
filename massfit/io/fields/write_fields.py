"""Write records, series and fields in the formats that the network file reads."""

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.fingerprint.pattern import LoadPattern
from massfit.network import CirculationModel, Series
from massfit.records.record import Calibrations, Record
from massfit.site import Site

TEXT_MISSING = -9999.0
"""Stands for a missing pressure in a text record, dbar."""

_CONVENTIONS = "CF-1.13"
_FINE_PA = 0.1  # resolution of packed pressure, a hundredth of a millimetre of water
_FINE_LOAD = 0.01  # kg m-2
_MISSING = np.iinfo(np.int32).min
_CHUNK_VALUES = 400_000
_PA_PER_DBAR = 1e4


def write_record(path: Path, record: Record, site: Site, *, title: str) -> None:
    """Write one record as text where the name ends with .txt, else as CF NetCDF.

    Parameters
    ----------
    path : pathlib.Path
    record : Record
        Its absolute pressure is written: anomaly plus reference.
    site : Site
    title : str
        Title of the file.
    """
    if path.suffix == ".txt":
        _write_text_record(path, record, title)
    else:
        _write_netcdf_record(path, record, site, title)


def text_columns(record: Record) -> tuple[str, ...]:
    """Columns of the record as text; seconds only where there are any."""
    whole_minutes = np.all(record.time == record.time.astype("datetime64[m]"))
    return ("year", "month", "day", "hour", "minute", *(() if whole_minutes else ("second",)), "pressure")


def write_series(path: Path, series: Series) -> None:
    """Write an ocean-mean series as CSV in hPa.

    Parameters
    ----------
    path : pathlib.Path
    series : Series
    """
    stamps = np.datetime_as_string(series.time, unit="s")
    rows = [f"{stamp}Z,{value:.4f}" for stamp, value in zip(stamps, series.pressure / 100.0, strict=True)]
    head = [f"# {series.name}; times are UTC, the middle of each interval", "# units: hPa", "time,value"]
    path.write_text("\n".join([*head, *rows, ""]), encoding="utf-8")


def write_calibrations(path: Path, calibrations: Calibrations) -> None:
    """Write readings at a known pressure as CSV in hPa.

    Parameters
    ----------
    path : pathlib.Path
    calibrations : Calibrations
    """
    stamps = np.datetime_as_string(calibrations.time, unit="s")
    columns = zip(stamps, calibrations.pressure / PASCAL_PER_HPA, calibrations.sd / PASCAL_PER_HPA, strict=True)
    rows = [f"{stamp}Z,{value:.4f},{sd:.4g}" for stamp, value, sd in columns]
    head = ["# readings less the known pressure; times are UTC", "# units: hPa", "time,value,sd"]
    path.write_text("\n".join([*head, *rows, ""]), encoding="utf-8")


def write_circulation(path: Path, model: CirculationModel) -> None:
    """Write bottom pressure of a model over (time, site) or (time, lat, lon).

    Parameters
    ----------
    path : pathlib.Path
    model : CirculationModel
    """
    name = "bottom_pressure"
    dataset = model.pressure.to_dataset(name=name)
    dataset[name].attrs = {"long_name": "bottom pressure anomaly", "units": "Pa"}
    _write(path, dataset, {name: _FINE_PA}, title=f"Bottom pressure of the ocean model {model.name}")


def write_loads(path: Path, members: Sequence[LoadPattern]) -> None:
    """Write load members that share a grid.

    Parameters
    ----------
    path : pathlib.Path
    members : sequence of LoadPattern
    """
    values = np.stack([member.values for member in members])
    units = {"units": "kg m-2", "load_area": "cell"}
    dims = ("member", "lat", "lon")
    dataset = xr.Dataset(
        {
            "load_in_phase": (dims, values.real, {"long_name": "annual load, in-phase part", **units}),
            "load_quadrature": (dims, values.imag, {"long_name": "annual load, quadrature part", **units}),
        },
        coords={"member": [member.name for member in members], **_centres(members[0])},
        attrs={"references": "; ".join(dict.fromkeys(member.reference for member in members))},
    )
    _write(path, dataset, dict.fromkeys(dataset.data_vars, _FINE_LOAD), title="Annual load patterns, equal weight")


def write_atmosphere_load(path: Path, pattern: LoadPattern) -> None:
    """Write the annual phasor of air pressure.

    Parameters
    ----------
    path : pathlib.Path
    pattern : LoadPattern
        Pa.
    """
    parts = {"pressure_in_phase": pattern.values.real, "pressure_quadrature": pattern.values.imag}
    dataset = xr.Dataset(
        {name: (("lat", "lon"), part, {"units": "Pa"}) for name, part in parts.items()},
        coords=_centres(pattern),
        attrs={"references": pattern.reference},
    )
    _write(path, dataset, dict.fromkeys(parts, _FINE_PA), title="Annual cycle of surface air pressure")


def write_air_pressure(path: Path, pressure: xr.DataArray) -> None:
    """Write surface air pressure over (time, lat, lon).

    Parameters
    ----------
    path : pathlib.Path
    pressure : xarray.DataArray
        Pa.
    """
    name = "air_pressure"
    dataset = pressure.to_dataset(name=name)
    dataset[name].attrs = {"standard_name": "surface_air_pressure", "units": "Pa"}
    _write(path, dataset, {name: _FINE_PA}, title="Surface air pressure")


def _centres(pattern: LoadPattern) -> dict[str, NDArray[np.float64]]:
    return {"lat": pattern.latitude_deg, "lon": pattern.longitude_deg}


def _write_netcdf_record(path: Path, record: Record, site: Site, title: str) -> None:
    name = "pressure"
    pressure = record.pressure + record.reference
    attributes = {"standard_name": "sea_water_pressure_at_sea_floor", "units": "Pa", "coordinates": "lat lon station"}
    dataset = xr.Dataset(
        {
            name: ("time", pressure, attributes),
            "station": ((), site.id, {"cf_role": "timeseries_id", "long_name": "site"}),
            "lat": ((), site.latitude_deg),
            "lon": ((), site.longitude_deg),
        },
        coords={"time": record.time},
        attrs={"featureType": "timeSeries", "comment": "absolute pressure"},
    )
    if site.depth_m is not None:
        dataset["depth"] = ((), site.depth_m, {"standard_name": "sea_floor_depth_below_sea_surface", "units": "m"})
    # whole pascals, where the recorder counts in them, take half the room
    whole = bool(np.all(np.isnan(pressure) | (np.abs(pressure - np.round(pressure)) < 1e-6)))
    _write(path, dataset, {name: 1.0 if whole else _FINE_PA}, title=f"{title}, {record.deployment}")


def _write_text_record(path: Path, record: Record, title: str) -> None:
    pressure = record.pressure + record.reference
    dbar = np.where(np.isnan(pressure), TEXT_MISSING, pressure / _PA_PER_DBAR)
    columns = text_columns(record)
    stamps = np.datetime_as_string(record.time, unit="m" if "second" not in columns else "ms")
    separators = str.maketrans("-T:", "   ")
    rows = [f"{stamp.translate(separators)} {value:.5f}" for stamp, value in zip(stamps.tolist(), dbar, strict=True)]
    head = [f"# {title}, {record.deployment}; UTC, absolute pressure in dbar", "# " + " ".join(columns)]
    path.write_text("\n".join([*head, *rows, ""]), encoding="utf-8")


def _write(path: Path, dataset: xr.Dataset, steps: Mapping[Any, float], *, title: str) -> None:
    """Write as compressed, checksummed NetCDF-4; the named variables as whole numbers of steps."""
    names = {"lat": ("latitude", "degrees_north"), "lon": ("longitude", "degrees_east")}
    dataset = dataset.assign_attrs(Conventions=_CONVENTIONS, title=title)
    for name, (standard_name, units) in names.items():
        if name in dataset.variables:
            dataset[name].attrs = {"standard_name": standard_name, "units": units}
    encoding: dict[Any, dict[str, Any]] = {}
    for name, step in steps.items():
        shape = dataset[name].shape
        chunks = (max(1, min(shape[0], _CHUNK_VALUES * shape[0] // max(1, dataset[name].size))), *shape[1:])
        encoding[name] = {"dtype": "int32", "scale_factor": step, "_FillValue": _MISSING, "chunksizes": chunks}
        encoding[name] |= {"zlib": True, "complevel": 9, "shuffle": True, "fletcher32": True}
    if "time" in dataset.variables:
        dataset["time"].attrs = {"standard_name": "time", "axis": "T"}
        encoding["time"] = _time_encoding(dataset["time"].to_numpy())
    dataset.to_netcdf(path, engine="h5netcdf", encoding=encoding)


def _time_encoding(time: NDArray[np.datetime64]) -> dict[str, Any]:
    """Whole seconds where that is exact, else fractions of them, of the first day's midnight."""
    whole = bool(np.all(time == time.astype("datetime64[s]")))
    origin = np.datetime_as_string(time.min(), unit="D")
    return {
        "units": f"seconds since {origin} 00:00:00",
        "calendar": "standard",
        "dtype": "int64" if whole else "float64",
        "zlib": True,
        "shuffle": True,
        "fletcher32": True,
        "chunksizes": time.shape,
    }
