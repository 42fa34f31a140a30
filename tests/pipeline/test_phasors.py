"""The sites of a network on their own: what is computed, and what is written."""

import csv
import json
import shutil
from pathlib import Path

import h5py
import numpy as np
import pytest
import xarray as xr
from click.testing import CliRunner

from massfit.cli.main import main
from massfit.contracts import SITE_PHASORS, require
from massfit.pipeline.phasors import phasors_to_folder
from massfit.results.estimate import Estimate
from massfit.results.finished import FinishedRun


def test_the_phasors_are_those_of_the_main_job(judged: FinishedRun, run: Estimate) -> None:
    # judging a fit does not move it, and no posterior is needed for it
    xr.testing.assert_identical(
        judged.datasets["site_phasors.nc"][["phasor", "covariance", "weight"]].drop_attrs(),
        run.site_phasors[["phasor", "covariance", "weight"]].drop_attrs(),
    )
    for own, other in zip(judged.summary["sites"], run.summary["sites"], strict=True):
        assert own["phasor_hpa"] == pytest.approx(other["phasor_hpa"], abs=1e-12)
        covariance = np.array(other["phasor_covariance_hpa2"])
        np.testing.assert_allclose(own["phasor_covariance_hpa2"], covariance, rtol=1e-9)
        assert own["corrections"] == other["corrections"]
        assert own["days"] == other["days"]


def test_the_datasets_keep_their_contract_and_say_what_they_are(judged: FinishedRun) -> None:
    data = judged.datasets["site_phasors.nc"]
    require(data, SITE_PHASORS)
    assert data.attrs["Conventions"] == "CF-1.13, ACDD-1.3"
    assert "converged" not in data.attrs
    assert all("units" in data[name].attrs for name in data.data_vars)


def test_what_is_judged_is_in_numbers_and_in_the_dataset(judged: FinishedRun) -> None:
    data = judged.datasets["site_phasors.nc"]
    for place, site in enumerate(judged.summary["sites"]):
        own = data.isel(site=place)
        assert float(own["inflation"]) == site["judged"]["inflation"] > 1.0
        assert float(own["portmanteau_p"]) == site["judged"]["portmanteau_p"]
        for year in site["judged"]["years"]:
            phasor = own["year_phasor"].sel(year=year["year"]) / 100.0
            np.testing.assert_allclose(phasor, year["phasor_hpa"], atol=1e-12)
            assert float(own["year_days"].sel(year=year["year"])) == year["days"]
        # the whole record lies among its years
        years = np.array([year["phasor_hpa"] for year in site["judged"]["years"]])
        assert np.hypot(*(years.mean(axis=0) - site["phasor_hpa"])) < 1.0


def test_assumptions_are_those_of_the_sites(judged: FinishedRun) -> None:
    said = " ".join(judged.summary["assumptions"])
    assert "Short tides" in said
    assert "semi-annual cycle" in said
    assert "fingerprint" not in said.replace("site as the site", "")
    assert "exchangeable" not in said


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """What the command leaves of one site without a model."""
    place = tmp_path_factory.mktemp("alone") / "network"
    runner = CliRunner()
    made = runner.invoke(
        main, ["simulate", str(place), "--sites", "1", "--years", "1.5", "--models", "0", "--sampling", "daily"]
    )
    assert made.exit_code == 0, made.output
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("os.cpu_count", lambda: 1)  # other processes would only take time to start
        done = runner.invoke(main, ["phasors", str(place)])
    assert done.exit_code == 0, done.output
    (place / "printed.txt").write_text(done.stdout)
    return place


def test_the_folder_holds_what_is_promised_and_nothing_else(folder: Path) -> None:
    results = folder / "phasors"
    site = json.loads((results / "phasors.json").read_text())["sites"][0]["id"]
    files = {path.relative_to(results).as_posix() for path in results.rglob("*") if path.is_file()}
    assert files == {
        "phasors.json", "sites.csv", "phasors.html", "run.json", "site_phasors.nc", "reduced_records.nc",
        f"figures/site_01_{site.casefold()}.png",
    }  # fmt: skip
    assert not (folder / ".phasors-partial").exists()
    assert set(json.loads((results / "run.json").read_text())["outputs"]) == files


def test_the_files_are_compressed_and_carry_checksums(folder: Path) -> None:
    with h5py.File(folder / "phasors" / "site_phasors.nc") as file:
        for name in ("phasor", "residual_density", "correction_phasor", "year_phasor"):
            assert file[name].fletcher32, name
            assert file[name].compression == "gzip", name


def test_the_table_says_what_the_json_says(folder: Path) -> None:
    (row,) = csv.DictReader((folder / "phasors" / "sites.csv").read_text().splitlines())
    (site,) = json.loads((folder / "phasors" / "phasors.json").read_text())["sites"]
    assert row["id"] == site["id"]
    assert float(row["quadrature_hpa"]) == pytest.approx(site["phasor_hpa"][1], rel=1e-5)
    assert float(row["inflation"]) == pytest.approx(site["judged"]["inflation"], rel=1e-5)
    taken = ("long_period_tides", "pole_tide", "ocean_mean_atmosphere", "circulation")
    for part in ("in_phase", "quadrature"):
        summed = float(row[f"{part}_hpa"]) + sum(float(row[f"{name}_{part}_hpa"]) for name in taken)
        assert summed == pytest.approx(float(row[f"record_{part}_hpa"]), abs=1e-4)


def test_a_site_without_a_model_is_said_to_hold_the_circulation(folder: Path) -> None:
    printed = " ".join((folder / "printed.txt").read_text().split())
    assert "the annual cycle of the circulation is still in the phasor" in printed
    assert "Results in" in printed
    assert "start with phasors.html" in printed


def test_page_and_figures_are_drawn_anew_byte_for_byte(folder: Path, tmp_path: Path) -> None:
    results = tmp_path / "phasors"
    shutil.copytree(folder / "phasors", results)
    made = {path.relative_to(results): path.read_bytes() for path in results.rglob("*") if path.is_file()}
    (results / "phasors.html").unlink()
    next((results / "figures").iterdir()).unlink()
    done = CliRunner().invoke(main, ["report", str(results)])
    assert done.exit_code == 0, done.output
    assert "phasors.html and the figures anew" in done.output.replace("\n", "")
    assert {path.relative_to(results): path.read_bytes() for path in results.rglob("*") if path.is_file()} == made
    with (results / "site_phasors.nc").open("ab") as file:
        file.write(b"x")
    refused = CliRunner().invoke(main, ["report", str(results)])
    assert refused.exit_code == 2
    assert "the file was changed" in refused.output


def test_finished_phasors_are_not_replaced_unasked(folder: Path) -> None:
    again = CliRunner().invoke(main, ["phasors", str(folder)])
    assert again.exit_code == 2
    assert "holds finished results" in again.output


def test_a_command_that_needs_an_answer_says_whose_results_these_are(folder: Path) -> None:
    done = CliRunner().invoke(main, ["contrast", str(folder / "phasors"), str(folder / "phasors")])
    assert done.exit_code == 2
    assert "it holds what massfit phasors wrote, without an answer" in done.output


REDUCED = """
network = { name = "Elsewhere", reference_year = 2016 }
corrections = { ocean_mean_atmosphere = "already-removed" }
[[site]]
id = "A3"
latitude = -11.25
longitude = 205.5
phasor_hpa = [0.12, 0.81]
phasor_covariance_hpa2 = [[0.01, 0.0], [0.0, 0.02]]
years = [2014, 2018]
subtracted = []
"""


def test_sites_reduced_elsewhere_are_listed_without_a_figure(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("os.cpu_count", lambda: 1)
    (tmp_path / "network.toml").write_text(REDUCED)
    done = CliRunner().invoke(main, ["phasors", str(tmp_path), "--quiet", "--json"])
    assert done.exit_code == 0, done.output
    summary = json.loads(done.stdout)
    assert summary == json.loads((tmp_path / "phasors" / "phasors.json").read_text())
    (site,) = summary["sites"]
    assert site["phasor_hpa"] == pytest.approx([0.12, 0.81])
    assert site["judged"] is None
    assert any("No ocean model was subtracted" in text for text in site["warnings"])
    assert not (tmp_path / "phasors" / "reduced_records.nc").exists()
    assert not list((tmp_path / "phasors" / "figures").iterdir())
    assert "This site was reduced elsewhere" in (tmp_path / "phasors" / "phasors.html").read_text()


def test_an_interrupted_run_goes_on_from_the_sites_that_are_finished(
    folder: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def interrupted(*_: object) -> None:
        raise KeyboardInterrupt

    def forbidden(*_: object, **__: object) -> None:
        raise AssertionError("the site is fitted again")

    place = tmp_path / "again"
    with monkeypatch.context() as patch:
        patch.setattr("massfit.pipeline.phasors.site_sheets", interrupted)
        with pytest.raises(KeyboardInterrupt):
            phasors_to_folder(folder, place)
    assert not place.exists()
    monkeypatch.setattr("massfit.pipeline.sites.fit_site", forbidden)
    phasors_to_folder(folder, place)
    for name in ("phasors.json", "sites.csv", "figures"):
        first, second = folder / "phasors" / name, place / name
        if first.is_dir():
            (picture,) = first.iterdir()
            first, second = picture, second / picture.name
        assert second.read_bytes() == first.read_bytes(), name
