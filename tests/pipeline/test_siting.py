"""Site selection of a finished run: from the results folder and back, and what wrong input is told."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from click.testing import CliRunner

from massfit.cli.main import main
from massfit.contracts import QUIETNESS_MAP
from massfit.errors import InputError
from massfit.io.fields.siting_files import read_candidates, read_depths, read_quietness
from massfit.io.network.write_network import write_network
from massfit.io.results.read_results import read_results
from massfit.pipeline.save import save_results
from massfit.pipeline.site_plan import network_now, plan_sites
from massfit.pipeline.siting import SitingFiles, siting_to_folder
from massfit.results.finished import finished_run


@pytest.fixture(scope="module")
def network(invented, run, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The invented network with its results."""
    folder = tmp_path_factory.mktemp("siting") / "network"
    write_network(invented, folder)
    save_results(run, folder / "results")
    return folder


@pytest.fixture(scope="module")
def printed(network: Path) -> str:
    """What the command prints, with candidates of which one is beside a site."""
    site = read_results(network / "results").summary["sites"][0]
    file = network / "places.csv"
    file.write_text(
        "# places\nname,latitude,longitude,depth_m,noise_hpa\n"
        f"Beside,{site['latitude']},{site['longitude']},4000,\nFar,-40,250,,0.5\nLoud,-40,250,,20\n"
    )
    done = CliRunner().invoke(
        main,
        [
            "siting",
            str(network / "results"),
            "--candidates",
            str(file),
            "--target-width",
            "0.2",
            "--years",
            "1.5",
            "--subsets",
            "2",
        ],
    )
    assert done.exit_code == 0, done.output
    return done.output


def test_the_command_prints_tables_of_eighty_columns(printed: str) -> None:
    report = printed[printed.index("Where one recorder more") :]
    assert max(len(line) for line in report.splitlines()[:-1]) <= 80
    for words in (
        "Places asked about",
        "How long a recorder must stay",
        "0.200 hPa",
        "is redeployed",
        "unknown",
    ):
        assert words in report


@pytest.mark.usefixtures("printed")
def test_the_folder_holds_datasets_figures_and_page(network: Path) -> None:
    results = network / "results"
    run = read_results(results)
    names = {name.partition("/")[2] for name in run.datasets if name.startswith("siting.nc")}
    assert names == {"candidate_map", "best_places", "asked_places", "record_length", "service", "ranking"}
    assert len(run.summary["siting"]["without_sites"]) == len(run.summary["sites"])
    for name in ("candidate_map", "record_length", "service"):
        assert (results / f"figures/siting_{name}.png").exists()
    page = (results / "report.html").read_text()
    assert "Where and how long to measure next" in page
    assert "siting.nc" in (results / "run.json").read_text()
    cells = run.datasets["siting.nc/candidate_map"]
    wet = cells["ocean_fraction"].values >= 0.5
    ratio = cells["error_ratio"].values
    assert np.isfinite(ratio[wet]).all()
    assert np.isnan(ratio[~wet]).all()
    # nothing is promised that information cannot give, but for what a reading settles about members and scales
    assert np.nanmax(ratio) < 1.01
    assert cells.attrs["record_years"] == 1.5
    assert cells["depth"].isnull().all()
    best = run.datasets["siting.nc/best_places"]
    assert best.sizes["place"] == 10
    assert (np.diff(best["error_ratio"].values) >= -1e-12).all()
    assert best["amplitude_ratio"].min() >= 0.8


@pytest.mark.usefixtures("printed")
def test_noise_and_neighbours_count(network: Path) -> None:
    asked = read_results(network / "results").datasets["siting.nc/asked_places"]
    ratio = dict(zip(asked["place"].values, asked["error_ratio"].values, strict=True))
    assert ratio["Far"] < ratio["Loud"]
    assert ratio["Loud"] > 0.99
    assert float(asked["depth"].sel(place="Beside")) == 4000.0
    assert float(asked["nearest_distance"].sel(place="Beside")) < 1.0


def quietness(path: Path, *, sd: float = 20.0) -> xr.Dataset:
    """A map with a loud northern half, Pa."""
    lat, lon = np.arange(-87.5, 90.0, 5.0), np.arange(2.5, 360.0, 5.0)
    field = np.where(lat[:, None] > 0, 100 * sd, sd) * np.ones((len(lat), len(lon)))
    years = np.array([1.0, 4.0])
    values = {
        name: np.ones(
            [2 if d == "component" else len({"lat": lat, "lon": lon, "record_years": years}[d]) for d in v.dims]
        )
        for name, v in QUIETNESS_MAP.variables.items()
    }
    data = xr.Dataset(
        {name: (v.dims, values[name], {"units": v.units}) for name, v in QUIETNESS_MAP.variables.items()},
        coords={"lat": lat, "lon": lon, "record_years": years},
        attrs={"reference_year": 2016, "inflation_factor": 1.5, "quiet_sd_pa": 100.0},
    )
    data["expected_annual_sd"].values[:] = field[None] / np.sqrt(years)[:, None, None]
    data.to_netcdf(path, engine="h5netcdf")
    return data


def test_a_quietness_map_and_depths_choose_the_places(invented, run, tmp_path: Path) -> None:
    quietness(tmp_path / "screening.nc")
    lat, lon = np.arange(-89.0, 90.0, 2.0), np.arange(-179.0, 180.0, 2.0)
    # heights of the sea floor, deep in the east of Greenwich only
    height = np.where(lon[None, :] > 0, -4000.0, -200.0) * np.ones((len(lat), 1))
    data = xr.Dataset({"height": (("lat", "lon"), height, {"units": "m"})}, coords={"lat": lat, "lon": lon})
    data.to_netcdf(tmp_path / "depths.nc", engine="h5netcdf")
    options = SitingFiles(years=2.0, quietness=tmp_path / "screening.nc", depths=tmp_path / "depths.nc").read()
    finished = finished_run(run, command="test")
    found = plan_sites(finished, network_now(finished), invented, options)
    best = found["best_places"]
    assert (best["latitude"] < 2.6).all()
    assert (best["longitude"] < 180.0).all()
    np.testing.assert_array_equal(best["depth"], 4000.0)
    assert "asked_places" not in found
    # the record of the map: 20 Pa in one year, a root of two less in two, and drift besides
    assert 20.0 / 2**0.5 < best["record_sd"].min() < 30.0


@pytest.mark.parametrize(
    ("content", "words"),
    [
        ("", "holds no candidate"),
        ("name,latitude\nA,3\n", "longitude: the column is missing"),
        ("name,latitude,longitude,colour\nA,3,4,red\n", "colour: unknown column"),
        ("name,latitude,longitude\nA,95,4\nB,x,4\n", "the value is '95'. Must be a number in [-90, 90]"),
        ("name,latitude,longitude\nA,3\n", "2 values for 3 columns"),
        ("name,latitude,longitude\n,3,200\n", "the candidate has no name"),
    ],
    ids=["empty", "column", "unknown", "number", "short", "name"],
)
def test_a_wrong_list_of_candidates_is_named(tmp_path: Path, content: str, words: str) -> None:
    path = tmp_path / "places.csv"
    path.write_text(content)
    with pytest.raises(InputError) as caught:
        read_candidates(path)
    assert words in str(caught.value)


def test_candidates_on_land_and_double_names_are_refused_at_once(network: Path, tmp_path: Path) -> None:
    path = tmp_path / "places.csv"
    path.write_text("name,latitude,longitude\nAlps,47,8\nTwice,0,200\nTwice,1,200\n")
    done = CliRunner().invoke(main, ["siting", str(network / "results"), "--candidates", str(path)])
    assert done.exit_code == 2
    assert "the candidate at 47, 8 is on land" in done.output
    assert "2 candidates have this name" in done.output


def test_files_of_another_kind_are_refused_together(network: Path, tmp_path: Path) -> None:
    wrong = tmp_path / "wrong.nc"
    xr.Dataset({"a": (("lat", "lon"), np.zeros((2, 2)))}, coords={"lat": [0, 1], "lon": [0, 1]}).to_netcdf(
        wrong, engine="h5netcdf"
    )
    files = SitingFiles(quietness=wrong, depths=wrong, candidates=tmp_path / "none.csv")
    with pytest.raises(InputError) as caught:
        files.read()
    text = str(caught.value)
    for words in ("cannot be read", "it is no quietness map", "0 variables over (lat, lon) are in metres"):
        assert words in text
    with pytest.raises(InputError, match="does not exist"):
        read_quietness(tmp_path / "none.nc")
    with pytest.raises(InputError, match="no results folder"):
        siting_to_folder(network)


def test_other_loads_are_refused(invented, run) -> None:
    finished = finished_run(run, command="test")
    fewer = replace(invented, loads=invented.loads[:1])
    with pytest.raises(InputError, match="Give the network file that the results were made with"):
        plan_sites(finished, network_now(finished), fewer, SitingFiles().read())


def test_depths_below_and_heights_above_are_told_apart(tmp_path: Path) -> None:
    lat, lon = np.arange(-88.0, 90.0, 4.0), np.arange(0.0, 360.0, 4.0)
    for name, sign in (("depth", 1.0), ("topography", -1.0)):
        values = sign * 4000.0 * np.ones((len(lat), len(lon)))
        data = xr.Dataset({name: (("lat", "lon"), values, {"units": "m"})}, coords={"lat": lat, "lon": lon})
        data.to_netcdf(tmp_path / f"{name}.nc", engine="h5netcdf")
        found = read_depths(tmp_path / f"{name}.nc")(np.array([0.0, 30.0]), np.array([-160.0, 359.0]))
        np.testing.assert_array_equal(found, 4000.0)
