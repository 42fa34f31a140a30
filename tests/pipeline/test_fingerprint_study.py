"""The fingerprint of a network from places and loads: one Dataset, and the same numbers in every output."""

import csv
import json
import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from massfit.constants import EARTH_RADIUS
from massfit.contracts import FINGERPRINT_STUDY, FINGERPRINTS, FOOTPRINTS, require
from massfit.errors import InputError
from massfit.fingerprint.admittance import site_fingerprints, water_vapour_phasor
from massfit.fingerprint.loads import builtin_loads
from massfit.fingerprint.ocean import OceanFunction
from massfit.io.network.network_file import read_sites_and_loads
from massfit.io.results.fingerprint_folder import CONVERGENCE_TABLE, FINGERPRINT_TABLE
from massfit.network import Network
from massfit.phasor import as_complex, delay_days
from massfit.pipeline.fingerprint_study import study_fingerprint
from massfit.pipeline.fingerprints import network_operator
from massfit.pipeline.save_fingerprint import fingerprint_to_folder
from massfit.results.fingerprint import FingerprintStudy, compared_degrees, degree_rows, site_rows, unsettled_sites
from massfit.settings import make_settings
from massfit.site import Site

SITES = (
    Site("Line <west>", 10.0, 179.9),
    Site("Line east", 10.0, -179.9),
    Site("North $x_1$ pole", 89.6, 12.0),
    Site("South", -76.0, -170.0),
    Site("Oregon shelf", 45.0, 235.6),
    Site("Given up", 0.0, 200.0, excluded_because="lost"),
)


def network(*, members: int = 3, sites: tuple[Site, ...] = SITES, **fingerprint: object) -> Network:
    settings = make_settings(
        network={"name": "Invented <corners>", "reference_year": 2016},
        corrections={"ocean_mean_atmosphere": "already-removed", "pole_tide": "none"},
        fingerprint={"max_degree": 40, **fingerprint},
    )
    return Network(settings, sites, records=(), loads=builtin_loads()[:members])


@pytest.fixture(scope="module")
def study() -> FingerprintStudy:
    return study_fingerprint(network(), finest_degree=60)


def test_the_dataset_keeps_its_contracts(study: FingerprintStudy) -> None:
    for contract in (FINGERPRINT_STUDY, FINGERPRINTS, FOOTPRINTS):
        require(study.dataset, contract)
    assert study.dataset["site"].values.tolist() == [site.id for site in SITES[:-1]]
    assert study.dataset["degree"].values.tolist() == [40, 45, 60]
    assert study.left_out == {"Given up": "lost"}
    bounds = {"lat_bounds", "lon_bounds"}
    assert all(study.dataset[name].attrs.get("long_name") for name in set(study.dataset.data_vars) - bounds)
    assert "Invented <corners>" in repr(study)


def test_its_admittances_are_those_of_the_main_job(study: FingerprintStudy) -> None:
    given = network()
    operator = network_operator(given, OceanFunction.builtin())
    vapour = water_vapour_phasor(0.65e15, "07-15", 2016)
    expected = site_fingerprints(operator, SITES[:-1], given.loads, water_vapour=vapour)
    for name in expected.data_vars:
        np.testing.assert_array_equal(study.dataset[name].values, expected[name].values)


def test_the_degree_of_the_settings_is_one_of_the_ladder(study: FingerprintStudy) -> None:
    # by one forward solve of the mean load instead of one adjoint solve a site
    mean = as_complex(study.dataset["admittance"].values).mean(axis=0)
    own = as_complex(study.dataset["admittance_by_degree"].sel(degree=40).values)
    np.testing.assert_allclose(own, mean, rtol=1e-10)
    rows = {(row.site, row.degree): row for row in degree_rows(study.dataset)}
    assert rows["Line east", 60].ratio_change == rows["Line east", 60].delay_change_days == 0.0
    assert rows["Line east", 40].amplitude_ratio == pytest.approx(abs(mean[1]), rel=1e-12)
    assert abs(rows["Line east", 45].ratio_change) < 0.005


def test_a_shelf_beside_a_load_is_said_to_be_unsettled(study: FingerprintStudy) -> None:
    assert compared_degrees(study.dataset) == (40, 60)
    assert "Oregon shelf" in dict(unsettled_sites(study.dataset))
    assert "Line east" not in dict(unsettled_sites(study.dataset))
    assert any(text.startswith("The admittance of Oregon shelf moves by") for text in study.warnings)


def test_every_row_is_a_number_of_the_dataset(study: FingerprintStudy) -> None:
    rows = site_rows(study.dataset)
    members = as_complex(study.dataset["admittance"].values)
    assert len(rows) == 5 * (1 + 3 + 2)
    for index, site in enumerate(SITES[:-1]):
        own = [row for row in rows if row.site == site.id]
        assert [row.kind for row in own] == ["mean", "member", "member", "member", "reference", "reference"]
        assert own[0].amplitude_ratio == pytest.approx(abs(members[:, index].mean()), rel=1e-12)
        assert own[0].delay_days == pytest.approx(float(delay_days(members[:, index].mean())), rel=1e-9)
        assert own[2].amplitude_ratio == pytest.approx(abs(members[1, index]), rel=1e-12)
        assert own[0].amplitude_ratio_spread == pytest.approx(np.abs(members[:, index]).std(ddof=1))
        assert own[0].delay_spread_days == pytest.approx(delay_days(members[:, index]).std(ddof=1))
        assert (own[5].amplitude_ratio, own[5].delay_days) == (1.0, 0.0)


def test_maps_are_the_mean_and_the_spread_of_the_members(study: FingerprintStudy) -> None:
    data = study.dataset
    members = as_complex(data["map_admittance"].values.astype(float))
    np.testing.assert_allclose(data["map_amplitude_ratio"], np.abs(members.mean(axis=0)), rtol=1e-5, atol=1e-6)
    components = data["map_admittance"].values.astype(float)
    spread = np.sqrt(components.var(axis=0, ddof=1).sum(axis=-1))
    np.testing.assert_allclose(data["map_spread"], spread, rtol=1e-3, atol=1e-5)
    # degree 40 and cells of one degree: even the shelf is met, poles and date line included
    assert float(data["map_difference"].max()) < 1e-3


def test_footprints_and_loads_of_the_file_give_its_admittances(study: FingerprintStudy) -> None:
    data, load = study.dataset, builtin_loads()[1]
    area = EARTH_RADIUS**2 * np.radians(1.0) * np.diff(np.sin(np.radians(data["lat_bounds"].values)))
    mass = np.roll(load.values, 180, axis=1) * area  # the loads begin at the date line
    vapour = water_vapour_phasor(0.65e15, "07-15", 2016)
    height = np.tensordot(data["footprint"].values.astype(float), mass, 2) + data["constant"].values * vapour
    mean = -(mass.sum() + vapour) / (data.attrs["sea_water_density_kg_m3"] * data.attrs["ocean_area_m2"])
    # the file keeps footprints in single precision
    np.testing.assert_allclose(height / mean, as_complex(data["admittance"].values)[1], rtol=1e-6)


def test_sites_on_both_sides_of_the_date_line_see_the_same(study: FingerprintStudy) -> None:
    ratio = study.dataset["amplitude_ratio"].values
    assert ratio[0] == pytest.approx(ratio[1], abs=1e-4)


def test_one_member_has_no_spread_and_a_warning() -> None:
    single = study_fingerprint(network(members=1, sites=SITES[:1]), finest_degree=45)
    assert not {"map_spread", "amplitude_ratio_spread", "delay_spread"} & set(single.dataset.data_vars)
    assert single.warnings[0].startswith("One load member: nothing is known of the uncertainty of the fingerprint.")
    assert site_rows(single.dataset)[0].amplitude_ratio_spread is None


def test_rotational_feedback_is_followed(study: FingerprintStudy) -> None:
    turned = study_fingerprint(network(sites=SITES[:1], rotational_feedback=True), finest_degree=45)
    expected = as_complex(turned.dataset["admittance"].values).mean(axis=0)
    assert abs(expected - as_complex(study.dataset["admittance"].values)[:, 0].mean()) > 1e-3
    np.testing.assert_allclose(as_complex(turned.dataset["admittance_by_degree"].sel(degree=40).values), expected,
                               rtol=1e-9)  # fmt: skip
    assert float(turned.dataset["map_difference"].max()) < 1e-3


def test_what_cannot_be_used_is_refused() -> None:
    with pytest.raises(InputError, match="no site is left"):
        study_fingerprint(network(sites=SITES[-1:]))
    with pytest.raises(InputError, match='"Line east" stands twice'):
        study_fingerprint(network(sites=(SITES[1], SITES[1])))
    with pytest.raises(InputError, match="there is no member"):
        study_fingerprint(replace(network(), loads=()))


# the folder


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    home = tmp_path_factory.mktemp("planned")
    (home / "network.toml").write_text(NETWORK)
    fingerprint_to_folder(home, home / "out", finest_degree=45)
    return home


NETWORK = """\
[network]
name = "Planned <b>sites</b> & $x_1$"
reference_year = 2016
[[site]]
id = "A"
latitude = -11.25
longitude = 205.5
[[site]]
id = "<script>alert(1)</script> a name that runs off every table and every figure"
latitude = 5.0
longitude = -150.0
[corrections]
ocean_mean_atmosphere = "records/gone.csv"
[fingerprint]
loads = ["builtin:nominal", "builtin:snow-rich"]
max_degree = 30
"""


def test_table_and_file_hold_the_same_numbers(folder: Path) -> None:
    table = list(csv.DictReader((folder / "out" / FINGERPRINT_TABLE).read_text("utf-8").splitlines()))
    with xr.open_dataset(folder / "out/fingerprints.nc", engine="h5netcdf") as data:
        assert data.attrs["Conventions"] == "CF-1.13, ACDD-1.3"
        assert data["lat"].attrs["bounds"] == "lat_bounds"
        assert "_FillValue" not in data["lat"].encoding
        assert "coordinates" not in data.attrs
        assert data["footprint"].attrs["cell_methods"] == "lat: lon: mean"
        encoding = data["map_admittance"].encoding
        assert (encoding["zlib"], encoding["fletcher32"]) == (True, True)
        for row in table:
            values = {"mean": data["admittance"].mean("member"), "member": None, "reference": None}[row["kind"]]
            if row["kind"] == "member":
                values = data["admittance"].sel(member=row["member"])
            elif row["kind"] == "reference":
                values = data["reference_admittance"].sel(case=row["member"])
            value = complex(as_complex(values.sel(site=row["site"]).values))
            # six digits are written
            assert float(row["amplitude_ratio"]) == pytest.approx(abs(value), rel=1e-5)
            assert float(row["delay_days"]) == pytest.approx(float(delay_days(value)), rel=1e-5, abs=1e-9)
    assert {row["kind"] for row in table if row["amplitude_ratio_spread"]} == {"mean"}


def test_the_table_of_the_degrees_holds_the_changes(folder: Path) -> None:
    table = list(csv.DictReader((folder / "out" / CONVERGENCE_TABLE).read_text("utf-8").splitlines()))
    assert {row["degree"] for row in table} == {"22", "30", "45"}
    with xr.open_dataset(folder / "out/fingerprints.nc", engine="h5netcdf") as data:
        values = {int(n): as_complex(data["admittance_by_degree"].sel(degree=n, site="A").values) for n in (30, 45)}
    row = next(row for row in table if (row["site"], row["degree"]) == ("A", "30"))
    assert float(row["ratio_change"]) == pytest.approx(abs(values[30]) - abs(values[45]), rel=1e-4)
    assert float(row["delay_change_days"]) == pytest.approx(float(delay_days(values[30] / values[45])), rel=1e-4)


def test_the_folder_is_whole_and_says_how_it_was_made(folder: Path) -> None:
    run = json.loads((folder / "out/run.json").read_text("utf-8"))
    files = {str(path.relative_to(folder / "out")) for path in (folder / "out").rglob("*") if path.is_file()}
    assert set(run["outputs"]) == files
    assert {"fingerprint.html", "fingerprints.nc", "figures/ratio_map.png", "figures/footprints_column.png"} <= files
    assert run["command"] == f"massfit fingerprint {folder}"
    assert run["finest_degree"] == 45
    assert set(run["inputs"]) == {"network.toml"}
    assert not list(folder.glob(".*partial"))


def test_the_page_is_self_contained_and_names_are_text(folder: Path) -> None:
    page = (folder / "out/fingerprint.html").read_text("utf-8")
    assert page.count("<script") == 1, "our own; the names hold one more"
    assert "&lt;script&gt;" in page
    assert "Planned &lt;b&gt;sites" in page
    assert re.search("https?:", page) is None
    assert page.count("data:image/png;base64,") == page.count("<img") + page.count("<source")


def test_results_of_another_command_are_left_alone(folder: Path, network_folder: Path) -> None:
    with pytest.raises(InputError, match="finished results"):
        fingerprint_to_folder(folder, folder / "out")
    (network_folder / "run.json").write_text("{}")
    (network_folder / "estimate.json").write_text("{}")
    with pytest.raises(InputError, match="results of another command"):
        fingerprint_to_folder(folder, network_folder, overwrite=True)


def test_a_name_like_a_formula_stays_text_in_a_spreadsheet(study: FingerprintStudy, tmp_path: Path) -> None:
    from massfit.io.results.fingerprint_folder import _write_table

    rows = [replace(row, site="=1+1", member="@SUM") for row in site_rows(study.dataset)]
    _write_table(tmp_path / "table.csv", rows)
    written = list(csv.DictReader((tmp_path / "table.csv").read_text().splitlines()))
    assert {(row["site"], row["member"]) for row in written} == {("'=1+1", "'@SUM")}


def test_faults_of_the_file_leave_nothing_behind(tmp_path: Path) -> None:
    (tmp_path / "network.toml").write_text(NETWORK.replace("latitude = 5.0", "latitude = 55.0\nlatitud = 5.0"))
    with pytest.raises(InputError):
        fingerprint_to_folder(tmp_path, tmp_path / "out")
    assert [path.name for path in tmp_path.iterdir()] == ["network.toml"]


@pytest.mark.slow
def test_the_demo_is_settled_as_the_page_on_fingerprints_says() -> None:
    demo = read_sites_and_loads(Path(__file__).parents[2] / "demo_network")
    study = study_fingerprint(demo)
    change = [row.ratio_change for row in degree_rows(study.dataset) if row.degree == 180]
    assert np.abs(change).max() < 5e-4
    assert np.abs(change).max() < 0.05 * float(study.dataset["amplitude_ratio_spread"].median())
    assert study.warnings == ()
    assert float(study.dataset["map_difference"].median()) < 2e-4


@pytest.mark.slow
def test_the_example_of_the_page_on_fingerprints_runs(monkeypatch: pytest.MonkeyPatch) -> None:
    root = Path(__file__).parents[2]
    monkeypatch.chdir(root)
    (code,) = re.findall(r"```python\n(.*?)```", (root / "docs/fingerprints.md").read_text("utf-8"), re.DOTALL)
    exec(code, {})
