"""Readings of a recorder at a known pressure: from CSV to the fit, and back to CSV."""

from pathlib import Path

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.io.network.network_file import read_network
from massfit.io.network.write_network import write_network
from massfit.io.records.calibration_file import UNSTATED_SD, read_calibrations
from massfit.records.daily import reduce_to_daily

NETWORK = """
[network]
name = "Calibrated"
reference_year = 2016
[corrections]
ocean_mean_atmosphere = "already-removed"
tides = "already-removed"
[[site]]
id = "A"
latitude = -11.25
longitude = 205.5
  [[site.deployment]]
  file = "a.txt"
  units = "hPa"
  columns = ["year", "month", "day", "pressure"]
  calibrations = "a_zero.csv"
"""
READINGS = """# units: hPa
time,value,sd
2015-12-30T00:00Z,9.0,0.05
2016-01-20T06:00Z,1.5,0.05
2016-06-01T06:00Z,2.5,
"""


def write(folder: Path, text: str) -> Path:
    path = folder / "zero.csv"
    path.write_text(text)
    return path


@pytest.fixture
def network(tmp_path: Path):
    days = np.arange(np.datetime64("2016-01-01"), np.datetime64("2017-01-01"))
    rows = [f"{str(day).replace('-', ' ')} {4000 + 3 * np.sin(place / 58):.3f}" for place, day in enumerate(days)]
    (tmp_path / "a.txt").write_text("\n".join(rows))
    (tmp_path / "a_zero.csv").write_text(READINGS)
    (tmp_path / "network.toml").write_text(NETWORK)
    return read_network(tmp_path)


def test_readings_are_in_pascal(tmp_path: Path):
    found = read_calibrations(write(tmp_path, READINGS), source="zero.csv")
    np.testing.assert_allclose(found.pressure, [900.0, 150.0, 250.0])
    np.testing.assert_allclose(found.sd, [5.0, 5.0, UNSTATED_SD])
    assert found.time[1] == np.datetime64("2016-01-20T06:00")
    plain = "# units: Pa\ntime,value\n2016-01-01,1\n2016-02-01,\n2016-03-01,3\n"
    np.testing.assert_allclose(read_calibrations(write(tmp_path, plain), source="zero.csv").sd, UNSTATED_SD)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("time,value\n2016-01-01,1\n2016-02-01,2\n", "no units are stated"),
        ("# units: hPa\ntime,reading\n2016-01-01,1\n", "Must be time,value or time,value,sd"),
        ("# units: hPa\ntime,value,sd\n2016-01-01,1\n", "Must be time,value,sd"),
        ("# units: hPa\ntime,value,sd\n2016-01-01,1,0\n2016-02-01,1,0.1\n", "not above 0"),
        ("# units: hPa\ntime,value\n2016-01-01,1\n", "at least two"),
        ("# units: hPa\ntime,value\n2016-02-01,1\n2016-01-01,one\n", "'one'"),
    ],
    ids=["units", "header", "columns", "sd", "one", "number"],
)
def test_faults_are_named(tmp_path: Path, text: str, words: str):
    with pytest.raises(InputError, match=words):
        read_calibrations(write(tmp_path, text), source="zero.csv")


def test_they_reach_the_daily_record_from_its_start_on(network):
    (record,) = network.records
    assert len(record.calibrations.time) == 3
    assert "a_zero.csv" in network.inputs
    daily = reduce_to_daily(record, tides="already-removed")
    np.testing.assert_allclose(daily.calibrations.pressure, [150.0, 250.0])
    (action,) = [action for action in daily.actions if action.what == "calibrations before the record left out"]
    assert action.count == 1


def test_a_written_network_holds_them(network, tmp_path: Path):
    write_network(network, tmp_path / "copy")
    (again,) = read_network(tmp_path / "copy").records
    for name in ("time", "pressure", "sd"):
        np.testing.assert_array_equal(getattr(again.calibrations, name), getattr(network.records[0].calibrations, name))


@pytest.mark.usefixtures("network")
def test_a_missing_file_is_a_fault_of_its_key(tmp_path: Path):
    (tmp_path / "a_zero.csv").unlink()
    with pytest.raises(InputError, match="calibrations"):
        read_network(tmp_path)
