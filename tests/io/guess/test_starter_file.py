"""The network file that `massfit starter` begins."""

import os
import re
import shutil
import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr

from massfit.errors import InputError
from massfit.io.guess.starter_file import begin_network, write_starter
from massfit.io.network.network_file import read_network

DEMO = Path(__file__).parents[3] / "demo_network"


def daily_text(path: Path, header: str = "date,press_dbar", days: int = 800) -> None:
    stamps = np.datetime64("2014-03-01") + np.arange(days)
    rows = [f"{day},{5000 + np.cos(k / 58.0):.5f}" for k, day in enumerate(stamps)]
    path.write_text("\n".join([header, *rows]) + "\n")


def open_lines(text: str) -> list[int]:
    return [number for number, line in enumerate(text.splitlines(), 1) if "  # fill in:" in line]


def faults(folder: Path) -> list[tuple[str, int | None]]:
    with pytest.raises(InputError) as caught:
        read_network(folder)
    return [(Path(fault.source).name, fault.line) for fault in caught.value.faults]


def test_the_faults_that_remain_are_exactly_the_open_values(tmp_path: Path) -> None:
    daily_text(tmp_path / "K7_2014.csv")
    daily_text(tmp_path / "K9.csv", header="date,height_m")
    daily_text(tmp_path / "L2.csv", header="date,pressure")
    made = write_starter(tmp_path)
    text = (tmp_path / "network.toml").read_text()
    assert text == made.text
    assert (made.sites, made.deployments) == (3, 3)
    assert made.to_fill_in == len(open_lines(text)) == 9  # two places a site, a density, a unit, the air
    assert faults(tmp_path) == [("network.toml", line) for line in open_lines(text)]


def test_filled_in_it_is_read(tmp_path: Path) -> None:
    daily_text(tmp_path / "K7.csv")
    text = write_starter(tmp_path).text
    answers = {"latitude": "-11.25", "longitude": "205.5", "ocean_mean_atmosphere": '"already-removed"'}
    for key, value in answers.items():
        text = re.sub(rf'^{key} = ""', f"{key} = {value}", text, flags=re.MULTILINE)
    (tmp_path / "network.toml").write_text(text)
    network = read_network(tmp_path)
    assert network.sites[0].id == "K7"
    assert network.records[0].time.size == 800
    assert network.records[0].time[0] == np.datetime64("2014-03-01T12")  # begins its day, so its middle is noon
    assert network.settings.corrections.tides == "already-removed"


def test_a_network_file_is_never_overwritten(tmp_path: Path) -> None:
    daily_text(tmp_path / "K7.csv")
    (tmp_path / "network.toml").write_text("mine")
    with pytest.raises(InputError, match="it is there already"):
        write_starter(tmp_path)
    assert (tmp_path / "network.toml").read_text() == "mine"
    (tmp_path / "network.toml").unlink()
    (tmp_path / "network.toml").symlink_to(tmp_path / "nowhere")
    with pytest.raises(InputError, match="it is there already"):
        write_starter(tmp_path)
    assert not (tmp_path / "nowhere").exists()


@pytest.mark.parametrize("name", ["empty", "nowhere"])
def test_a_folder_without_records_is_refused(name: str, tmp_path: Path) -> None:
    (tmp_path / "empty").mkdir()
    with pytest.raises(InputError, match=r"no record was found|it is not a folder"):
        write_starter(tmp_path / name)
    assert not (tmp_path / name / "network.toml").exists()


def test_demo_records_are_told_apart(tmp_path: Path) -> None:
    shutil.copytree(DEMO / "records", tmp_path / "records")
    shutil.copy(DEMO / "fields/corvane.nc", tmp_path)
    shutil.copy(DEMO / "fields/loads.nc", tmp_path)
    made = begin_network(tmp_path)
    document = tomllib.loads(made.text)
    truth = tomllib.loads((DEMO / "network.toml").read_text())
    expected = {site["id"]: [entry["file"] for entry in site["deployment"]] for site in truth["site"]}
    assert {site["id"]: [entry["file"] for entry in site["deployment"]] for site in document["site"]} == expected
    places = {site["id"]: (site["latitude"], site["longitude"], site["depth_m"]) for site in truth["site"]}
    assert {s["id"]: (s["latitude"], s["longitude"], s["depth_m"]) for s in document["site"]} == places
    assert document["network"]["reference_year"] in (2015, 2016)
    assert made.to_fill_in == 1  # the air
    for name in ("corvane.nc", "loads.nc"):
        assert f"#   {name}: it is a field, or a model at sites" in made.text


def test_only_records_are_opened(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    daily_text(tmp_path / "K7.csv")
    (tmp_path / "run.exe").write_bytes(b"MZ")
    (tmp_path / "odd.nc").write_bytes(b"\x89HDF\r\n\x1a\n cut")
    (tmp_path / "bad\nname.txt").write_text("a\0b")
    (tmp_path / ".hidden.csv").write_text("x")
    (tmp_path / "deep/er").mkdir(parents=True)
    daily_text(tmp_path / "deep/er/K8.csv")
    daily_text(tmp_path / "deep/K9.csv")
    (tmp_path / "away.csv").symlink_to("/etc/hostname")
    os.mkfifo(tmp_path / "pipe.csv")
    opened = []
    really = Path.open

    def watched(path: Path, *given: Any, **more: Any) -> Any:
        opened.append(path.name)
        return really(path, *given, **more)

    monkeypatch.setattr(Path, "open", watched)
    made = begin_network(tmp_path)
    assert set(opened) == {"K7.csv", "K9.csv", "odd.nc", "bad\nname.txt"}
    assert made.sites == 2
    assert "#   run.exe: records end with" in made.text
    assert "#   odd.nc: it cannot be read: " in made.text
    assert "#   bad name.txt: it cannot be read: " in made.text
    assert "#   away.csv: it is a link that leads out of the folder" in made.text
    assert "#   pipe.csv: it is not a regular file" in made.text
    tomllib.loads(made.text)


def test_names_from_files_cannot_break_the_network_file(tmp_path: Path) -> None:
    header = 'date,"press_dbar"\x1b[31m\x7f'
    daily_text(tmp_path / 'K"7\\.csv', header=header)
    text = begin_network(tmp_path).text
    assert "\x1b" not in text
    assert tomllib.loads(text)["site"][0]["deployment"][0]["file"] == 'K"7\\.csv'


def test_stations_variables_and_units_of_netcdf(tmp_path: Path) -> None:
    time = np.arange("2014-01-01", "2014-03-01", dtype="datetime64[h]").astype("datetime64[ns]")
    wave = np.cos(np.arange(time.size) / 9.0)
    two = xr.Dataset(
        {
            "bottom": (("station", "time"), np.stack([wave, wave]), {"units": "hPa"}),
            "lat": ("station", [1.0, 2.0]),
            "lon": ("station", [200.0, 201.0]),
        },
        {"time": time, "station": ["P1", "P2"]},
        {"featureType": "timeSeries"},
    )
    two.to_netcdf(tmp_path / "two.nc", engine="h5netcdf")
    doubtful = xr.Dataset({n: ("time", wave, {"units": "hPa"}) for n in ("first", "second")}, {"time": time})
    doubtful.to_netcdf(tmp_path / "Q1.nc", engine="h5netcdf")
    document = tomllib.loads(begin_network(tmp_path).text)
    p1, p2, q1 = document["site"]
    assert (p1["id"], p1["latitude"], p1["deployment"][0]["station"]) == ("P1", 1.0, "P1")
    assert (p2["id"], p2["longitude"], p2["deployment"][0]["station"]) == ("P2", 201.0, "P2")
    assert (q1["id"], q1["latitude"], q1["deployment"][0]["variable"]) == ("Q1", "", "")


def test_real_records_in_split_dates(open_data: Path, tmp_path: Path) -> None:
    for name in ("deep_recorder_21401_201103.txt", "deep_recorder_21418_201103.txt"):
        shutil.copyfile(open_data / name, tmp_path / name)
    document = tomllib.loads(begin_network(tmp_path).text)
    first, second = document["site"]
    assert (first["id"], second["id"]) == ("21401", "21418")
    record = first["deployment"][0]
    assert record["columns"] == ["year", "month", "day", "hour", "minute", "second", "kind", "pressure"]
    # from the agency's description of the layout: 1 is the 15-minute sampling, 9999 is missing
    assert (record["keep_kinds"], record["missing"], record["units"]) == (["1"], [9999], "m")


def test_an_ocean_mean_series_is_no_site(tmp_path: Path) -> None:
    daily_text(tmp_path / "K7.csv")
    rows = [f"{np.datetime64('2014-03-01') + k}T12:00:00Z,{0.1 * k:.2f}" for k in range(400)]
    (tmp_path / "air.csv").write_text("\n".join(["# units: hPa", "time,value", *rows]) + "\n")
    made = begin_network(tmp_path)
    assert made.sites == 1
    assert "; perhaps air.csv" in next(line for line in made.text.splitlines() if "ocean_mean_atmosphere" in line)
    assert "#   air.csv: it has the form of a series (time,value)" in made.text
    # the control: a record whose columns are called otherwise is a record still
    (tmp_path / "air.csv").write_text("\n".join(["time,pressure_hPa", *rows]) + "\n")
    assert begin_network(tmp_path).sites == 2


@pytest.mark.parametrize(
    ("line", "place"),
    [
        ("Position: 30.6000 N 153.5700 E, depth 4310 m", (30.6, 153.57)),
        ("laid at 12° 30' S, 9.5° W", (-12.5, -9.5)),
        ("moored 45.5N/129W", (45.5, -129.0)),
    ],
)
def test_a_position_by_its_sides_alone_is_understood(tmp_path: Path, line: str, place: tuple[float, float]) -> None:
    daily_text(tmp_path / "K7.csv", header=f"# {line}\ndate,press_dbar")
    text = begin_network(tmp_path).text
    assert (f"latitude = {place[0]:g}" in text, f"longitude = {place[1]:g}" in text) == (True, True), text


@pytest.mark.parametrize("line", ["sensor N 12 E", "12 samples N of 40", "see page 3 S 12"])
def test_other_letters_are_no_position(tmp_path: Path, line: str) -> None:
    daily_text(tmp_path / "K7.csv", header=f"# {line}\ndate,press_dbar")
    assert 'latitude = ""' in begin_network(tmp_path).text
