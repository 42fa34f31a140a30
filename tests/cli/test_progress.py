"""Progress goes to standard error: plain lines where there is no terminal, a live line where there is one."""

import re
import sys
from collections.abc import Callable

import pytest

from massfit.cli.progress import shown_progress

_SCRIPT = """
from massfit.cli.progress import shown_progress
with shown_progress(quiet=False) as progress:
    progress("sea-level equation", 0, 1)
    progress("sea-level equation", 1, 1)
    for done in range(4):
        progress("site phasors", done, 3)
print("the answer")
"""
COMMAND = (sys.executable, "-c", _SCRIPT)
STEERING = re.compile(r"\x1b\[[0-9;?]*[A-Za-z]")


def test_plain_lines_name_each_stage_once(capsys: pytest.CaptureFixture[str]) -> None:
    with shown_progress(quiet=False) as progress:
        for done in range(3):
            progress("daily means", done, 2)
        progress("report", 0, 1)
    shown = capsys.readouterr()
    lines = shown.err.splitlines()
    assert [line.split(" s  ")[1] for line in lines] == ["daily means (2)", "report"]
    assert shown.out == ""


def test_quiet_shows_nothing(capsys: pytest.CaptureFixture[str]) -> None:
    with shown_progress(quiet=True) as progress:
        progress("daily means", 0, 2)
    assert capsys.readouterr() == ("", "")


@pytest.mark.parametrize(("variable", "coloured"), [({}, True), ({"NO_COLOR": "1"}, False)])
def test_a_terminal_gets_a_live_line_and_no_colour_when_asked(
    variable: dict[str, str], coloured: bool, on_terminal: Callable[..., tuple[str, str, int]]
) -> None:
    output, shown, _ = on_terminal(COMMAND, **variable)
    assert output == "the answer\n"
    # name, bar, parts, time taken and time left
    assert re.search(r"site phasors .*3/3 .*\d:\d\d:\d\d.* \d:\d\d:\d\d.* left", STEERING.sub("", shown))
    # SGR sequences that set a colour (ECMA-48: 30-37, 38, 90-97)
    assert ("\x1b[38;" in shown or "\x1b[3" in shown or "\x1b[9" in shown) is coloured


@pytest.mark.parametrize("columns", [40, 80, 200])
def test_a_live_line_fits_the_terminal_and_eighty_columns(
    columns: int, on_terminal: Callable[..., tuple[str, str, int]]
) -> None:
    _, shown, _ = on_terminal(COMMAND, columns=columns)
    lines = re.split(r"[\r\n]+", STEERING.sub("", shown))
    assert any("sea-level equation" in line for line in lines)
    assert max(map(len, lines)) <= min(columns, 80)


def test_a_terminal_that_cannot_move_its_cursor_gets_plain_lines(
    on_terminal: Callable[..., tuple[str, str, int]],
) -> None:
    output, shown, _ = on_terminal(COMMAND, TERM="dumb")
    assert output == "the answer\n"
    assert "\x1b" not in shown
    assert shown.count("site phasors (3)") == 1
