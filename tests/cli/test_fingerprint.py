"""The command `massfit fingerprint`: what it prints, writes and refuses."""

import csv
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from massfit.cli.main import main

NETWORK = """\
[network]
name = "Planned"
reference_year = 2016
[[site]]
id = "A place of a long name"
latitude = -11.25
longitude = 205.5
[corrections]
ocean_mean_atmosphere = "already-removed"
[fingerprint]
loads = ["builtin:nominal", "builtin:wide-basins"]
max_degree = 30
"""


def call(*words: object) -> Result:
    return CliRunner().invoke(main, [str(word) for word in words])


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    home = tmp_path_factory.mktemp("network")
    (home / "network.toml").write_text(NETWORK)
    return home


@pytest.fixture(scope="module")
def done(folder: Path) -> Result:
    return call("fingerprint", folder, "--finest", 45)


def test_a_place_alone_is_enough(folder: Path, done: Result) -> None:
    assert done.exit_code == 0, done.output
    assert f"Results in {folder / 'fingerprint'}: start with fingerprint.html" in done.stdout
    for stage in ("reading", "sea-level equation", "maps", "degrees (3)", "report"):
        assert stage in done.stderr
    table = list(csv.DictReader((folder / "fingerprint/fingerprints.csv").read_text("utf-8").splitlines()))
    mean = next(row for row in table if row["kind"] == "mean")
    line = next(line for line in done.stdout.splitlines() if line.startswith("A place of a long name  "))
    digits = {"amplitude_ratio": 3, "amplitude_ratio_spread": 3, "delay_days": 1, "delay_spread_days": 1}
    assert line.split()[-5:-1] == [f"{float(mean[name]):.{count}f}" for name, count in digits.items()]
    assert max(map(len, done.stdout.split("Results in")[0].splitlines())) <= 80


def test_it_is_replaced_only_when_asked(folder: Path, done: Result, monkeypatch: pytest.MonkeyPatch) -> None:
    assert done.exit_code == 0
    refused = call("fingerprint", folder)
    assert refused.exit_code == 2
    assert "--overwrite" in refused.stderr
    asked = []
    made = "massfit.pipeline.save_fingerprint.fingerprint_to_folder"
    monkeypatch.setattr(made, lambda *given, **options: asked.append((given, options)))
    again = call("fingerprint", folder / "network.toml", "--finest", 720, "--overwrite", "--outside", "--quiet")
    assert (again.exit_code, again.output) == (0, "")
    given, options = asked[0]
    assert given == (folder / "network.toml", folder / "fingerprint")
    assert (options["finest_degree"], options["overwrite"], options["outside"]) == (720, True, True)


def test_an_estimate_is_never_replaced_by_a_fingerprint_nor_the_other_way(folder: Path, done: Result) -> None:
    assert done.exit_code == 0
    refused = call("estimate", folder, "--output", folder / "fingerprint", "--overwrite")
    assert refused.exit_code == 2
    assert "results of another command" in refused.stderr
    refused = call("report", folder / "fingerprint")
    assert refused.exit_code == 2
    assert "what massfit fingerprint wrote" in refused.stderr


def test_faults_are_told_and_nothing_is_written(tmp_path: Path) -> None:
    (tmp_path / "network.toml").write_text(NETWORK.replace("builtin:nominal", "builtin:nominla"))
    refused = call("fingerprint", tmp_path)
    assert refused.exit_code == 2
    assert "Did you mean 'nominal'?" in refused.stderr
    assert [path.name for path in tmp_path.iterdir()] == ["network.toml"]


def test_help_fits_eighty_columns() -> None:
    shown = call("fingerprint", "--help")
    assert shown.exit_code == 0
    assert max(map(len, shown.stdout.splitlines())) <= 80
