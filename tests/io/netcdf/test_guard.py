"""The process that examines HDF5 files may die of one: that is told, and the next file is examined all the same."""

import faulthandler
import io
import json
from pathlib import Path

import h5py
import pytest

from massfit.io.netcdf import file_examiner, guard
from massfit.io.netcdf.guard import Guard

# answers like the examiner, but a file may be named after what it does to a library
DYING = """
import json, os, signal, sys
print("ready", flush=True)
for line in sys.stdin:
    name = os.path.basename(json.loads(line))
    if name == "crash":
        os.kill(os.getpid(), signal.SIGSEGV)
    if name == "stall":
        os._exit(1)  # as the watchdog of the examiner does
    print(json.dumps(""), flush=True)
"""


@pytest.mark.parametrize(
    ("name", "problem"),
    [
        ("crash", "it is damaged: reading it ends the process (code -11)"),
        ("stall", "it is damaged: reading it never ends"),
    ],
)
def test_a_death_is_told_and_survived(name: str, problem: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "dying.py").write_text(DYING)
    monkeypatch.setattr(guard, "_EXAMINER", tmp_path / "dying.py")
    watcher = Guard()
    assert watcher.problem_of(tmp_path / "fine") == ""
    assert watcher.problem_of(tmp_path / name) == problem
    assert watcher.problem_of(tmp_path / "fine") == ""
    watcher.close()


def test_a_helper_that_does_not_start_is_an_error(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "empty.py").write_text("")
    monkeypatch.setattr(guard, "_EXAMINER", tmp_path / "empty.py")
    with pytest.raises(RuntimeError, match="does not start"):
        Guard().problem_of(tmp_path / "fine")


def test_the_examiner_sets_a_watchdog_for_every_file(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    h5py.File(tmp_path / "a.nc", "w").close()
    seconds: list[float] = []
    monkeypatch.setattr(faulthandler, "dump_traceback_later", lambda wait, **_: seconds.append(wait))
    monkeypatch.setattr(file_examiner, "_bound_memory", lambda: None)
    monkeypatch.setattr("sys.stdin", io.StringIO(2 * (json.dumps(str(tmp_path / "a.nc")) + "\n")))
    file_examiner.main()
    assert capsys.readouterr().out == 'ready\n""\n""\n'
    assert len(seconds) == 2
    assert min(seconds) > file_examiner.SECONDS
