"""The command `massfit screen`: what it prints, writes and refuses."""

import csv
import json
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from click.testing import CliRunner, Result
from screening.invented_ocean import daily, eddying_ocean

from massfit.cli.main import main
from massfit.contracts import QUIETNESS_MAP, require
from massfit.errors import InputError
from massfit.io.results.read_results import read_results

NETWORK = """\
[network]
name = "Planned"
reference_year = 2016
[[site]]
id = "A quiet place of a long name"
latitude = -11.25
longitude = -149.5
[[site]]
id = "B"
latitude = 40.0
longitude = 180.0
[[site]]
id = "C"
latitude = 85.0
longitude = 0.0
[corrections]
ocean_mean_atmosphere = "already-removed"
[fingerprint]
loads = ["fields/not_there.nc"]
"""


def call(*words: object) -> Result:
    return CliRunner().invoke(main, [str(word) for word in words])


@pytest.fixture(scope="module")
def home(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("screening")
    (folder / "network.toml").write_text(NETWORK)
    time = daily("2011-01-01", "2015-01-01")
    for seed, name in ((1, "north"), (2, "south")):
        pressure = eddying_ocean(seed, time=time, spacing=6.0)[:, :27].astype(np.float32).assign_attrs(units="Pa")
        pressure.to_dataset(name="pressure").to_netcdf(folder / f"{name}.nc", engine="h5netcdf")
    return folder


@pytest.fixture(scope="module")
def done(home: Path) -> Result:
    words = ("--ocean-mean", "subtract", "--network", home, "--output", home / "made", "--years", 1, "--years", 3)
    return call("screen", home / "north.nc", f"second={home / 'south.nc'}", *words)


def test_it_prints_how_quiet_the_sea_floor_is(home: Path, done: Result) -> None:
    assert done.exit_code == 0, done.output
    shown = done.stdout.split("Results in")[0]
    assert max(map(len, shown.splitlines())) <= 80
    assert "massfit: north and second" in shown
    assert "! north is 4.0 years long (22 %), second is 4.0 years long (22 %): so far is a" in shown
    assert "! 1 site with no cell of the map near enough (300 km): C." in shown
    for stage in ("reading", "screening north", "screening second", "page"):
        assert stage in done.stderr
    line = next(line for line in shown.splitlines() if line.startswith("A quiet p"))
    table = {row["id"]: row for row in csv.DictReader((home / "made/sites.csv").read_text("utf-8").splitlines())}
    row = table["A quiet place of a long name"]
    keys = ("sd_hpa", "annual_sd_3_years_hpa", "expected_annual_sd_3_years_hpa", "disagreement_hpa")
    assert line.split()[-5:-1] == [f"{float(row[key]):.2f}" for key in keys]
    # the quiet patch is 0.4 hPa, the rest 3 hPa
    assert 0.3 < float(row["sd_hpa"]) < 0.5 < 2.5 < float(table["B"]["sd_hpa"])
    assert float(row["percentile"]) < 15.0 < float(table["B"]["percentile"])


def test_what_is_written_is_whole(home: Path, done: Result) -> None:
    assert done.exit_code == 0
    names = {path.relative_to(home / "made").as_posix() for path in (home / "made").rglob("*.*")}
    maps = [
        f"figures/{name}_map{end}.png" for name in ("sd", "annual", "yearly", "disagreement") for end in ("", "_column")
    ]
    assert names == {"screening.nc", "screening.json", "screening.html", "sites.csv", "run.json", *maps}
    with xr.open_dataset(home / "made/screening.nc", engine="h5netcdf") as written:
        require(written, QUIETNESS_MAP)
        assert written.attrs["Conventions"].startswith("CF-")
        assert all("long_name" in written[name].attrs for name in written.data_vars)
        assert written["model"].values.tolist() == ["north", "second"]
        assert written.attrs["reference_year"] == 2016  # of the network
    summary = json.loads((home / "made/screening.json").read_text("utf-8"))
    assert summary["models"][0]["ocean_mean"] == "subtract"
    page = (home / "made/screening.html").read_text("utf-8")
    assert summary["assumptions"][-1].split(":")[0] in page
    assert "http" not in page.replace("http-equiv", "")


def test_it_is_no_answer_and_is_replaced_only_when_asked(home: Path, done: Result) -> None:
    assert done.exit_code == 0
    with pytest.raises(InputError, match="it holds what massfit screen wrote"):
        read_results(home / "made")
    refused = call("screen", home / "north.nc", "--ocean-mean", "subtract", "--output", home / "made")
    assert refused.exit_code == 2
    assert "--overwrite" in refused.stderr


def test_a_part_of_the_ocean_is_told(home: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("massfit.pipeline.save_screen.draw_screening", lambda *_: {})
    with xr.open_dataset(home / "north.nc", engine="h5netcdf") as data:
        data.isel(lat=slice(8, 18), lon=slice(28, 40)).to_netcdf(home / "part.nc", engine="h5netcdf")
    done = call("screen", home / "part.nc", "--ocean-mean", "subtract", "--output", home / "part", "--years", 2)
    assert done.exit_code == 0, done.output
    text = " ".join(done.stdout.split())
    assert "! part covers 14 % of the ocean: the mean that was subtracted is of that part, and takes dynamics" in text
    assert json.loads((home / "part/run.json").read_text("utf-8"))["command"] == (
        f"massfit screen {home / 'part.nc'} --ocean-mean subtract --years 2"
    )


def test_every_fault_is_told_and_nothing_is_written(home: Path) -> None:
    refused = call(
        "screen", home / "north.nc", home / "south.nc", "--ocean-mean", "south=removed", "--output", home / "x"
    )
    assert refused.exit_code == 2
    assert not (home / "x").exists()
    assert refused.stderr.splitlines()[1:] == [
        "massfit: 1 fault in the input; nothing was written.",
        "  - north: ocean mean: there is no choice for its ocean mean. Must be subtract (the mean over the model's own "
        "ocean is subtracted here) or removed (it was before). Give --ocean-mean subtract for all models, or "
        "--ocean-mean north=removed.",
    ]
