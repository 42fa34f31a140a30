"""From a file to daily means: one record of four years of hours. Wanted: well under 0.2 s together."""

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.record_file import read_record
from massfit.records.daily import reduce_to_daily
from massfit.records.record import Record
from massfit.records.tidal_lines import SHORT_TIDES

pytestmark = pytest.mark.benchmark
HOURS = 4 * 8766


def write_record(folder: Path) -> DeploymentFile:
    rng = np.random.default_rng(1)
    days = np.arange(HOURS) / 24.0
    pressure = 4.1e7 + np.cumsum(rng.normal(scale=5.0, size=HOURS)) + rng.normal(scale=20.0, size=HOURS)
    for name, amplitude in {"M2": 4000.0, "K1": 2500.0, "O1": 1800.0, "S2": 1500.0}.items():
        pressure += amplitude * np.cos(2 * np.pi * SHORT_TIDES[name] * days)
    pressure[rng.integers(0, HOURS, 30)] += 5000.0
    time = np.datetime64("2014-01-01T00:30", "ns") + np.arange(HOURS) * np.timedelta64(1, "h")
    attributes = {"units": "Pa", "standard_name": "sea_water_pressure_at_sea_floor"}
    packing = {"dtype": "int32", "scale_factor": 0.1, "add_offset": 4.1e7, "zlib": True, "_FillValue": -(2**31)}
    xr.Dataset({"pressure": ("time", pressure, attributes)}, {"time": time}).to_netcdf(
        folder / "a.nc", engine="h5netcdf", encoding={"pressure": packing}
    )
    return DeploymentFile("a.nc")


def test_reading(benchmark, tmp_path: Path) -> None:
    entry = write_record(tmp_path)
    record = benchmark(read_record, tmp_path, entry, site="A", deployment="A/1")
    assert record.time.size == HOURS


def test_reducing(benchmark, tmp_path: Path) -> None:
    record = read_record(tmp_path, write_record(tmp_path), site="A", deployment="A/1")
    assert benchmark(reduce_to_daily, record).time.size == HOURS // 24


def test_reducing_five_years_of_15_s(benchmark) -> None:
    rng = np.random.default_rng(1)
    time = np.datetime64("2014-01-01T00:00:07.5", "ms").astype("datetime64[ns]")
    time = time + np.arange(5 * 8766 * 240) * np.timedelta64(15, "s")
    pressure = 3000.0 * np.cos(2 * np.pi * SHORT_TIDES["M2"] * np.arange(time.size) / 5760.0)
    pressure += rng.normal(scale=30.0, size=time.size)
    dense = Record("A", "A/1", time, pressure, find_steps=True)
    daily = benchmark.pedantic(reduce_to_daily, (dense,), rounds=3)
    assert daily.time.size == 5 * 8766 // 24
