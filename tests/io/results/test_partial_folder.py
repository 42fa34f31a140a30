"""The partial folder: one owner, sound parts only, results whole or not there."""

import json
import os
import resource
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.io.results import partial_folder
from massfit.io.results.partial_folder import claimed

VALUE = (1.5, np.arange(4.0))


def same(found: object) -> bool:
    return isinstance(found, tuple) and found[0] == VALUE[0] and np.array_equal(found[1], VALUE[1])


def test_parts_are_given_back_and_kept_after_a_failure(tmp_path: Path) -> None:
    with pytest.raises(ZeroDivisionError), claimed(tmp_path / "results") as partial:  # noqa: PT012
        assert partial.get("key") is None
        assert same(partial.put("key", VALUE))
        raise ZeroDivisionError
    with claimed(tmp_path / "results") as partial:
        assert same(partial.get("key"))
        partial.clear()
    assert list(tmp_path.iterdir()) == []


def test_any_flipped_bit_and_any_cut_makes_a_part_unsound(tmp_path: Path) -> None:
    with claimed(tmp_path / "results") as partial:
        partial.put("key", VALUE)
        path = partial.place / "parts" / "key"
        sound = path.read_bytes()
        for place in range(0, len(sound), 7):
            path.write_bytes(sound[:place] + bytes([sound[place] ^ 1 << place % 8]) + sound[place + 1 :])
            assert partial.get("key") is None
            path.write_bytes(sound[:place])
            assert partial.get("key") is None
        path.write_bytes(sound)
        assert same(partial.get("key"))
        partial.clear()


def test_a_sound_part_under_another_key_or_of_another_program_is_foreign(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    with claimed(tmp_path / "results") as partial:
        partial.put("key", VALUE)
        parts = partial.place / "parts"
        (parts / "other").write_bytes((parts / "key").read_bytes())
        assert partial.get("other") is None
        monkeypatch.setattr(partial_folder, "_program", lambda: b"another version")
        assert partial.get("key") is None
        partial.clear()


def test_nothing_is_left_where_there_was_nothing(tmp_path: Path) -> None:
    with pytest.raises(ZeroDivisionError), claimed(tmp_path / "deep" / "down" / "results"):
        raise ZeroDivisionError
    assert list(tmp_path.iterdir()) == []


def test_a_second_owner_is_told_who_is_the_first(tmp_path: Path) -> None:
    with claimed(tmp_path / "results") as partial:
        owner = json.loads((partial.place / "lock").read_text())
        assert owner["process"] == os.getpid()
        with pytest.raises(InputError) as caught, claimed(tmp_path / "results"):
            pass
        (fault,) = caught.value.faults
        assert fault.source == str(tmp_path / "results")
        said = f"process {os.getpid()} on {owner['host']} since {owner['since']}"
        assert fault.problem == f"another run is writing here ({said})"
        assert partial.place.is_dir()
    with claimed(tmp_path / "results"):
        pass


def test_the_lock_of_a_dead_process_is_taken_over(tmp_path: Path) -> None:
    code = (
        "import os, sys; from pathlib import Path; from massfit.io.results.partial_folder import claimed\n"
        "with claimed(Path(sys.argv[1])) as partial:\n"
        "    partial.put('key', (1, 2)); os.kill(os.getpid(), 9)\n"
    )
    done = subprocess.run([sys.executable, "-c", code, str(tmp_path / "results")], check=False)
    assert done.returncode == -9
    assert (tmp_path / ".results-partial" / "lock").exists()
    with claimed(tmp_path / "results") as partial:
        assert partial.get("key") == (1, 2)
        partial.clear()


@pytest.mark.parametrize("arrived", [False, True])
def test_results_return_if_a_run_was_killed_between_two_moves(tmp_path: Path, arrived: bool) -> None:
    old = tmp_path / ".results-partial" / "replaced"
    old.mkdir(parents=True)
    (old / "run.json").write_text("old")
    if arrived:
        (tmp_path / "results").mkdir()
        (tmp_path / "results" / "run.json").write_text("new")
    with claimed(tmp_path / "results"):
        assert (tmp_path / "results" / "run.json").read_text() == ("new" if arrived else "old")
    assert [path.name for path in tmp_path.iterdir()] == ["results"]


def test_results_are_replaced_as_a_whole_or_not(tmp_path: Path) -> None:
    place = tmp_path / "results"
    with claimed(place) as partial:
        with partial.whole() as aside:
            (aside / "a.txt").write_text("first")
        with pytest.raises(ZeroDivisionError), partial.whole() as aside:  # noqa: PT012
            (aside / "a.txt").write_text("second")
            raise ZeroDivisionError
        assert (place / "a.txt").read_text() == "first"
        with partial.whole() as aside:
            (aside / "b.txt").write_text("third")
    assert [path.name for path in place.iterdir()] == ["b.txt"]
    assert [path.name for path in tmp_path.iterdir()] == ["results"]


def test_a_folder_that_cannot_be_written_is_one_fault(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("in the way")
    with pytest.raises(InputError, match=r"cannot be written \(Not a directory\)"), claimed(tmp_path / "file" / "x"):
        pass
    if os.geteuid() == 0:  # root may write anywhere but in /proc
        with pytest.raises(InputError, match="cannot be written"), claimed(Path("/proc/results")):
            pass
        return
    tmp_path.chmod(0o555)
    with pytest.raises(InputError, match=r"cannot be written \(Permission denied\)"), claimed(tmp_path / "x"):
        pass


def test_a_part_that_finds_no_room_is_one_fault_and_none_is_kept(tmp_path: Path) -> None:
    # the kernel refuses to let a file grow beyond this, as it refuses when a disk is full
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    with claimed(tmp_path / "results") as partial:
        resource.setrlimit(resource.RLIMIT_FSIZE, (4096, hard))
        try:
            with pytest.raises(InputError, match=r"cannot be written \(File too large\)"):
                partial.put("key", np.arange(5000.0))
        finally:
            resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))
        assert partial.get("key") is None
        partial.clear()
    assert list(tmp_path.iterdir()) == []
