import gc
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
import xarray as xr

from massfit.errors import InputError
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.record_file import read_record
from massfit.records.record import Record

HOURS = 50
TIME = np.datetime64("2016-01-01T00:30", "ns") + np.arange(HOURS) * np.timedelta64(1, "h")
# absolute pressure at 4,000 m, dbar
PRESSURE = 4100.0 + 0.01 * np.sin(np.arange(HOURS))
ENCODING: dict[str, Any] = {"time": {"units": "seconds since 1970-01-01", "dtype": "float64", "_FillValue": None}}


def single(**attributes: Any) -> xr.Dataset:
    attributes = {"units": "dbar", "standard_name": "sea_water_pressure_at_sea_floor", **attributes}
    attributes = {key: value for key, value in attributes.items() if value is not None}
    return xr.Dataset(
        {"p": ("time", PRESSURE, attributes), "quality": ("time", np.ones(HOURS, dtype="int8"))},
        {"time": ("time", TIME, {"standard_name": "time"})},
        {"featureType": "timeSeries"},
    )


def read(folder: Path, dataset: xr.Dataset, *, engine: Any = "h5netcdf", encoding: Any = None, **entry: Any) -> Record:
    dataset.to_netcdf(folder / "a.nc", engine=engine, encoding=encoding or ENCODING)
    return read_record(folder, DeploymentFile("a.nc", **entry), site="A", deployment="A/1")


def faults_of(folder: Path, dataset: xr.Dataset, **entry: Any) -> str:
    with pytest.raises(InputError) as caught:
        read(folder, dataset, **entry)
    return str(caught.value)


def assert_is_the_series(record: Record) -> None:
    np.testing.assert_array_equal(record.time, TIME)
    assert record.time.dtype == np.dtype("datetime64[ns]")
    assert record.pressure.dtype == np.float64
    # absolute pressure in float64 keeps 1e-8 of its 4.1e7 Pa
    np.testing.assert_allclose(record.pressure + record.reference, PRESSURE * 1e4, rtol=0, atol=1e-6)
    assert np.median(record.pressure) == pytest.approx(0.0, abs=1e-6)


@pytest.mark.parametrize("engine", ["h5netcdf", "scipy"])
def test_single_series(tmp_path: Path, engine: str) -> None:
    record = read(tmp_path, single(), engine=engine)
    assert_is_the_series(record)
    assert (record.site, record.deployment, record.source) == ("A", "A/1", "a.nc")
    assert record.find_steps
    assert record.actions == ()


@pytest.mark.parametrize("order", [("station", "time"), ("time", "station")])
def test_stations_in_either_order(tmp_path: Path, order: tuple[str, str]) -> None:
    other = single().assign(p=single()["p"] + 1.0)
    both = xr.concat([other, single()], dim="station").transpose(*order)
    both["name"] = ("station", ["north", "south"], {"cf_role": "timeseries_id"})
    assert_is_the_series(read(tmp_path, both, station="south"))


def test_station_must_be_chosen_and_known(tmp_path: Path) -> None:
    both = xr.concat([single(), single()], dim="station").assign_coords(station=["north", "south"])
    assert "holds 2 stations" in faults_of(tmp_path, both)
    assert "Did you mean 'south'?" in faults_of(tmp_path, both, station="souht")


def test_single_station_with_scalar_identity(tmp_path: Path) -> None:
    named = single().assign_coords(station=((), "north", {"cf_role": "timeseries_id"}))
    assert_is_the_series(read(tmp_path, named, station="north"))
    assert "'south' is not in the file" in faults_of(tmp_path, named, station="south")


def ragged(kind: str) -> xr.Dataset:
    """Two stations of 20 and HOURS samples along one axis."""
    first = xr.Dataset({"p": ("obs", np.zeros(20))}, {"time": ("obs", TIME[:20] + np.timedelta64(9, "D"))})
    second = xr.Dataset({"p": ("obs", PRESSURE)}, {"time": ("obs", TIME)})
    both = xr.concat([first, second], dim="obs")
    both["p"].attrs = single()["p"].attrs
    both["time"].attrs = {"standard_name": "time"}
    both["id"] = ("station", np.array([b"n1", b"s1"]), {"cf_role": "timeseries_id"})
    if kind == "contiguous":
        both["row_size"] = ("station", np.array([20, HOURS]), {"sample_dimension": "obs"})
        return both
    both["index"] = ("obs", np.repeat([0, 1], [20, HOURS]), {"instance_dimension": "station"})
    return both.isel(obs=np.argsort(both["time"].values, kind="stable"))


@pytest.mark.parametrize("kind", ["contiguous", "indexed"])
def test_ragged_stations(tmp_path: Path, kind: str) -> None:
    assert_is_the_series(read(tmp_path, ragged(kind), station="s1"))


def test_a_time_axis_per_station(tmp_path: Path) -> None:
    padded = np.stack([TIME, np.append(TIME[:20], np.full(HOURS - 20, np.datetime64("NaT")))])
    values = np.stack([PRESSURE, PRESSURE - 5.0])
    dataset = xr.Dataset(
        {"p": (("station", "obs"), values, single()["p"].attrs)},
        {"time": (("station", "obs"), padded, {"standard_name": "time"}), "station": ["a", "b"]},
    )
    encoding = {"time": {"units": "seconds since 1970-01-01", "dtype": "float64"}}
    assert_is_the_series(read(tmp_path, dataset, encoding=encoding, station="a"))
    record = read(tmp_path, dataset, encoding=encoding, station="b")
    assert record.time.size == 20
    assert record.actions[0].count == HOURS - 20


def test_packed_integers_fill_values_and_valid_range(tmp_path: Path) -> None:
    values = PRESSURE.copy()
    values[3], values[7] = np.nan, 9000.0
    dataset = single(valid_max=np.int32(10_000_000))
    dataset["p"] = dataset["p"].copy(data=values)
    packing = {"dtype": "int32", "scale_factor": 1e-5, "add_offset": 4100.0, "_FillValue": -(2**31)}
    record = read(tmp_path, dataset, encoding={**ENCODING, "p": packing})
    assert np.flatnonzero(np.isnan(record.pressure)).tolist() == [3, 7]
    good = np.isfinite(record.pressure)
    # half a packing step of 1e-5 dbar is 0.05 Pa
    np.testing.assert_allclose((record.pressure + record.reference)[good], PRESSURE[good] * 1e4, rtol=0, atol=0.0501)


@pytest.mark.parametrize(
    ("units", "since", "seconds"),
    [
        ("days since 2016-01-01", "2016-01-01", 86400),
        ("hours since 2015-06-01 00:00:00", "2015-06-01", 3600),
        ("minutes since 1950-01-01 12:00 +02:00", "1950-01-01T10:00", 60),
    ],
)
def test_time_units(tmp_path: Path, units: str, since: str, seconds: int) -> None:
    count = (TIME - np.datetime64(since, "ns")) / np.timedelta64(seconds, "s")
    dataset = single().assign_coords(time=("time", count, {"units": units, "standard_name": "time"}))
    record = read(tmp_path, dataset, encoding={"time": {"_FillValue": None}})
    # float64 days since 1950 resolve 1 microsecond
    assert np.abs(record.time - TIME).max() < np.timedelta64(2, "us")


def test_foreign_calendar_is_refused(tmp_path: Path) -> None:
    count = ("time", np.arange(HOURS) / 24.0, {"units": "days since 2016-01-01", "calendar": "noleap"})
    text = faults_of(tmp_path, single().assign_coords(time=count), encoding={"time": {"_FillValue": None}})
    assert "'noleap'" in text


def test_bounds_give_the_middles(tmp_path: Path) -> None:
    start = TIME - np.timedelta64(30, "m")
    dataset = single().assign_coords(time=("time", start, {"standard_name": "time", "bounds": "edges"}))
    dataset["edges"] = (("time", "side"), np.column_stack([start, start + np.timedelta64(1, "h")]))
    encoding = {**ENCODING, "edges": ENCODING["time"]}
    assert_is_the_series(read(tmp_path, dataset, encoding=encoding))
    assert_is_the_series(read(tmp_path, dataset, encoding=encoding, stamp="start"))


def test_stamps_at_the_start_are_moved(tmp_path: Path) -> None:
    dataset = single().assign_coords(time=("time", TIME - np.timedelta64(30, "m"), {"standard_name": "time"}))
    record = read(tmp_path, dataset, stamp="start")
    assert_is_the_series(record)
    assert record.actions[0].what == "stamps moved to the middle"


def test_units_of_file_and_entry(tmp_path: Path) -> None:
    assert_is_the_series(read(tmp_path, single(), units="decibar"))
    assert_is_the_series(read(tmp_path, single(units=None), units="dbar"))
    assert "'dbar' in the file and 'hPa' in the network file" in faults_of(tmp_path, single(), units="hPa")
    assert "State `units`" in faults_of(tmp_path, single(units=None))
    assert "Did you mean 'dbar'?" in faults_of(tmp_path, single(units="db"))


def test_faults_come_together(tmp_path: Path) -> None:
    both = xr.concat([single(units="degC"), single()], dim="station").assign_coords(station=["n", "s"])
    both["p"].attrs = {"units": "degC", "standard_name": "sea_water_pressure_at_sea_floor"}
    with pytest.raises(InputError) as caught:
        read(tmp_path, both)
    assert [fault.name for fault in caught.value.faults] == ["p", "station"]


def test_variable_by_unit_and_by_name(tmp_path: Path) -> None:
    assert_is_the_series(read(tmp_path, single(standard_name=None)))
    twins = single(standard_name=None)
    twins["second"] = twins["p"] + 1.0
    twins["second"].attrs = twins["p"].attrs
    assert "more than one variable" in faults_of(tmp_path, twins)
    assert_is_the_series(read(tmp_path, twins, variable="p"))
    assert "Did you mean 'second'?" in faults_of(tmp_path, twins, variable="secnd")
    assert "no variable is recognised" in faults_of(tmp_path, single(standard_name="air_pressure"))


def test_single_precision_absolute_pressure_is_noted(tmp_path: Path) -> None:
    record = read(tmp_path, single(), encoding={**ENCODING, "p": {"dtype": "float32"}})
    (action,) = record.actions
    # IEEE 754: neighbours of 4100 in single precision lie 2**-11 apart; 2**-11 dbar is 4.88 Pa
    assert "4.9 Pa" in action.detail
    anomaly = single().assign(p=("time", PRESSURE - 4100.0, single()["p"].attrs))
    assert read(tmp_path, anomaly, encoding={**ENCODING, "p": {"dtype": "float32"}}).actions == ()


@pytest.mark.parametrize("engine", ["h5netcdf", "scipy"])
def test_cut_file_is_refused(tmp_path: Path, engine: Any) -> None:
    single().to_netcdf(tmp_path / "a.nc", engine=engine, encoding=ENCODING, unlimited_dims=["time"])
    whole = (tmp_path / "a.nc").read_bytes()
    for kept in (len(whole) - 16, len(whole) * 2 // 3, 400, 40, 8):
        (tmp_path / "a.nc").write_bytes(whole[:kept])
        gc.collect()  # a half-opened file that complains when it is collected would be an error here
        with pytest.raises(InputError, match="Fetch it again"):
            read_record(tmp_path, DeploymentFile("a.nc"), site="A", deployment="A/1")


def test_a_damaged_value_is_refused(tmp_path: Path) -> None:
    encoding = {**ENCODING, "p": {"zlib": True, "fletcher32": True}}
    single().to_netcdf(tmp_path / "a.nc", engine="h5netcdf", encoding=encoding)
    with h5py.File(tmp_path / "a.nc") as file:
        place = file["p"].id.get_chunk_info(0).byte_offset
    damaged = bytearray((tmp_path / "a.nc").read_bytes())
    damaged[place + 5] ^= 255
    (tmp_path / "a.nc").write_bytes(damaged)
    with pytest.raises(InputError, match="the values of 'p' are damaged"):
        read_record(tmp_path, DeploymentFile("a.nc"), site="A", deployment="A/1")


def test_absent_file(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="there is no such file"):
        read_record(tmp_path, DeploymentFile("a.nc"), site="A", deployment="A/1")
