"""Damage one input after another and read it; the test beside this file drives it.

One case again, with its traceback if there is one:

    python tests/fuzz/child.py netcdf 4711

Without a seed it takes seeds from standard input, one a line, and answers each with one line:
"ok" (read without complaint), "refused", or "FAILED" with the exception.
"""

import gc
import random
import resource
import signal
import sys
import tempfile
import traceback
from collections.abc import Callable
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import xarray as xr
from scipy.io import savemat

from massfit.errors import InputError
from massfit.io.fields.circulation_file import read_circulation
from massfit.io.fields.field_file import read_atmosphere_load, read_loads
from massfit.io.network.network_file import read_network
from massfit.io.network.schema import CirculationEntry
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.record_file import read_record
from massfit.io.records.series_file import read_series

SECONDS = 10
MEMORY = 2 * 2**30  # bytes of address space beyond what the imports take

NETWORK = """\
[network]
name = "Two invented sites"
reference_year = 2016
start = 2014-01-02
end = 2015-12-30

[[site]]
id = "A"
latitude = -11.25
longitude = 205.5
depth_m = 4870
group = "north"
exclude = [{ from = 2014-03-01, to = 2014-03-10T12:00:00Z, reason = "anchor dragged" }]

  [[site.deployment]]
  file = "a.csv"
  units = "hPa"
  columns = ["date", "pressure"]
  time_column = "date"
  time_format = "iso"
  delimiter = ","
  missing = [-999, 9.9e5]
  steps = [2014-05-01T00:00:00Z]

[[site]]
id = "B"
latitude = 5.0
longitude = -150.0

  [[site.deployment]]
  file = "b.txt"
  units = "cm"
  density_kg_m3 = 1025.0
  missing = 99.9
  keep_kinds = ["A"]
  drift = "linear"
  stamp = "start"

[corrections]
tides = "already-removed"
ocean_mean_atmosphere = "air.csv"
ocean_mean_atmosphere_sd_hpa = 0.04

[[circulation]]
name = "Invented model"
file = "model.3.nc"
ocean_mean = "removed"
air_pressure = "not-forced"

[fingerprint]
loads = ["loads.3.nc"]
water_vapour_peak = "07-15"

[posterior]
seed = 4

[priors]
"""
TEXTS = {
    "csv": ("time,pressure\n", "{day}T12:00:00Z,{value:.3f}\n", {"units": "hPa", "delimiter": ","}),
    "parts": (
        "# invented\nyear month day hour minute second kind pressure\n",
        "{parts} 12 30 15.5 A {value:.3f}\n",
        {"units": "psia", "keep_kinds": ("A", "C"), "missing": (-1.0,)},
    ),
    "since": (
        "",
        "{count}.5;{value:.2f}\n",
        {
            "units": "m", "density_kg_m3": 1030.0, "columns": ("t", "p"), "time_column": "t", "variable": "p",
            "time_format": "days since 1950-01-01", "delimiter": ";", "stamp": "start",
        },
    ),
    "flagged": (
        "time,pressure,flag\n", "{day} 12:00:00 UTC,{value:.3f},1\n",
        {
            "units": "hPa", "delimiter": ",", "keep_flags": (1, 2), "clock_offset_end_s": 3.0, "utc_offset_hours": 0.0,
        },
    ),
    "format": (
        "# a\n",
        '"{slashed}" 12:30:00\t{value:.3f} x\n',
        {
            "units": "dbar", "columns": ("date", "clock", "p", "remark"), "time_column": "date clock",
            "time_format": "%d/%m/%Y %H:%M:%S", "variable": "p",
        },
    ),
}  # fmt: skip
NASTY = [
    "\x00", "\x1b[2J", "\u202e", "\ufeff", '"', "'", '"""', "[", "]", "[[", "{", "}", "=", ".", "#", ",", ";",
    "\n", "\r", "\r\n", "\t", "-", "nan", "inf", "-inf", "1e999", "9" * 30, "9" * 5000, "-0", "0x7f", "1_0", "true",
    "null", "[" * 200, "0001-01-01", "9999-12-31T23:59:59-12:00", "2014-02-30", "1677-09-21", "2262-04-12T00:00:00Z",
    "24:00:00", "\\u0000", "../", "/dev/zero", "http://", "é", "\udce9", "%Y", "%", "A", "9223372036854775808",
    "1e-320", "a" * 300,
]  # fmt: skip
WORDS = [0, 1, 0x7F, 0xFF, 0x7FFF, 0x7FFFFFFF, 0x80000000, 0xFFFFFFFF, 2**28, 2**30, 2**62, 2**63 - 1, 2**64 - 1]


KINDS = ("record", "stations", "contiguous", "indexed", "model", "field", "series", "loads", "months", "land")


def time_and_wave(days: int) -> tuple[np.ndarray, np.ndarray]:
    time = np.datetime64("2014-01-01T12", "ns") + np.arange(days) * np.timedelta64(1, "D")
    return time, np.cos(np.arange(days) / 58.0)


def text_rows(form: str, days: int) -> str:
    rows = []
    for count, (instant, value) in enumerate(zip(*time_and_wave(days), strict=True), 23376):
        day = str(instant)[:10]
        slashed, parts = "/".join(reversed(day.split("-"))), day.replace("-", " ")
        rows.append(form.format(day=day, slashed=slashed, parts=parts, count=count, value=value))
    return "".join(rows)


def write_base(folder: Path) -> None:
    """Write the undamaged files: small, so that a case is quick."""
    (folder / "network.toml").write_text(NETWORK)
    (folder / "a.csv").write_text(text_rows(TEXTS["csv"][1], 400))
    (folder / "b.txt").write_text(TEXTS["parts"][0] + text_rows(TEXTS["parts"][1], 400))
    (folder / "air.csv").write_text("# units: hPa\n# stamp: start\ntime,value\n" + text_rows(TEXTS["csv"][1], 400))
    for name, (head, form, _) in TEXTS.items():
        (folder / f"{name}.text").write_text(head + text_rows(form, 30))
    for name, dataset in base_datasets().items():
        packed = {v: {"zlib": True, "fletcher32": True} for v in dataset.data_vars if dataset[v].ndim > 1}
        clocks = {v: {"units": "hours since 2014-01-01"} for v in ("time", "bounds") if v in dataset.variables}
        dataset.to_netcdf(folder / f"{name}.nc", engine="h5netcdf", encoding=packed | clocks)
        dataset.to_netcdf(folder / f"{name}.3.nc", engine="scipy", encoding=clocks)
    write_matlab(folder)


def write_matlab(folder: Path) -> None:
    """Files of MATLAB: version 5, plain and packed, and version 7.3, which is HDF5 behind a header."""
    _, wave = time_and_wave(60)
    days = 735_600.5 + np.arange(60.0)
    variables = {"p": np.round(wave * 1e6).astype("i4"), "t": days, "qc": np.ones(60, "u1"), "note": "invented"}
    savemat(folder / "plain.mat", variables)
    savemat(folder / "packed.mat", variables, do_compression=True)
    with h5py.File(folder / "hdf5.mat", "w", userblock_size=512) as file:
        for name, kind in (("p", "int32"), ("t", "double"), ("qc", "uint8")):
            data = file.create_dataset(name, data=np.atleast_2d(variables[name]), compression="gzip", fletcher32=True)
            data.attrs["MATLAB_class"] = np.bytes_(kind)
    with (folder / "hdf5.mat").open("r+b") as file:
        file.write(b"MATLAB 7.3 MAT-file, invented".ljust(124) + b"\x00\x02IM")


def base_datasets() -> dict[str, xr.Dataset]:
    time, wave = time_and_wave(40)
    pressure = {"units": "dbar", "standard_name": "sea_water_pressure_at_sea_floor"}
    packed = {"units": "Pa", "scale_factor": 0.5, "add_offset": 2.0, "valid_min": -500.0, "missing_value": -999.0}
    latitude, longitude = np.arange(-75.0, 90.0, 30.0), np.arange(15.0, 360.0, 30.0)
    grid = np.ones((2, latitude.size, longitude.size))
    edges = np.stack([time - np.timedelta64(12, "h"), time + np.timedelta64(12, "h")], axis=1)
    places = {"lat": ("lat", latitude, {"units": "degrees_north"}), "lon": longitude}
    land = grid[0] * np.where(np.arange(12) > 6, np.nan, 1.0)
    load_dims, mass = ("member", "lat", "lon"), {"units": "kg m-2"}
    flags = {"flag_values": np.array([1, 2, 3, 4, 9], "i1"), "flag_meanings": "pass not_evaluated suspect fail missing"}
    ragged = xr.Dataset(
        {
            "p": ("obs", np.tile(wave, 2), {**pressure, "ancillary_variables": "p_qc"}),
            "p_qc": ("obs", np.tile([1, 1, 2, 1, 3], 16).astype("i1"), flags),
            "time": ("obs", np.tile(time, 2), {"standard_name": "time"}),
            "name": ("station", np.array([b"north", b"south"]), {"cf_role": "timeseries_id"}),
        }
    )
    return {
        "contiguous": ragged.assign(n=("station", np.array([40, 40], "i4"), {"sample_dimension": "obs"})),
        "indexed": ragged.assign(k=("obs", np.tile([0, 1], 40).astype("i4"), {"instance_dimension": "station"})),
        "record": xr.Dataset({"p": ("time", wave, pressure)}, {"time": time}),
        "stations": xr.Dataset(
            {"p": (("station", "time"), np.stack([wave, wave]), packed), "bounds": (("time", "edge"), edges)},
            {
                "time": ("time", time, {"standard_name": "time", "bounds": "bounds"}),
                "name": ("station", np.array([b"north", b"south"]), {"cf_role": "timeseries_id"}),
            },
        ),
        "model": xr.Dataset(
            {"bottom_pressure": (("time", "site"), np.stack([wave, wave], axis=1), {"units": "hPa"})},
            {"time": time, "site": ["A", "B"]},
        ),
        "field": xr.Dataset(
            {"bottom_pressure": (("time", "lat", "lon"), np.repeat(grid, 20, axis=0).astype("f4"), {"units": "hPa"})},
            {"time": time, **places},
        ),
        "series": xr.Dataset({"mean": ("time", wave, {"units": "hPa"})}, {"time": ("time", time, {"stamp": "start"})}),
        "loads": xr.Dataset(
            {"load_in_phase": (load_dims, 3 * grid, mass), "load_quadrature": (load_dims, 4 * grid, mass)},
            {"member": ["wet", "dry"], **places},
            {"load_area": "land"},
        ),
        "months": xr.Dataset(
            {"load": (("month", "lat", "lon"), np.repeat(grid, 6, axis=0), mass)},
            {"month": np.arange(1, 13), **places},
            {"load_area": "land"},
        ),
        "land": xr.Dataset(
            {f"pressure_{part}": (("lat", "lon"), land, {"units": "Pa"}) for part in ("in_phase", "quadrature")}, places
        ),
    }


def read_data(folder: Path, kind: str, name: str) -> object:
    """Read a NetCDF file as what it is, down to its last value."""
    path = folder / name
    if kind == "record":
        return read_record(folder, DeploymentFile(name), site="A", deployment="A/1")
    if kind in ("stations", "contiguous", "indexed"):
        return read_record(folder, DeploymentFile(name, station="south"), site="A", deployment="A/1")
    if kind in ("model", "field"):
        entry = CirculationEntry("M", name, "removed", "not-forced")
        return read_circulation(path, entry, ocean_mean=None, sites={"A", "B"}, source=name).pressure.load()
    if kind == "series":
        return read_series(path, name="mean", source=name)
    if kind == "land":
        return read_atmosphere_load(path, source=name)
    return read_loads(path, reference_year=2016, source=name)


def damaged_text(text: str, dice: random.Random) -> bytes:
    """Change characters, words and lines."""
    for _ in range(dice.choice([1, 1, 1, 2, 5])):
        at = dice.randrange(len(text) + 1)
        lines = text.splitlines(keepends=True)
        line = dice.randrange(len(lines)) if lines else 0
        match dice.randrange(9):
            case 0:
                text = text[:at] + dice.choice(NASTY) + text[at:]
            case 1:
                text = text[:at] + text[at + dice.choice([1, 2, 8]) :]
            case 2:
                text = text[:at] + dice.choice(NASTY) + text[at + dice.choice([1, 2, 8]) :]
            case 3:
                text = "".join([*lines[:line], *lines[line + 1 :]])
            case 4:
                text = "".join([*lines[:line], *lines[line : line + 1] * 2, *lines[line + 1 :]])
            case 5:
                dice.shuffle(lines)
                text = "".join(lines) if dice.random() < 0.2 else text[:at]
            case 6:
                head, equals, _ = "".join(lines[line : line + 1]).partition("=")
                text = "".join([*lines[:line], head + equals + dice.choice(NASTY) + "\n", *lines[line + 1 :]])
            case 7:
                text = "".join(dice.choice(NASTY) if c.isdigit() and dice.random() < 0.002 else c for c in text)
            case 8:
                text = text.replace(dice.choice('abenst012,.- "\n'), dice.choice(NASTY), dice.choice([1, 3]))
    data = bytearray(text.encode("utf-8", "surrogateescape"))
    for _ in range(dice.choice([0, 0, 0, 1, 3])):
        if data:
            data[dice.randrange(len(data))] = dice.randrange(256)
    return bytes(data)


def damaged_bytes(content: bytes, dice: random.Random) -> bytes:
    """Flip bits, cut, blank or grow pieces; the beginning, where the structure is, is hit more often."""
    data = bytearray(content)
    for _ in range(dice.choice([1, 1, 2, 4, 16])):
        reach = len(data) if dice.random() < 0.5 else min(len(data), 2048)
        at = dice.randrange(max(reach, 1))
        match dice.randrange(7):
            case 0 | 1:
                data[at : at + 1] = bytes([data[at] ^ (1 << dice.randrange(8))]) if at < len(data) else b""
            case 2:
                data[at : at + 1] = bytes([dice.randrange(256)])
            case 3:
                data[at : at + dice.choice([4, 64, 512])] = bytes(dice.choice([4, 64, 512]))
            case 4 | 5:
                size = dice.choice([2, 4, 8])
                word = (dice.choice(WORDS) % 2 ** (8 * size)).to_bytes(size, dice.choice(["big", "little"]))
                data[at : at + size] = word
            case 6:
                if dice.random() < 0.3:
                    del data[at:]
                else:
                    del data[at : at + dice.choice([1, 4, 100])]
    return bytes(data)


def network_case(folder: Path, dice: random.Random) -> object:
    (folder / "network.toml").write_bytes(damaged_text(NETWORK, dice))
    return read_network(folder)


def text_case(folder: Path, dice: random.Random) -> object:
    name = dice.choice([*TEXTS, "air"])
    original = folder / ("air.csv" if name == "air" else f"{name}.text")
    (folder / "damaged.txt").write_bytes(damaged_text(original.read_text(), dice))
    if name == "air":
        return read_series(folder / "damaged.txt", name="mean", source="damaged.txt")
    entry = DeploymentFile("damaged.txt", **TEXTS[name][2])
    return read_record(folder, entry, site="A", deployment="A/1")


def netcdf_case(folder: Path, dice: random.Random) -> object:
    kind = dice.choice(KINDS)
    original = folder / f"{kind}{dice.choice(['', '.3'])}.nc"
    (folder / "damaged.nc").write_bytes(damaged_bytes(original.read_bytes(), dice))
    return read_data(folder, kind, "damaged.nc")


def matlab_case(folder: Path, dice: random.Random) -> object:
    original = folder / f"{dice.choice(['plain', 'packed', 'hdf5'])}.mat"
    (folder / "damaged.mat").write_bytes(damaged_bytes(original.read_bytes(), dice))
    return read_matlab_file(folder, "damaged.mat")


def read_matlab_file(folder: Path, name: str) -> object:
    entry = DeploymentFile(name, units="Pa", variable="p", time_variable="t", flag_variable="qc", scale_factor=-1e-4)
    return read_record(folder, entry, site="A", deployment="A/1")


CASES: dict[str, Callable[[Path, random.Random], object]] = {
    "network": network_case,
    "text": text_case,
    "netcdf": netcdf_case,
    "matlab": matlab_case,
}


unraisable: list[str] = []


def note_unraisable(arguments: Any) -> None:
    """Note what would print a traceback without being raised, from a destructor for example."""
    unraisable.append(f"{arguments.object}: {arguments.exc_value}")


def run(kind: str, seed: int, folder: Path) -> str:
    """Read one damaged input."""
    signal.alarm(SECONDS)  # not caught: it ends a process that hangs, also inside a library
    unraisable.clear()
    try:
        CASES[kind](folder, random.Random(f"{kind} {seed}"))
    except InputError as error:
        answer = "refused" if error.faults and all(fault.problem for fault in error.faults) else "FAILED: no fault"
    except BaseException as error:  # anything else is what this looks for
        answer = f"FAILED: {type(error).__name__}: {error}".replace("\n", " ")[:300]
        if len(sys.argv) > 2:
            traceback.print_exc()
    else:
        answer = "ok"
    gc.collect(0)
    signal.alarm(0)
    return f"FAILED: traceback from {unraisable[0]}" if unraisable else answer


def main() -> None:
    """Read the cases that are asked for."""
    sys.unraisablehook = note_unraisable
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        write_base(folder)
        for check in KINDS:
            read_data(folder, check, f"{check}.nc")
            read_data(folder, check, f"{check}.3.nc")
        for form in ("plain", "packed", "hdf5"):
            read_matlab_file(folder, f"{form}.mat")
        read_network(folder)
        pages = int(Path("/proc/self/statm").read_text().split()[0])
        resource.setrlimit(resource.RLIMIT_AS, (pages * resource.getpagesize() + MEMORY,) * 2)
        resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
        seeds = sys.argv[2:] or sys.stdin
        for seed in seeds:
            print(run(sys.argv[1], int(seed), folder), flush=True)


if __name__ == "__main__":
    main()
