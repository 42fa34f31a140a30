"""The command that writes load Love numbers."""

import csv
import hashlib
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner, Result

from massfit.cli.main import main
from massfit.earth.love import love_numbers
from massfit.earth.profile import prem
from massfit.io.fields.earth_file import write_earth_profile


def call(*words: object) -> Result:
    return CliRunner().invoke(main, ["love-numbers", *(str(word) for word in words)])


def read_back(path: Path) -> tuple[dict[str, str], dict[str, list[float]]]:
    lines = path.read_text(encoding="utf-8").splitlines()
    notes = dict(line.removeprefix("# ").split(": ", 1) for line in lines if line.startswith("#"))
    rows = list(csv.DictReader(line for line in lines if not line.startswith("#")))
    return notes, {name: [float(row[name]) for row in rows] for name in ("degree", "h", "l", "k")}


def test_the_table_holds_the_numbers_and_where_they_come_from(tmp_path: Path) -> None:
    done = call("--output", tmp_path / "love.csv", "--max-degree", 12, "--frame", "CM")
    assert done.exit_code == 0, done.output
    notes, columns = read_back(tmp_path / "love.csv")
    love = love_numbers(max_degree=12, frame="CM")
    assert columns["degree"] == list(range(13))
    for name in "hlk":
        np.testing.assert_array_equal(columns[name], getattr(love, name))
    assert notes["profile"] == "PREM, ocean replaced by upper crust"
    assert notes["degree one"] == "CM, centre of mass of solid Earth and load"
    assert "integrated to degree 12" in notes["method"]
    assert notes["limits of a half-space of the surface rock"].startswith("h' -6.2")


def test_a_profile_of_ones_own(tmp_path: Path) -> None:
    profile = tmp_path / "earth.csv"
    write_earth_profile(profile, prem())
    done = call("--output", tmp_path / "love.csv", "--earth", profile, "--max-degree", 3)
    assert done.exit_code == 0, done.output
    notes, columns = read_back(tmp_path / "love.csv")
    assert hashlib.sha256(profile.read_bytes()).hexdigest() in notes["file"]
    np.testing.assert_allclose(columns["k"], love_numbers(max_degree=3).k, rtol=1e-12)


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (("--output", "there.csv"), "there.csv: the file exists. Give --overwrite to replace it."),
        (("--output", "."), ".: it is a folder. Must be a file. Add the name of the file."),
        (("--output", "no/love.csv"), "no/love.csv: its folder does not exist."),
        (("--output", "new.csv", "--earth", "mars.csv"), "mars.csv: there is no such file."),
        (("--output", "new.csv", "--earth", "there.csv"), "there.csv:1: the header is 'x'. Must be radius_km,"),
        (("--output", "new.csv", "--max-degree", "0"), "0 is not in the range"),
    ],
    ids=["exists", "folder", "no folder", "no profile", "no header", "degree"],
)
def test_what_is_refused(words: tuple[str, ...], message: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    Path("there.csv").write_text("x\n")
    done = call(*words)
    assert done.exit_code == 2
    assert message in done.stderr
    assert not Path("new.csv").exists()
    assert Path("there.csv").read_text() == "x\n"


def test_overwriting(tmp_path: Path) -> None:
    path = tmp_path / "love.csv"
    path.write_text("x\n")
    assert call("--output", path, "--max-degree", 2, "--overwrite").exit_code == 0
    assert read_back(path)[1]["degree"] == [0, 1, 2]
