"""Progress goes to standard error: plain lines where there is no terminal, a live line where there is one."""

import os
import pty
import subprocess
import sys

import pytest

from massfit.cli.progress import shown_progress

_SCRIPT = """
from massfit.cli.progress import shown_progress
with shown_progress(quiet=False) as progress:
    for done in range(4):
        progress("site phasors", done, 3)
print("the answer")
"""


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
def test_a_terminal_gets_a_live_line_and_no_colour_when_asked(variable: dict[str, str], coloured: bool) -> None:
    ours, theirs = pty.openpty()
    clean = {name: value for name, value in os.environ.items() if name not in {"NO_COLOR", "FORCE_COLOR"}}
    environment = {**clean, "TERM": "xterm-256color", **variable}
    command = [sys.executable, "-c", _SCRIPT]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=theirs, env=environment) as process:
        os.close(theirs)
        assert process.stdout is not None
        assert process.stdout.read() == b"the answer\n"
    shown = b""
    try:
        while block := os.read(ours, 4096):
            shown += block
    except OSError:  # the other end of a closed terminal
        pass
    os.close(ours)
    text = shown.decode()
    assert "site phasors" in text
    assert "3/3" in text
    # SGR sequences that set a colour (ECMA-48: 30-37, 38, 90-97)
    assert ("\x1b[38;" in text or "\x1b[3" in text or "\x1b[9" in text) is coloured
