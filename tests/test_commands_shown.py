"""Every command that a page shows exists with its options, and the pages of how-to run as they stand."""

import re
import shlex
import shutil
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import click
import numpy as np
import pytest
import xarray as xr

from massfit.cli.main import main

ROOT = Path(__file__).parents[1]
PAGES = sorted(
    [*(ROOT / "docs").rglob("*.md"), ROOT / "README.md", ROOT / "DEVELOPERS.md", ROOT / "demo_network/README.md"]
)
BLOCK = re.compile(r"```(?:bash|console|sh)\n(.*?)```", re.DOTALL)
SCRIPT = re.compile(r"```bash\n(.*?)```", re.DOTALL)
TESTS = re.compile(r"\btests/[\w/]+\.py\b")
INLINE = re.compile(r"(?<!`)`(massfit [a-z][^`]*)`(?!`)")
WORDS = re.compile(r"(?:^|[\s/])massfit ((?:[a-z-]+)(?: [^;&|<>\n]*)?)")
HOW_TO = [ROOT / "docs/first_run.md", *sorted((ROOT / "docs/how_to").glob("*.md"))]
ELSEWHERE = {"--scheduler"}
"""Commands with such an option need what is not here: a cluster that runs already."""


def blocks(page: Path) -> list[str]:
    return BLOCK.findall(page.read_text("utf-8"))


def shown() -> Iterator[tuple[str, str]]:
    """Every command of massfit on every page: the page, and what stands behind the word massfit."""
    for page in PAGES:
        text = page.read_text("utf-8")
        found = [match for block in blocks(page) for match in WORDS.findall(block)]
        found += [words.removeprefix("massfit ") for words in INLINE.findall(text)]
        yield from ((str(page.relative_to(ROOT)), words.strip()) for words in found)


def wrong(words: str) -> list[str]:
    """What of a command does not exist."""
    name, *rest = shlex.split(words)
    if name.startswith("-"):
        return [] if name in {"--help", "-h", "--version"} else [name]
    command = main.commands.get(name)
    if command is None:
        return [name]
    known = {option for each in command.params if isinstance(each, click.Option) for option in each.opts} | {"--help"}
    return [word for word in rest if word.startswith("--") and word.partition("=")[0] not in known]


def test_every_command_that_is_shown_exists() -> None:
    commands = sorted(set(shown()))
    assert len(commands) > 60
    assert [(page, words) for page, words in commands if wrong(words)] == []


def test_every_test_that_a_page_names_is_there() -> None:
    named = sorted({(page.name, path) for page in PAGES for path in TESTS.findall(page.read_text("utf-8"))})
    assert len(named) > 30
    assert [(page, path) for page, path in named if not (ROOT / path).exists()] == []


@pytest.mark.parametrize("words", ["estimat demo", "estimate demo --fast", "cite results --bibtext", "--versio"])
def test_a_command_that_does_not_exist_is_seen(words: str) -> None:
    assert wrong(words)


def test_every_command_of_the_program_is_shown_on_the_page_of_the_terminal() -> None:
    page = (ROOT / "docs/terminal.md").read_text("utf-8")
    assert [name for name in main.commands if f"`massfit {name} " not in page] == []


def test_the_only_pages_with_commands_that_nothing_runs_are_these() -> None:
    run_elsewhere = {
        "docs/first_evening.md",  # tests/test_first_evening.py
        "docs/theory/earth.md",  # tests/cli/test_love_numbers.py
        "docs/theory/screening.md",  # tests/test_screening_page.py
        "docs/theory/recovery.md",  # the slow tests that it names
        "docs/fingerprints.md", "docs/site_figures.md", "docs/terminal.md",  # one command each, of the how-to pages too
        "README.md", "demo_network/README.md",  # tests/test_demo_network.py
    }  # fmt: skip
    pages = {str(page.relative_to(ROOT)) for page in PAGES if blocks(page)}
    assert pages - {str(page.relative_to(ROOT)) for page in HOW_TO} <= run_elsewhere


@pytest.fixture(scope="module")
def desk(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder as the reader of the how-to pages has it: a network called demo_network, and the field of a model."""
    folder = tmp_path_factory.mktemp("desk")
    options = ["--sites", "4", "--years", "2", "--models", "2", "--sampling", "daily", "--satellites", "1"]
    command = [sys.executable, "-m", "massfit", "simulate", str(folder / "demo_network"), *options]
    subprocess.run(command, check=True, capture_output=True)
    from massfit.fingerprint.ocean import OceanFunction

    rng, ocean = np.random.default_rng(1), OceanFunction.builtin()
    time = np.arange("2011-01-03", "2014-01-01", 5, dtype="datetime64[D]").astype("datetime64[ns]")
    lat, lon = np.arange(-75.0, 80.0, 10.0), np.arange(5.0, 360.0, 10.0)
    wet = np.array([[ocean.fraction_at(north, east) > 0.5 for east in lon] for north in lat])
    values = np.where(wet, rng.normal(0.0, 100.0, (time.size, *wet.shape)), np.nan)
    pressure = xr.DataArray(values, {"time": time, "lat": lat, "lon": lon}, ("time", "lat", "lon"), "bottom_pressure")
    pressure.attrs["units"] = "Pa"
    (folder / "fields").mkdir()
    pressure.to_dataset().to_netcdf(folder / "fields/model.nc", engine="h5netcdf")
    return folder


@pytest.mark.slow
@pytest.mark.parametrize("page", HOW_TO, ids=lambda page: page.stem)
def test_the_page_runs_as_it_stands(page: Path, desk: Path, tmp_path: Path) -> None:
    # every choice and twenty surrogates are among them: a quarter of an hour on a quiet machine
    folder = tmp_path / "desk"
    shutil.copytree(desk, folder)
    text = page.read_text("utf-8")
    if "--overwrite" in text or ("demo_network/results" in text and not re.search("estimate demo_network(?!/)", text)):
        _run("massfit estimate demo_network --quiet", folder)
    for block in SCRIPT.findall(text):
        if not any(option in block for option in ELSEWHERE):
            _run(block, folder)


def _run(script: str, folder: Path) -> None:
    program = f'massfit() {{ "{sys.executable}" -m massfit "$@"; }}\npython3() {{ "{sys.executable}" "$@"; }}\nset -e\n'
    # the shell forgets a function behind an assignment of variables, so these are exported first
    script = re.sub(r"^((?:[A-Z_]+=\S+ )+)(?=massfit )", r"export \1; ", script, flags=re.MULTILINE)
    done = subprocess.run(["bash", "-c", program + script], cwd=folder, capture_output=True, text=True, check=False)
    assert done.returncode in (0, 3), f"{script}\n{done.stdout}\n{done.stderr}"
