"""Have HDF5 and MATLAB files examined by another process before this one opens them.

Their libraries can crash or run in circles on a damaged file, and then no exception tells. The
helper process is started with the first file and lives as long as this one: starting it for every
file would cost more than reading does. It holds no state that could change an answer.
"""

import atexit
import contextlib
import json
import os
import subprocess
import sys
from pathlib import Path
from threading import Lock

_EXAMINER = Path(__file__).with_name("file_examiner.py")


class Guard:
    """A helper process that examines one file after another and is replaced when it dies."""

    def __init__(self) -> None:
        self._lock = Lock()
        self._owner = 0
        self._process: subprocess.Popen[str] | None = None

    def problem_of(self, path: Path) -> str:
        """Say what is wrong with a file; nothing when nothing is.

        Parameters
        ----------
        path : pathlib.Path

        Returns
        -------
        str
        """
        with self._lock:
            if self._owner != os.getpid() or self._process is None:  # a fork must not share the pipes
                self._process, self._owner = _started(), os.getpid()
            answer = _asked(self._process, json.dumps(str(path.absolute())))
            if answer:
                return str(json.loads(answer))
            # the helper died of this file
            code = _ended(self._process)
            self._process = None
        return "it is damaged: reading it " + ("never ends" if code == 1 else f"ends the process (code {code})")

    def close(self) -> None:
        """End the helper process."""
        if self._process is not None and self._owner == os.getpid():
            _ended(self._process)
            self._process = None


def _started() -> "subprocess.Popen[str]":
    # -P: modules beside the script must not stand in for others
    process = subprocess.Popen(
        [sys.executable, "-P", "-W", "ignore", str(_EXAMINER)],
        stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, text=True,
    )  # fmt: skip
    if process.stdout is None or process.stdout.readline() != "ready\n":
        _ended(process)
        raise RuntimeError(f"the process that examines files does not start ({sys.executable} {_EXAMINER})")
    return process


def _ended(process: "subprocess.Popen[str]") -> int:
    """Close the pipes of a process, wait for its end and give its exit code."""
    with contextlib.suppress(BrokenPipeError):
        process.communicate()
    for pipe in (process.stdin, process.stdout):
        if pipe is not None:
            with contextlib.suppress(BrokenPipeError):
                pipe.close()
    return process.wait()


def _asked(process: "subprocess.Popen[str]", question: str) -> str:
    if process.stdin is None or process.stdout is None:
        return ""
    try:
        process.stdin.write(question + "\n")
        process.stdin.flush()
        return process.stdout.readline()
    except BrokenPipeError:
        return ""


_GUARD = Guard()
atexit.register(_GUARD.close)
examined_problem = _GUARD.problem_of
"""Problem of an HDF5 or MATLAB file, from the helper process of this one."""
