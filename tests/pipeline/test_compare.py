"""The satellite comparison through the commands, on an invented network."""

import gzip
import json
import shutil
import tarfile
import zipfile
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
import xarray as xr
from click.testing import CliRunner

from massfit.cli.main import main
from massfit.io.results.read_results import read_results
from massfit.pipeline import compare
from massfit.pipeline.invent import simulate_to_folder
from massfit.results.finished import FinishedRun


@pytest.fixture(scope="module")
def network(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("compare") / "network"
    options = {"sites": 3, "years": 3, "models": 2, "load_members": 3, "sampling": "daily", "satellites": 2}
    simulate_to_folder(folder, 3, incidents=False, bad_site=False, **options)
    return folder


@pytest.fixture(scope="module")
def results(network: Path) -> Path:
    found = CliRunner().invoke(main, ["estimate", str(network)])
    assert found.exit_code == 0, found.output
    assert "Network and satellites" in found.output
    return network / "results"


def test_estimate_compares_when_the_network_file_has_gravity(network: Path, results: Path) -> None:
    run = read_results(results)
    comparison = run.summary["comparison"]
    truth = json.loads((network / "truth.json").read_text())
    expected = np.array([truth["in_phase_hpa"], truth["quadrature_hpa"]])
    found = comparison["satellite"]
    step = np.array([found["in_phase_hpa"], found["quadrature_hpa"]]) - expected
    # 99.9 % of a chi-square with 2 degrees of freedom; and the error is that of a measurement
    assert step @ np.linalg.solve(np.array(found["covariance_hpa2"]), step) < 13.8
    assert found["amplitude_sd_hpa"] < 0.4
    assert comparison["network"]["amplitude_hpa"] == pytest.approx(
        np.hypot(run.summary["in_phase_hpa"]["mean"], run.summary["quadrature_hpa"]["mean"])
    )
    assert len(comparison["others"]) == 2
    assert all(site["recorder"]["amplitude_sd_hpa"] > 0.0 for site in comparison["sites"])
    assert (results / "figures" / "satellite_sites_column.png").is_file()
    assert {site["id"] for site in comparison["sites"]} == {site["id"] for site in run.summary["sites"]}
    assert set(run.provenance["inputs"]) >= {"gravity/halvorne.tar.xz", "gravity/c20_c30.txt", "network.toml"}
    page = (results / "report.html").read_text(encoding="utf-8")
    assert "Beside satellite gravity" in page
    assert "What each choice does" in page
    assert (results / "figures" / "satellite.png").stat().st_size > 10_000
    with xr.open_dataset(results / "comparison.nc", engine="h5netcdf") as data:
        assert data.attrs["phase_reference"] == f"1 January {run.summary['reference_year']} 00:00 UTC"
        assert list(data["determination"].values[:2]) == ["network", "satellite gravity"]
        assert data.sizes["obs"] == 2 * 25


def test_compare_gives_what_estimate_gave(results: Path) -> None:
    before = json.loads((results / "estimate.json").read_text())
    found = CliRunner().invoke(main, ["compare", str(results)])
    assert found.exit_code == 0, found.output
    assert "\nNetwork and satellites " in found.output
    assert "What each choice does" in found.output
    assert json.loads((results / "estimate.json").read_text()) == before
    read_results(results)  # checksums hold
    assert CliRunner().invoke(main, ["report", str(results)]).exit_code == 0


def test_another_folder_of_gravity_is_compared_under_the_switches_of_the_network(
    network: Path, results: Path, tmp_path: Path
) -> None:
    copy, place = tmp_path / "results", tmp_path / "sent to me"
    shutil.copytree(results, copy)
    place.mkdir()
    with (
        tarfile.open(network / "gravity" / "mirrowby.tar.xz") as archive,
        zipfile.ZipFile(place / "Second Centre.zip", "w") as packed,
    ):
        for member in archive:
            stream = archive.extractfile(member)
            assert stream is not None
            packed.writestr(f"inside/{member.name}.gz", gzip.compress(stream.read()))
    shutil.copy(network / "gravity" / "degree_one.txt", place / "one.txt")
    (place / "notes.md").write_text("see you")
    found = CliRunner().invoke(main, ["compare", str(copy), "--network", str(network), "--gravity", str(place)])
    assert found.exit_code == 0, found.output
    comparison = json.loads((copy / "estimate.json").read_text())["comparison"]
    assert [each["name"] for each in comparison["solutions"]] == ["Second Centre"]
    assert "notes.md is none of fields, tables and determinations, and is not used" in comparison["warnings"]
    assert comparison["others"] == []
    assert "C20 of the fields is kept" in comparison["solutions"][0]["actions"]
    inputs = json.loads((copy / "run.json").read_text())["inputs"]
    assert f"{place.as_posix()}/Second Centre.zip" in inputs
    damaged = CliRunner().invoke(main, ["compare", str(copy), "--network", str(network), "--gravity", "no/where"])
    assert damaged.exit_code == 2
    assert 'no file "where"' in damaged.output


def test_compare_without_gravity_is_refused_and_the_results_are_left_alone(results: Path, tmp_path: Path) -> None:
    (tmp_path / "network.toml").write_text('network = { name = "x", reference_year = 2016 }\n')
    before = (results / "estimate.json").read_bytes()
    found = CliRunner().invoke(main, ["compare", str(results), "--network", str(tmp_path)])
    assert found.exit_code == 2
    assert "the network file has no [gravity]" in found.output
    assert (results / "estimate.json").read_bytes() == before


def test_a_model_that_assimilated_satellite_gravity_is_refused(results: Path, network: Path) -> None:
    file = network / "network.toml"
    text = file.read_text()
    try:
        file.write_text(
            text.replace("assimilates_satellite_gravity = false", "assimilates_satellite_gravity = true", 1)
        )
        found = CliRunner().invoke(main, ["compare", str(results)])
    finally:
        file.write_text(text)
    assert found.exit_code == 2
    assert "assimilated satellite gravity: the comparison would be with itself" in found.output


def test_faults_of_gravity_and_of_records_are_told_together(network: Path, tmp_path: Path) -> None:
    text = (network / "network.toml").read_text()
    text = text.replace("gravity/degree_one.txt", "gravity/nothing.txt").replace("records/", "recs/")
    (tmp_path / "network.toml").write_text(text)
    for name in ("records", "fields", "gravity"):
        (tmp_path / name).symlink_to(network / name)
    found = CliRunner().invoke(main, ["estimate", str(tmp_path), "--outside"])
    assert found.exit_code == 2
    assert 'no file "gravity/nothing.txt"' in found.output
    assert 'no file "recs/' in found.output
    assert not (tmp_path / "results").exists()


def test_check_shows_what_would_be_compared(network: Path, tmp_path: Path) -> None:
    found = CliRunner().invoke(main, ["check", str(network)])
    assert found.exit_code == 0, found.output
    assert "Satellite gravity is compared: halvorne (25 months, 2014-01 to" in " ".join(found.output.split())
    text = (network / "network.toml").read_text().replace("gravity/degree_one.txt", "gravity/nothing.txt")
    (tmp_path / "network.toml").write_text(text)
    for name in ("records", "fields", "gravity"):
        (tmp_path / name).symlink_to(network / name)
    found = CliRunner().invoke(main, ["check", str(tmp_path), "--outside"])
    assert found.exit_code == 2
    assert 'no file "gravity/nothing.txt"' in found.output


def test_the_scatter_of_recorders_is_that_of_the_posterior() -> None:
    draws = {name: (("chain", "draw"), [[scale, -scale]]) for name, scale in (("s_site", 10.0), ("s_local", 6.0))}
    draws |= {"s_common": (("chain", "draw"), [[4.0, 4.0]])}
    run = FinishedRun({}, {}, {"posterior.nc/posterior": xr.Dataset(draws)})
    corrections = SimpleNamespace(ocean_mean_atmosphere_sd_hpa=0.03)
    choices = SimpleNamespace(site_scatter="student-t", model_truth="exchangeable")
    priors = SimpleNamespace(unmodelled_annual_hpa=1.0)
    network = SimpleNamespace(settings=SimpleNamespace(posterior=choices, corrections=corrections, priors=priors))
    found = compare.site_scatter(run, network, [2, 0])  # type: ignore[arg-type]
    # Student scatter of 4 degrees of freedom has twice the variance of its scale; two models halve their own errors
    assert found == pytest.approx([2 * 100 + 9 + (36 + 16) / 2 + 16, 2 * 100 + 9 + 100**2])


def test_a_comparison_keeps_the_tables_of_the_run(monkeypatch: pytest.MonkeyPatch) -> None:
    for name in ("compare_gravity", "comparison_summary", "comparison_dataset"):
        monkeypatch.setattr(compare, name, lambda *_, **__: {})
    summary = {"ocean_area_m2": 3.6e14, "reference_year": 2016}
    tables = {"tides.csv": [{"line": "M2"}]}
    run = FinishedRun(summary, {"inputs": {"network.toml": "1"}}, {}, tables)
    found = compare.with_comparison(run, None, SimpleNamespace(inputs={"gravity": "2"}))
    assert found.tables == tables
    assert set(found.provenance["inputs"]) == {"network.toml", "gravity"}
