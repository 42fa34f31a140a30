"""Every fault of a series, a model, a load or an air-pressure file has its own exact message."""

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr

from massfit.errors import InputError
from massfit.io.fields.circulation_file import read_circulation
from massfit.io.fields.field_file import read_air_pressure, read_atmosphere_load, read_loads
from massfit.io.network.schema import CirculationEntry
from massfit.io.records.series_file import read_series

UNITS = "# units: hPa\n"
HEAD = UNITS + "time,value\n"
ROWS = "2014-01-01T12:00:00Z,0.5\n2014-01-02T12:00:00Z,0.25\n2014-01-03T12:00:00Z,0.125\n"

# name: (text, messages)
SERIES: dict[str, tuple[str, list[str]]] = {
    "empty": ("",
        ['a.csv: units: no units are stated. Must be a pressure such as Pa or hPa. Add the line "# '
         'units: hPa" at the top.']),
    "no units": ("time,value\n" + ROWS,
        ['a.csv: units: no units are stated. Must be a pressure such as Pa or hPa. Add the line "# '
         'units: hPa" at the top.']),
    "unknown units": (HEAD.replace("hPa", "millibars") + ROWS,
        ["a.csv: units: unknown unit 'millibars'. Must be one of Pa, hPa, kPa, mbar, dbar, decibar, "
         "bar, psi, psia, mm, cm, m. Did you mean 'mbar'?"]),
    "height for a pressure": (HEAD.replace("hPa", "mm") + ROWS,
        ["a.csv: units: the unit 'mm' is a height, not a pressure. Must be a pressure such as Pa or "
         "hPa. Convert the values."]),
    "unknown stamp": ("# stamp: end\n" + HEAD + ROWS,
        ['a.csv: stamp: the stamp is \'end\'. Must be "middle" or "start". Correct it.']),
    "another header": (UNITS + "date,pressure\n" + ROWS,
        ["a.csv:2: the header is 'date,pressure'. Must be time,value. Name the columns."]),
    "no header": (UNITS + ROWS,
        ["a.csv:2: the header is '2014-01-01T12:00:00Z,0.5'. Must be time,value. Name the columns."]),
    "one value": (HEAD + ROWS[:25],
        ["a.csv: value: the series has 1 values. Must be at least two. Check the file."]),
    "a row too long": (HEAD + ROWS.replace("0.25", "0.25,1"),
        ["a.csv:4: 1 rows do not have two columns. Must be time,value. Correct the first of them."]),
    "a word for a number": (HEAD + ROWS.replace("0.25", "low"),
        ["a.csv:4: value: the value is 'low'. Must be a number, or empty. Correct it."]),
    "a time that is not": (HEAD + ROWS.replace("01-02T", "02-30T"),
        ["a.csv:4: time: the value is '2014-02-30T12:00:00Z'. Must be ISO 8601, UTC. Correct it or "
         "state `time_format`."]),
    "a time twice": (HEAD + ROWS.replace("01-02T", "01-01T"),
        ["a.csv:4: time: 2014-01-01T12:00:00 follows 2014-01-01T12:00:00. Times must increase. Sort "
         "them and drop repeats."]),
    "times out of order": (HEAD + ROWS.replace("01-02T", "02-02T"),
        ["a.csv:5: time: 2014-01-03T12:00:00 follows 2014-02-02T12:00:00. Times must increase. Sort "
         "them and drop repeats."]),
    "absolute pressure": (HEAD + ROWS.replace("0.25", "1013.25"),
        ["a.csv: value: the series varies by 478 hPa (1 sd). A mean over the whole ocean varies by "
         "about 1 hPa. Correct the units."]),
    "null characters": (HEAD + ROWS.replace("0.25", "0\0"),
        ["a.csv:4: value: the value is '0\\x00'. Must be a number, or empty. Correct it."]),
    "another encoding": (HEAD + ROWS.replace("0.25", "0\udce9"),
        ["a.csv: the file is neither NetCDF nor UTF-8 text. Must be one of them. Check the path, or "
         "save it as UTF-8."]),
}  # fmt: skip


def messages(read: Callable[[], object]) -> list[str]:
    try:
        read()
    except InputError as error:
        return str(error).splitlines()
    return []


@pytest.mark.parametrize("name", SERIES)
def test_series(name: str, tmp_path: Path) -> None:
    text, expected = SERIES[name]
    (tmp_path / "a.csv").write_text(text, errors="surrogateescape")
    assert messages(lambda: read_series(tmp_path / "a.csv", name="mean", source="a.csv")) == expected


LATITUDE, LONGITUDE = np.arange(-75.0, 90.0, 30.0), np.arange(15.0, 360.0, 30.0)
GRID = {"lat": LATITUDE, "lon": LONGITUDE}
DAYS = ("time", np.arange(20.0), {"units": "days since 2014-01-01"})


def sites(*ids: str, units: Any = "hPa", **time: Any) -> xr.Dataset:
    attributes = {} if units is None else {"units": units}
    days = (DAYS[0], DAYS[1], {**DAYS[2], **time})
    coords: dict[str, Any] = {"time": days, "site": list(ids)}
    return xr.Dataset({"p": (("time", "site"), np.ones((20, len(ids))), attributes)}, coords)


def cells(latitude: Any = LATITUDE, longitude: Any = LONGITUDE, **attributes: Any) -> xr.Dataset:
    values = np.ones((20, len(latitude), len(longitude)))
    coords: dict[str, Any] = {"time": DAYS, "lat": latitude, "lon": longitude}
    return xr.Dataset({"p": (("time", "lat", "lon"), values, {"units": "Pa", **attributes})}, coords)


def load(units: Any = "kg m-2", value: float = 3.0, **coords: Any) -> xr.Dataset:
    at = {**GRID, **coords}
    values = np.full((len(at["lat"]), len(at["lon"])), value)
    return xr.Dataset({f"load_{part}": (("lat", "lon"), values, {"units": units}) for part in PARTS}, at)


PARTS = ("in_phase", "quadrature")


def months(count: int = 12, first: int = 1, units: str = "kg m-2") -> xr.Dataset:
    values = np.ones((count, LATITUDE.size, LONGITUDE.size))
    return xr.Dataset(
        {"load": (("month", "lat", "lon"), values, {"units": units})}, {"month": np.arange(count) + first, **GRID}
    )


def land(units: tuple[Any, Any] = ("Pa", "Pa")) -> xr.Dataset:
    values = np.ones((LATITUDE.size, LONGITUDE.size))
    both = zip(PARTS, units, strict=True)
    return xr.Dataset({f"pressure_{part}": (("lat", "lon"), values, {"units": unit}) for part, unit in both}, GRID)


# name: (what reads it, the file, messages)
FIELDS: dict[str, tuple[str, Callable[[], xr.Dataset], list[str]]] = {
    "model without units": ("model", lambda: sites("A", units=None),
        ["a.nc: p: no units are stated. Must be a pressure such as Pa or hPa. Add them."]),
    "model in an unknown unit": ("model", lambda: sites("A", units="Pascal"),
        ["a.nc: p: unknown unit 'Pascal'. Must be one of Pa, hPa, kPa, mbar, dbar, decibar, bar, "
         "psi, psia, mm, cm, m. Did you mean 'Pa'?"]),
    "model in metres": ("model", lambda: sites("A", units="m"),
        ["a.nc: p: the unit 'm' is a height, not a pressure. Must be a pressure such as Pa or hPa. "
         "Convert the values."]),
    "model of other sites": ("model", lambda: sites("C", "D"),
        ["a.nc: site: none of its 2 sites (C, D, ...) is in the network. Must be site ids of the "
         "network. Use the ids of the network file."]),
    "model of repeated sites": ("model", lambda: sites("A", "A"),
        ["a.nc: site: sites stand twice: A. Must be unique. Keep one of each."]),
    "model without a time axis": ("model", lambda: sites("A").isel(time=0, drop=True),
        ["a.nc: variable: no variable has the wanted dimensions; there are p (site). Must be over "
         "(time, site) or (time, lat, lon)."]),
    "model of two variables": ("model", lambda: sites("A").assign(q=sites("A")["p"]),
        ["a.nc: variable: several variables could be meant: p, q. Must be one. Keep one in the file, "
         "or state `variable`."]),
    "model without site names": ("model", lambda: sites("A").drop_vars("site"),
        ["a.nc: site: the dimension has no coordinate variable. Add it."]),
    "model in a calendar of equal months": ("model", lambda: sites("A", calendar="360_day"),
        ["a.nc: time: the times cannot be read (units 'days since 2014-01-01', calendar '360_day'). "
         "Must be like 'days since 2014-01-01', UTC, standard calendar. Convert them."]),
    "model without leap days": ("model", lambda: sites("A", calendar="noleap"),
        ["a.nc: time: the times cannot be read (units 'days since 2014-01-01', calendar 'noleap'). "
         "Must be like 'days since 2014-01-01', UTC, standard calendar. Convert them."]),
    "model in no known time": ("model", lambda: sites("A").pipe(_time_units, "days since launch"),
        ["a.nc: time: the times cannot be read (units 'days since launch'). Must be like 'days since "
         "2014-01-01', UTC, standard calendar. Convert them."]),
    "model that runs backwards": ("model", lambda: sites("A").isel(time=slice(None, None, -1)),
        ["a.nc: time: 2014-01-19T00:00:00 follows 2014-01-20T00:00:00. Times must increase. Sort "
         "them and drop repeats."]),
    "model on a crooked grid": ("model", lambda: cells(latitude=[-75.0, -45.0, -50.0, 15.0, 45.0, 75.0]),
        ["a.nc: lat: the coordinate is not monotonic. Must rise or fall throughout. Sort it."]),
    "air pressure on half the globe": ("air", lambda: cells(longitude=LONGITUDE[:6]),
        ["a.nc: lon: 6 cells of 30 degrees cover 180 degrees. Must be a regular grid of cells that "
         "covers 360 degrees once. Pad the grid with NaN."]),
    "air pressure on an uneven grid": ("air", lambda: cells(latitude=[-75.0, -45.0, -10.0, 15.0, 45.0, 75.0]),
        ["a.nc: lat: the cells are not equally spaced. Must be a regular grid of cells that covers "
         "180 degrees once. Interpolate onto a regular grid."]),
    "air pressure without units": ("air", lambda: cells(units=3.0),
        ["a.nc: p: no units are stated. Must be a pressure such as Pa or hPa. Add them."]),
    "load in another unit": ("load", lambda: load("mm"),
        ["a.nc: load_in_phase: the unit is 'mm'. Must be 'kg m-2'. Convert the values.",
         "a.nc: load_quadrature: the unit is 'mm'. Must be 'kg m-2'. Convert the values."]),
    "load without its second part": ("load", lambda: load().drop_vars("load_quadrature"),
        ["a.nc: load_quadrature: the variable is missing. Must be over ([member,] lat, lon). Add it."]),
    "load over other dimensions": ("load", lambda: load().expand_dims(depth=2),
        ["a.nc: load_in_phase: the dimensions are (depth, lat, lon). Must be over ([member,] lat, "
         "lon). Drop the others."]),
    "load with an infinity": ("load", lambda: load(value=np.inf),
        ["a.nc: load_in_phase: some values are infinite. Must be finite, or NaN for no load. Correct "
         "them."]),
    "load with a meridian twice": ("load", lambda: load(lon=np.arange(0.0, 361.0, 30.0)),
        ["a.nc: lon: 13 cells of 30 degrees cover 390 degrees. Must be a regular grid of cells that "
         "covers 360 degrees once. Drop a repeated meridian."]),
    "load on half the globe": ("load", lambda: load(lat=LATITUDE[:3]),
        ["a.nc: lat: 3 cells of 30 degrees cover 90 degrees. Must be a regular grid of cells that "
         "covers 180 degrees once. Pad the grid with NaN."]),
    "load of an unknown area": ("load", lambda: load().assign_attrs(load_area="sea"),
        ["a.nc: load_area: the value is 'sea'. Must be 'cell' or 'land'. Correct the attribute."]),
    "eleven months": ("load", lambda: months(11),
        ["a.nc: load: there are 11 months. Must be the twelve months of a climatology. Average the "
         "years."]),
    "months that start at 0": ("load", lambda: months(first=0),
        ["a.nc: month: the months are [0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11]. Must be 1 to 12. "
         "Renumber them."]),
    "months in another unit": ("load", lambda: months(units="m"),
        ["a.nc: load: the unit is 'm'. Must be 'kg m-2'. Convert the values."]),
    "air on land in two units": ("land", lambda: land(("Pa", "hPa")),
        ["a.nc: pressure_in_phase: the two components have different units or several members. Must "
         "be one phasor over (lat, lon)."]),
    "air on land without units": ("land", lambda: land((None, None)),
        ["a.nc: pressure_in_phase: no units are stated. Must be a pressure such as Pa or hPa. Add "
         "them."]),
    "air on land of one part": ("land", lambda: land().drop_vars("pressure_in_phase"),
        ["a.nc: pressure_in_phase: the variable is missing. Must be over ([member,] lat, lon). Add "
         "it."]),
}  # fmt: skip


def _time_units(dataset: xr.Dataset, units: str) -> xr.Dataset:
    dataset["time"].attrs["units"] = units
    return dataset


def field_messages(kind: str, path: Path) -> list[str]:
    entry = CirculationEntry("M", path.name, "removed", "not-forced")
    read: dict[str, Callable[[], object]] = {
        "model": lambda: read_circulation(path, entry, ocean_mean=None, sites=["A", "B"], source=path.name),
        "air": lambda: read_air_pressure(path, source=path.name),
        "load": lambda: read_loads(path, reference_year=2016, source=path.name),
        "land": lambda: read_atmosphere_load(path, source=path.name),
    }
    return messages(read[kind])


@pytest.mark.parametrize("name", FIELDS)
def test_field(name: str, tmp_path: Path) -> None:
    kind, make, expected = FIELDS[name]
    made = make()
    for variable in made.variables.values():
        variable.attrs = {key: value for key, value in variable.attrs.items() if value is not None}
    made.to_netcdf(tmp_path / "a.nc", engine="scipy")
    assert field_messages(kind, tmp_path / "a.nc") == expected
