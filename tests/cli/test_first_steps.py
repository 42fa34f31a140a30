"""`massfit starter` and `massfit check` as a user meets them."""

import json
import shutil
from collections.abc import Callable
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from massfit.cli.main import main

DEMO = Path(__file__).parents[2] / "demo_network"


def call(*words: object) -> Result:
    return CliRunner().invoke(main, [str(word) for word in words])


@pytest.mark.parametrize("command", ["starter", "check"])
def test_help_fits_eighty_columns(command: str) -> None:
    done = call(command, "--help")
    assert done.exit_code == 0
    assert max(map(len, done.stdout.splitlines())) <= 80


def test_starter_then_check(tmp_path: Path) -> None:
    shutil.copy(DEMO / "records/rystad_1.nc", tmp_path)
    begun = call("starter", tmp_path)
    assert begun.exit_code == 0, begun.output
    assert "1 site, 1 deployment." in begun.stdout
    assert f"massfit check {tmp_path}" in begun.stdout
    text = (tmp_path / "network.toml").read_text()
    again = call("starter", tmp_path)
    assert again.exit_code == 2
    assert "it is there already. Is never overwritten." in again.stderr
    assert (tmp_path / "network.toml").read_text() == text
    # what is open is all that check finds
    checked = call("check", tmp_path)
    assert checked.exit_code == 2
    assert "massfit: 1 fault in the input" in checked.stderr
    assert "nothing is said about the ocean-mean air pressure" in checked.stderr
    filled = text.replace('ocean_mean_atmosphere = ""', 'ocean_mean_atmosphere = "already-removed"')
    (tmp_path / "network.toml").write_text(filled)
    checked = call("check", tmp_path)
    assert checked.exit_code == 0, checked.stderr
    assert "Rystad: 22.51 S 0.12 E, 5267 m deep, 100 % ocean" in checked.stdout
    assert "498 days well covered" in checked.stdout
    assert "What will be assumed" in checked.stdout


def test_check_writes_nothing_and_speaks_json(network_folder: Path) -> None:
    before = {path: path.stat().st_mtime_ns for path in network_folder.rglob("*")}
    done = call("check", network_folder, "--json")
    assert done.exit_code == 0
    found = json.loads(done.stdout)
    assert [site["id"] for site in found["sites"]] == ["A", "B"]
    assert found["faults"] == []
    assert {path: path.stat().st_mtime_ns for path in network_folder.rglob("*")} == before


def test_check_lists_all_faults(network_folder: Path, change: Callable[[str, str], None]) -> None:
    change("latitude = -11.25", "latitude = 95.0")
    change('drift = "linear"', 'drift = "cubic"')
    done = call("check", network_folder, "--json")
    assert done.exit_code == 2
    assert [fault["line"] for fault in json.loads(done.stdout)["faults"]] == [7, 28]
    assert "massfit: 2 faults in the input" in done.stderr


def test_check_needs_no_network_elsewhere(tmp_path: Path) -> None:
    done = call("check", tmp_path / "nowhere")
    assert done.exit_code == 2
    assert "there is no such file" in done.stderr
