"""Five years of 15 s samples, 10.5 million: reading and reducing them against the same parser merely reading the file.

Times are of the processor, within one run, so that a busy machine does not matter. Wanted: twice the parser at most,
but where that merely copies numbers to memory (plain.nc). Memory is measured in processes of their own.
"""

import gc
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from massfit.io.records import text_blocks
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.record_file import read_record
from massfit.records.daily import reduce_to_daily

PARTS = ("year", "month", "day", "hour", "minute", "second", "kind", "pressure")
ENTRIES = {
    "iso.csv": DeploymentFile("iso.csv", units="dbar", delimiter=","),
    "parts.txt": DeploymentFile("parts.txt", units="dbar", columns=PARTS),
    "record.nc": DeploymentFile("record.nc"),
    "plain.nc": DeploymentFile("plain.nc"),
}
SAMPLES = 10_512_000
DAYS = SAMPLES // 5760


def write(folder: Path, samples: int) -> None:
    """The same record, a tide and a slow walk, in four forms."""
    stamps = np.datetime64("2011-01-01", "ns") + np.arange(samples) * np.timedelta64(15, "s")
    walk = np.cumsum(np.random.default_rng(1).normal(scale=1e-4, size=samples))
    pressure = 4100.0 + walk + 0.4 * np.cos(np.arange(samples) / 474.5)
    attributes = {"units": "dbar", "standard_name": "sea_water_pressure_at_sea_floor"}
    packed = {"dtype": "int32", "scale_factor": 1e-5, "add_offset": 4100.0, "zlib": True, "fletcher32": True}
    clock = {"units": "seconds since 1970-01-01", "dtype": "float64", "zlib": True}
    dataset = xr.Dataset({"p": ("time", pressure, attributes)}, {"time": stamps})
    dataset.to_netcdf(
        folder / "record.nc", engine="h5netcdf", encoding={"p": {**packed, "_FillValue": -(2**31)}, "time": clock}
    )
    dataset.to_netcdf(folder / "plain.nc", engine="h5netcdf", encoding={"time": {**clock, "zlib": False}})
    with (folder / "iso.csv").open("w") as csv, (folder / "parts.txt").open("w") as parts:
        csv.write("time,pressure\n")
        for first in range(0, samples, 500_000):
            texts = np.datetime_as_string(stamps[first : first + 500_000], unit="s").tolist()
            values = [f"{value:.5f}" for value in pressure[first : first + 500_000]]
            csv.write("".join(f"{text}Z,{value}\n" for text, value in zip(texts, values, strict=True)))
            split = (text.translate(str.maketrans("-T:", "   ")) for text in texts)
            parts.write("".join(f"{text} 1 {value}\n" for text, value in zip(split, values, strict=True)))


def parsed(folder: Path, name: str) -> int:
    """Merely read the file, by the library that the reader rests on; samples."""
    if name.endswith(".nc"):
        with xr.open_dataset(folder / name, engine="h5netcdf") as dataset:
            return int(dataset.load()["p"].size)
    options: dict[str, Any] = {"sep": r"\s+", "header": None} if name == "parts.txt" else {}
    return len(pd.read_csv(folder / name, **options))


def processor_seconds(function: Callable[[], Any]) -> float:
    start = time.process_time()
    function()
    return time.process_time() - start


@pytest.fixture(scope="module")
def long_record(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("long")
    write(folder, SAMPLES)
    return folder


@pytest.mark.benchmark
@pytest.mark.parametrize(
    ("name", "most"), [("iso.csv", 2.0), ("parts.txt", 2.0), ("record.nc", 2.0), ("plain.nc", 6.0)]
)
def test_reading_and_reducing_against_merely_parsing(long_record: Path, name: str, most: float, measured) -> None:
    rounds = range(5 if name.endswith(".nc") else 2)  # what takes a second is measured well by the quickest
    bare = min(processor_seconds(lambda: parsed(long_record, name)) for _ in rounds)
    record = read_record(long_record, ENTRIES[name], site="A", deployment="A/1")
    read = min(
        processor_seconds(lambda: read_record(long_record, ENTRIES[name], site="A", deployment="A/1")) for _ in rounds
    )
    whole = read + min(processor_seconds(lambda: reduce_to_daily(record)) for _ in rounds)
    parser = "a general parser"
    measured(f"five years of 15 s samples read ({name})", parser, read / bare, None)
    measured(f"the same read and reduced to daily means ({name})", parser, whole / bare, most)
    assert whole < most * bare


def memory_of(folder: Path, name: str, block_bytes: int) -> float:
    """Peak memory beyond that of the imports, in arrays of one double a sample."""
    command = [sys.executable, __file__, name, str(folder), str(block_bytes)]
    return float(subprocess.run(command, capture_output=True, text=True, check=True).stdout)


MOST_ARRAYS = 7.0
"""A record is two such arrays, the stamps and the pressure."""


@pytest.fixture(scope="module")
def two_months(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("months")
    write(folder, 400_000)
    return folder


@pytest.mark.skipif(not Path("/proc/self/clear_refs").exists(), reason="the system does not tell the peak of a process")
@pytest.mark.parametrize("name", ENTRIES)
def test_memory_of_two_months(two_months: Path, name: str) -> None:
    # blocks in proportion to the record; the record itself is the least that is measured
    assert 2.0 < memory_of(two_months, name, 150_000) < MOST_ARRAYS


@pytest.mark.benchmark
@pytest.mark.parametrize("name", ENTRIES)
def test_memory_of_five_years(long_record: Path, name: str, measured) -> None:
    arrays = memory_of(long_record, name, 4_000_000)
    beside = "an array of one number a sample"
    measured(f"memory to read five years of 15 s samples ({name})", beside, arrays, MOST_ARRAYS)
    assert 2.0 < arrays < MOST_ARRAYS


def main() -> None:
    """Read a record and print its peak memory."""
    name, folder = sys.argv[1], Path(sys.argv[2])
    text_blocks.BLOCK_BYTES = int(sys.argv[3])
    with tempfile.TemporaryDirectory() as short:  # what is imported on the way is not the record's
        write(Path(short), 6000)
        read_record(Path(short), ENTRIES[name], site="A", deployment="A/1")
    gc.collect()
    Path("/proc/self/clear_refs").write_text("5")  # the peak begins anew (proc(5))
    before = kibibytes("VmRSS")
    record = read_record(folder, ENTRIES[name], site="A", deployment="A/1")
    print((kibibytes("VmHWM") - before) * 1024 / record.time.nbytes)


def kibibytes(field: str) -> int:
    (line,) = [line for line in Path("/proc/self/status").read_text().splitlines() if line.startswith(field)]
    return int(line.split()[1])


if __name__ == "__main__":
    main()
