"""The command line: what it writes, what it refuses, what it prints and how it ends."""

import json
import os
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest
import xarray as xr
from click.testing import CliRunner, Result

from massfit.cli.main import main

MODULE = (sys.executable, "-m", "massfit")


def call(*words: object) -> Result:
    """Run a command in this process."""
    return CliRunner().invoke(main, [str(word) for word in words])


@pytest.fixture(autouse=True)
def one_process(monkeypatch: pytest.MonkeyPatch) -> None:
    """Commands called here do not start workers; those in a process of their own do."""
    monkeypatch.setattr(os, "cpu_count", lambda: 1)


@pytest.fixture(scope="module")
def invented_folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("simulated") / "network"
    command = (folder, "--seed", 5, "--sites", 3, "--years", 2, "--models", 2, "--sampling", "daily")
    done = call("simulate", *command)
    assert done.exit_code == 0, done.output
    assert f"Next: massfit estimate {folder}" in done.stdout
    # two of the five load members do for these tests
    loads = xr.load_dataset(folder / "fields/loads.nc", engine="h5netcdf").isel(member=slice(2))
    loads.to_netcdf(folder / "fields/loads.nc", engine="h5netcdf")
    return folder


@pytest.fixture(scope="module")
def finished(invented_folder: Path) -> subprocess.CompletedProcess[str]:
    """The main job in a process of its own, on no terminal."""
    command = [*MODULE, "estimate", str(invented_folder)]
    return subprocess.run(command, capture_output=True, text=True, check=False, timeout=300)


# help


@pytest.mark.parametrize("words", [("--help",), ("-h",), ("estimate", "--help"), ("simulate", "--help")])
def test_help_fits_eighty_columns(words: tuple[str, ...]) -> None:
    done = call(*words)
    assert done.exit_code == 0
    assert "Usage:" in done.stdout
    assert max(map(len, done.stdout.splitlines())) <= 80


def test_version() -> None:
    done = call("--version")
    assert done.exit_code == 0
    assert "0.1.0" in done.stdout


# simulate, then estimate


def test_estimate_after_simulate(invented_folder: Path, finished: subprocess.CompletedProcess[str]) -> None:
    assert finished.returncode == 0, finished.stderr
    results = invented_folder / "results"
    summary = json.loads((results / "estimate.json").read_text("utf-8"))
    assert f"{summary['amplitude_hpa']['median']:.3f} hPa" in finished.stdout
    assert f"Results in {results}: start with report.html" in finished.stdout
    for stage in ("reading", "daily means", "sea-level equation", "site phasors", "network posterior", "report"):
        assert stage in finished.stderr
    for text in (finished.stdout, finished.stderr):
        # no colour and no live line where there is no terminal
        assert "\x1b" not in text
        assert "\r" not in text
    truth = json.loads((invented_folder / "truth.json").read_text())
    miss = abs(summary["amplitude_hpa"]["median"] - truth["amplitude_hpa"])
    assert miss < 4.0 * summary["amplitude_hpa"]["sd"]


def test_run_json_names_every_input_by_its_digest(
    invented_folder: Path, finished: subprocess.CompletedProcess[str]
) -> None:
    assert finished.returncode == 0
    inputs = json.loads((invented_folder / "results" / "run.json").read_text("utf-8"))["inputs"]
    folders = ("records", "fields", "gravity")
    files = {str(path.relative_to(invented_folder)) for name in folders for path in (invented_folder / name).iterdir()}
    assert set(inputs) == {"network.toml", *files}
    assert all(len(digest) == 64 for digest in inputs.values())


def test_another_process_gives_the_same_numbers_and_quiet_prints_nothing(
    invented_folder: Path, finished: subprocess.CompletedProcess[str], tmp_path: Path
) -> None:
    again = call("estimate", invented_folder, "--output", tmp_path / "again", "--quiet")
    assert again.exit_code == 0
    assert again.output == ""
    there, here = invented_folder / "results", tmp_path / "again"
    assert finished.returncode == 0
    assert (there / "estimate.json").read_bytes() == (here / "estimate.json").read_bytes()
    assert (there / "sites.csv").read_bytes() == (here / "sites.csv").read_bytes()


def test_simulate_is_repeatable_and_refuses_a_folder_in_use(invented_folder: Path, tmp_path: Path) -> None:
    words = ("--sites", 2, "--years", 1, "--models", 0, "--sampling", "daily", "--seed")
    assert call("simulate", tmp_path / "a", *words, 3).exit_code == 0
    assert call("simulate", tmp_path / "b", *words, 3).exit_code == 0
    assert call("simulate", tmp_path / "c", *words, 4).exit_code == 0
    truth = [(tmp_path / name / "truth.json").read_bytes() for name in "abc"]
    assert truth[0] == truth[1] != truth[2]
    before = (invented_folder / "network.toml").read_bytes()
    refused = call("simulate", invented_folder, *words, 3)
    assert refused.exit_code == 2
    assert isinstance(refused.exception, SystemExit)
    assert "the folder is not empty" in refused.stderr
    assert (invented_folder / "network.toml").read_bytes() == before


# refusal


def snapshot(folder: Path) -> dict[Path, bytes]:
    return {path: path.read_bytes() for path in folder.rglob("*") if path.is_file()}


def test_every_fault_is_listed_and_nothing_is_written(network_folder: Path, change: Callable[[str, str], None]) -> None:
    change("latitude = -11.25", "latitude = 95.0")
    change('drift = "linear"', 'drift = "cubic"')
    before = snapshot(network_folder)
    refused = call("estimate", network_folder)
    assert refused.exit_code == 2
    assert isinstance(refused.exception, SystemExit)
    assert "massfit: 2 faults in the input; nothing was written." in refused.stderr
    assert "95.0" in refused.stderr
    assert "cubic" in refused.stderr
    assert refused.stdout == ""
    assert snapshot(network_folder) == before


def test_faults_are_printed_even_when_quiet(tmp_path: Path) -> None:
    refused = call("estimate", tmp_path / "nowhere", "--quiet")
    assert refused.exit_code == 2
    assert "1 fault in the input" in refused.stderr


def test_an_unknown_option_is_refused(network_folder: Path) -> None:
    assert call("estimate", network_folder, "--overwirte").exit_code == 2


def test_finished_results_need_overwrite(
    invented_folder: Path, finished: subprocess.CompletedProcess[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    assert finished.returncode == 0
    before = snapshot(invented_folder)
    refused = call("estimate", invented_folder)
    assert refused.exit_code == 2
    assert "--overwrite" in refused.stderr
    assert snapshot(invented_folder) == before
    asked = []
    monkeypatch.setattr("massfit.pipeline.save.estimate_to_folder", lambda *_, **options: asked.append(options))
    call("estimate", invented_folder, "--overwrite")
    assert asked[0]["overwrite"] is True
    assert asked[0]["outside"] is False


# not converged


def test_a_run_that_does_not_converge_says_so_everywhere(network_folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from massfit.posterior import sample

    really = sample.diagnose
    monkeypatch.setattr(sample, "diagnose", lambda *given: replace(really(*given), rhat_max=1.37))
    monkeypatch.setattr(sample, "MAX_STEPS", sample.STEPS)
    done = call("estimate", network_folder)
    assert done.exit_code == 3, done.output
    assert "NOT CONVERGED: do not use this number: R-hat 1.370" in " ".join(done.stdout.split())
    results = network_folder / "results"
    summary = json.loads((results / "estimate.json").read_text("utf-8"))
    assert summary["convergence"]["converged"] is False
    assert any("Not converged" in text for text in summary["warnings"])
    assert "did not converge: this result is not trustworthy" in (results / "report.html").read_text("utf-8")
    for path in results.glob("*.nc"):
        with xr.open_dataset(path, engine="h5netcdf") as data:
            assert data.attrs["converged"] == 0
            assert "Not converged" in data.attrs["comment"]


def test_an_iteration_that_fails_is_no_traceback(network_folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from massfit.errors import ConvergenceError
    from massfit.pipeline import save

    def fails(*_: object, **__: object) -> None:
        raise ConvergenceError("the fit", 0.5, 0.1)

    monkeypatch.setattr(save, "estimate", fails)
    done = call("estimate", network_folder)
    assert done.exit_code == 3
    assert "the fit stopped" in done.output
    assert "nothing was written" in done.output
    assert not (network_folder / "results").exists()
