"""What is guessed of a MATLAB file is what the reader reads with it."""

import shutil
import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.io import savemat

from massfit.io.guess.described import RecordGuess
from massfit.io.guess.guess_matlab import guess_matlab_records
from massfit.io.guess.starter_file import begin_network
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.record_matlab import read_matlab

HOURS = 800
TIME = np.datetime64("2016-01-01T00:30", "ns") + np.arange(HOURS) * np.timedelta64(1, "h")
UNIX = (TIME - np.datetime64("1970-01-01")) / np.timedelta64(1, "s")
DBAR = 4100.0 + 0.01 * np.sin(np.arange(HOURS))


def guessed(folder: Path, variables: dict[str, Any]) -> RecordGuess:
    savemat(folder / "a.mat", variables)
    (guess,) = guess_matlab_records(folder, "a.mat")
    return guess


@pytest.mark.parametrize(
    "variables",
    [
        {"press_dbar": DBAR, "time": UNIX, "name": "K7"},
        {"p": DBAR, "dn": 719_529.0 + UNIX / 86_400.0},
        {"bottom_pressure": DBAR[:, None], "temp": DBAR / 1000.0, "unix_s": UNIX[:, None]},
    ],
    ids=["seconds", "day numbers", "three vectors"],
)
def test_the_reader_gets_back_what_was_written(variables: dict[str, Any], tmp_path: Path) -> None:
    guess = guessed(tmp_path, variables)
    keys = {key: each.value for key, each in guess.keys.items() if each.value is not None and key != "missing"}
    samples = read_matlab(tmp_path / "a.mat", DeploymentFile(file="a.mat", **{"units": "dbar", **keys}))
    assert np.abs(samples.time - TIME).max() <= np.timedelta64(1, "ms")
    np.testing.assert_allclose(samples.pressure, DBAR * 1e4, rtol=1e-12)
    assert guess.sampling_s == pytest.approx(3600.0, abs=0.01)
    assert all(each.evidence for each in guess.keys.values())


def test_what_cannot_be_told_is_asked(tmp_path: Path) -> None:
    guess = guessed(tmp_path, {"raw": -np.round(DBAR * 1e5).astype(np.int32)})
    asked = [key for key, each in guess.keys.items() if each.value is None]
    assert asked == ["start_time", "interval_s", "units"]
    assert "the median of the numbers is -4.1e+08" in guess.keys["units"].evidence
    assert "State scale_factor" in guess.notes[0]
    two = guessed(tmp_path, {"a": DBAR, "b": DBAR})
    assert two.keys["variable"].evidence == "which is the pressure: a, b"
    savemat(tmp_path / "a.mat", {"a": "text", "b": 3.0})
    assert guess_matlab_records(tmp_path, "a.mat") == []


def test_the_real_record_needs_five_answers(open_data: Path, tmp_path: Path) -> None:
    shutil.copy(open_data / "axial_botpt_15s_depth_2011_feb_apr.mat", tmp_path / "axial.mat")
    text = begin_network(tmp_path).text
    (site,) = tomllib.loads(text)["site"]
    (record,) = site["deployment"]
    assert record == {"file": "axial.mat", "start_time": "", "interval_s": "", "units": "", "missing": [0]}
    assert "0 stands 11520 times" in text
