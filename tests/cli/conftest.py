"""A terminal of any width, in which a command runs."""

import fcntl
import os
import pty
import struct
import subprocess
import termios
from collections.abc import Callable, Sequence

import pytest

Shown = tuple[str, str, int]


def run_on_terminal(command: Sequence[str], *, columns: int = 80, output_too: bool = False, **variables: str) -> Shown:
    """Run a command whose standard error is a terminal; give its output, what the terminal got, and the exit code."""
    ours, theirs = pty.openpty()
    fcntl.ioctl(theirs, termios.TIOCSWINSZ, struct.pack("HHHH", 24, columns, 0, 0))
    clean = {name: value for name, value in os.environ.items() if name not in {"NO_COLOR", "FORCE_COLOR", "COLUMNS"}}
    environment = {**clean, "TERM": "xterm-256color", **variables}
    piped = theirs if output_too else subprocess.PIPE
    with subprocess.Popen(command, stdout=piped, stderr=theirs, env=environment) as process:
        os.close(theirs)
        shown = b""
        try:
            while block := os.read(ours, 4096):
                shown += block
        except OSError:  # the other end of a closed terminal
            pass
        output = process.stdout.read() if process.stdout else b""
    os.close(ours)
    return output.decode(), shown.decode(), process.returncode


@pytest.fixture
def on_terminal() -> Callable[..., Shown]:
    """Run a command on a terminal."""
    return run_on_terminal
