import datetime
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from scipy.io import savemat

from massfit.errors import InputError
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.record_file import read_record
from massfit.io.records.record_matlab import matlab_shapes
from massfit.records.record import Record

HOURS = 60
TIME = np.datetime64("2016-01-01T00:30", "ns") + np.arange(HOURS) * np.timedelta64(1, "h")
# the day number of 1 January 2016 is 736330 (MATLAB documentation: datenum(2000, 1, 1) is 730486, 5844 days before)
DAYS = 730_486.0 + 5844.0 + (np.arange(HOURS) + 0.5) / 24.0
DBAR = 4100.0 + 0.01 * np.sin(np.arange(HOURS))


def write_73(path: Path, variables: dict[str, Any]) -> None:
    """A file as version 7.3 writes it: HDF5 behind 512 bytes, arrays turned, a class with each."""
    with h5py.File(path, "w", userblock_size=512) as file:
        for name, value in variables.items():
            values = np.asarray(value)
            if values.dtype.kind == "U":
                values = np.array([[ord(letter) for letter in str(value)]], dtype=np.uint16)
                kind = b"char"
            else:
                kind = {"f8": b"double", "f4": b"single", "i4": b"int32", "i1": b"int8"}[values.dtype.str[1:]]
            data = file.create_dataset(name, data=np.atleast_2d(values))
            data.attrs["MATLAB_class"] = np.bytes_(kind)
    with path.open("r+b") as file:
        file.write(b"MATLAB 7.3 MAT-file, invented".ljust(124) + b"\x00\x02IM")


WRITERS = {"5": savemat, "5 packed": lambda path, v: savemat(path, v, do_compression=True), "7.3": write_73}


def read(folder: Path, version: str, variables: dict[str, Any], **entry: Any) -> Record:
    WRITERS[version](folder / "a.dat", variables)
    settings: dict[str, Any] = {"units": "dbar", **entry}
    return read_record(folder, DeploymentFile("a.dat", **settings), site="A", deployment="A/1")


@pytest.mark.parametrize("version", WRITERS)
def test_pressure_and_day_numbers(version: str, tmp_path: Path) -> None:
    variables = {"p": DBAR, "t": DAYS[:, None], "note": "invented", "latitude": 5.0}
    record = read(tmp_path, version, variables, time_variable="t")
    assert np.abs(record.time - TIME).max() <= np.timedelta64(1, "ms")
    np.testing.assert_allclose(record.pressure + record.reference, DBAR * 1e4, rtol=1e-12)
    assert record.units == "dbar"
    assert set(matlab_shapes(tmp_path / "a.dat", source="a.dat")) == {"p", "t", "latitude"}


@pytest.mark.parametrize("version", WRITERS)
def test_counts_that_are_stated_and_samples_without_a_time(version: str, tmp_path: Path) -> None:
    seconds = (TIME - np.datetime64("1970-01-01")) / np.timedelta64(1, "s")
    seconds[4] = np.nan
    record = read(
        tmp_path, version, {"p": DBAR, "t": seconds}, time_variable="t", time_format="seconds since 1970-01-01"
    )
    np.testing.assert_array_equal(record.time, np.delete(TIME, 4))
    assert [(action.what, action.count) for action in record.actions] == [("samples without a time left out", 1)]


@pytest.mark.parametrize("version", WRITERS)
def test_integers_that_count_downwards_at_a_stated_rate(version: str, tmp_path: Path) -> None:
    counts = np.full(HOURS, -150_970_000, dtype=np.int32) - np.arange(HOURS, dtype=np.int32)
    counts[7] = 0
    record = read(
        tmp_path, version, {"depth": counts}, units="m", density_kg_m3=1030.0, scale_factor=-1e-5, add_offset=2.0,
        missing=(0.0,), start_time=datetime.datetime(2011, 1, 31, 23, 59, 52, 525_000), interval_s=15.0,
    )  # fmt: skip
    assert np.flatnonzero(np.isnan(record.pressure)).tolist() == [7]
    assert record.time[1] == np.datetime64("2011-02-01T00:00:07.525")
    pascal_per_metre = 1030.0 * 9.80665
    assert record.pressure[0] + record.reference == pytest.approx(1511.7 * pascal_per_metre, rel=1e-12)
    # downwards is positive: the second sample is 0.01 mm deeper
    assert record.pressure[1] - record.pressure[0] == pytest.approx(1e-5 * pascal_per_metre, rel=1e-4)


@pytest.mark.parametrize("version", WRITERS)
def test_flags_and_single_precision(version: str, tmp_path: Path) -> None:
    flags = np.ones(HOURS, dtype=np.int8)
    flags[:3] = (4, 9, 2)
    variables = {"p": DBAR.astype(np.float32), "t": DAYS, "qc": flags}
    record = read(tmp_path, version, variables, variable="p", time_variable="t", flag_variable="qc")
    assert record.time.size == HOURS - 2
    assert [action.what for action in record.actions] == [
        "resolution is limited", "samples with flag 4 (fail) left out", "samples with flag 9 (missing) left out",
    ]  # fmt: skip
    # IEEE 754: neighbours of 4100 in single precision lie 2**-11 apart; 2**-11 dbar is 4.88 Pa
    assert "4.9 Pa" in record.actions[0].detail


@pytest.mark.parametrize("version", WRITERS)
@pytest.mark.parametrize("kept", [0.98, 0.6, 0.2])
def test_a_cut_file_is_refused(version: str, kept: float, tmp_path: Path) -> None:
    read(tmp_path, version, {"p": DBAR, "t": DAYS}, time_variable="t")
    whole = (tmp_path / "a.dat").read_bytes()
    (tmp_path / "a.dat").write_bytes(whole[: int(kept * len(whole))])
    entry = DeploymentFile("a.dat", units="dbar", variable="p", time_variable="t")
    with pytest.raises(InputError, match=r"cannot be read as MATLAB .* Fetch it again|no array of numbers"):
        read_record(tmp_path, entry, site="A", deployment="A/1")


# 15 s record of a cabled observatory: its counts and times are those stated by its makers


def test_the_real_record(open_data: Path) -> None:
    entry = DeploymentFile(
        "axial_botpt_15s_depth_2011_feb_apr.mat", units="m", density_kg_m3=1030.0, scale_factor=-1e-5, missing=(0.0,),
        start_time=datetime.datetime(2011, 1, 31, 23, 59, 52, 525_000), interval_s=15.0,
    )  # fmt: skip
    record = read_record(open_data, entry, site="A", deployment="A/1")
    assert record.time.size == 512_640
    # unix time of the first sample as published
    assert (record.time[0] - np.datetime64("1970-01-01")) / np.timedelta64(1, "ms") == 1_296_518_392_525
    assert record.time[-1] == np.datetime64("2011-04-30T23:59:37.525")
    # a gap of three days
    assert np.count_nonzero(np.isnan(record.pressure)) == 11_520
    # 1511 m of water over the recorder
    assert record.reference / (1030.0 * 9.80665) == pytest.approx(1511.3, abs=0.1)
    assert record.actions == ()
