"""An output folder that cannot or must not be written is refused before the work, and nothing is touched."""

from collections.abc import Callable
from pathlib import Path

import pytest
from click.testing import CliRunner

from massfit.cli.main import main


def a_file(place: Path) -> Path:
    place.write_text("mine")
    return place


def below_a_file(place: Path) -> Path:
    return a_file(place) / "results"


def in_use(place: Path) -> Path:
    place.mkdir()
    a_file(place / "notes.txt")
    return place


def finished(place: Path) -> Path:
    place.mkdir()
    a_file(place / "run.json")
    a_file(place / "estimate.json")
    return place


def a_device(place: Path) -> Path:
    del place
    return Path("/dev/null")


MESSAGES = {
    a_file: "P: the output is a file. Must be a folder. Choose another with --output.",
    below_a_file: "the folder cannot be written",
    in_use: "P: the folder is not empty and holds no results of massfit, so it is left alone. "
    "Choose another with --output.",
    finished: "P: the folder holds finished results. Give --overwrite to replace them, or --output to keep both.",
    a_device: "P: the output is a file. Must be a folder. Choose another with --output.",
}


@pytest.mark.parametrize("make", MESSAGES, ids=lambda make: make.__name__)
def test_output(make: Callable[[Path], Path], network_folder: Path, tmp_path: Path) -> None:
    output = make(tmp_path / "there")
    before = {path: path.is_file() and path.read_bytes() for path in tmp_path.rglob("*")}
    done = CliRunner().invoke(main, ["estimate", str(network_folder), "--output", str(output)])
    assert done.exit_code == 2, done.output
    assert isinstance(done.exception, SystemExit)
    assert MESSAGES[make].replace("P:", f"{output}:") in " ".join(done.stderr.split())
    assert "nothing was written" in done.stderr
    assert {path: path.is_file() and path.read_bytes() for path in tmp_path.rglob("*")} == before
