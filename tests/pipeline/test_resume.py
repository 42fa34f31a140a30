"""A run that is killed goes on where it was, and ends with the same numbers; the folder has one writer at a time."""

import json
import multiprocessing
import os
import shutil
import signal
import subprocess
import sys
import time
from collections import Counter
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import massfit
from massfit.errors import InputError
from massfit.io.results.partial_folder import claimed
from massfit.io.results.read_results import read_results
from massfit.pipeline.invent import simulate_to_folder
from massfit.pipeline.save import estimate_to_folder
from massfit.pipeline.workers import Workers

KILLS = 30
NUMBERS = ("posterior.nc", "site_phasors.nc", "fingerprints.nc", "reduced_records.nc")

# children are forked from a process that has the imports behind it, so that kills fall into the work
CONTEXT = multiprocessing.get_context("forkserver")
CONTEXT.set_forkserver_preload(["massfit.pipeline.save"])


@pytest.fixture(scope="module")
def network(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Three sites, two years of daily means, one model, two load members."""
    folder = tmp_path_factory.mktemp("invented") / "network"
    options = {"sites": 3, "years": 2.0, "models": 1, "load_members": 2, "incidents": False, "bad_site": False}
    simulate_to_folder(folder, 3, sampling="daily", **options)
    return folder


@pytest.fixture(scope="module")
def undisturbed(network: Path, tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, float]:
    """Results of a run that nobody disturbed, and its duration, s."""
    folder = tmp_path_factory.mktemp("undisturbed") / "results"
    begin(network, folder).join()  # the first one waits for the imports of the server
    shutil.rmtree(folder)
    start = time.monotonic()
    begin(network, folder).join()
    return folder, time.monotonic() - start


# drawing takes longest of all and decides no number; the runs of the command below draw
UNDRAWN = """
from pathlib import Path
from massfit.pipeline import save
save._pictures, save.report_page = lambda run: {}, lambda run, pictures: "page"
save.estimate_to_folder(Path(network), Path(folder))
"""


def begin(network: Path, folder: Path) -> multiprocessing.process.BaseProcess:
    process = CONTEXT.Process(target=exec, args=(UNDRAWN, {"network": str(network), "folder": str(folder)}))
    process.start()
    return process


@pytest.fixture(autouse=True)
def undrawn(monkeypatch: pytest.MonkeyPatch) -> None:
    """Leave the drawing out in this process too."""
    monkeypatch.setattr("massfit.pipeline.save._pictures", lambda _: {})
    monkeypatch.setattr("massfit.pipeline.save.report_page", lambda *_: "page")


def assert_same_numbers(folder: Path, expected: Path) -> None:
    assert (folder / "estimate.json").read_bytes() == (expected / "estimate.json").read_bytes()
    for name in NUMBERS:
        with (
            xr.open_datatree(folder / name, engine="h5netcdf") as found,
            xr.open_datatree(expected / name, engine="h5netcdf") as wanted,
        ):
            xr.testing.assert_equal(found, wanted)


def kill_and_resume(network: Path, folder: Path, expected: Path, duration: float, kills: int) -> tuple[int, int]:
    """Kill runs at random moments, start them again; give the number of results and of starts from kept parts."""
    moment = np.random.default_rng(20)
    parts = folder.parent / f".{folder.name}-partial" / "parts"
    killed = finished = resumed = 0
    while killed < kills or not finished:
        resumed += parts.is_dir() and any(parts.iterdir())
        process = begin(network, folder)
        process.join(moment.uniform(0.0, 1.1 * duration))
        if process.is_alive():
            process.kill()
            process.join()
            killed += 1
        else:
            assert process.exitcode == 0
        if folder.exists():  # whole, whatever happened
            read_results(folder)
            assert_same_numbers(folder, expected)
            shutil.rmtree(folder)
            finished += 1
    return finished, resumed


def test_a_run_killed_at_any_moment_ends_with_the_same_numbers(
    network: Path, undisturbed: tuple[Path, float], tmp_path: Path
) -> None:
    finished, resumed = kill_and_resume(network, tmp_path / "results", *undisturbed, kills=KILLS)
    assert finished >= 3
    assert resumed >= KILLS // 4


@pytest.mark.slow
def test_the_demo_killed_at_any_moment_ends_with_the_same_numbers(tmp_path: Path) -> None:
    demo = Path(__file__).parents[2] / "demo_network"
    expected = tmp_path / "expected"
    start = time.monotonic()
    begin(demo, expected).join()
    duration = time.monotonic() - start
    finished, resumed = kill_and_resume(demo, tmp_path / "results", expected, duration, kills=100)
    assert finished >= 3
    assert resumed >= 25


def interrupted(network: Path, folder: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Stop a run after its posterior and give the folder of its parts."""

    def stop(*_: object, **__: object) -> None:
        raise KeyboardInterrupt

    with monkeypatch.context() as patch:
        patch.setattr("massfit.pipeline.save.finished_run", stop)
        with pytest.raises(KeyboardInterrupt):
            estimate_to_folder(network, folder)
    return folder.parent / f".{folder.name}-partial" / "parts"


def test_parts_are_used_damaged_ones_are_not_and_none_is_left(
    network: Path, undisturbed: tuple[Path, float], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    computed: list[str] = []
    functions = ("pipeline.sites", "reduce_site"), ("posterior.sample", "_sample_part")
    functions += ("posterior.alternatives", "_moments"), ("posterior.shares", "_member_terms")
    for module, name in ((f"massfit.{room}", name) for room, name in functions):
        really = getattr(sys.modules[module], name)

        def counting(task: object, really=really, name=name) -> object:
            computed.append(name)
            return really(task)

        counting.__module__, counting.__qualname__ = module, name  # a part knows its function by name
        monkeypatch.setattr(f"{module}.{name}", counting)
    parts = interrupted(network, tmp_path / "results", monkeypatch)
    files = sorted(parts.iterdir())
    # three sites; the ensembles together and the nodes of two load members; terms of these; seven other choices
    assert Counter(computed) == {"reduce_site": 3, "_sample_part": 3, "_member_terms": 2, "_moments": 7}
    assert len(files) == len(computed)
    computed.clear()
    for damage, path in enumerate(files[:3]):
        content = bytearray(path.read_bytes())
        content[(3, len(content) // 2, -1)[damage]] ^= 0x04
        path.write_bytes(content)
    files[3].write_bytes(files[4].read_bytes())  # sound, and of another part
    estimate_to_folder(network, tmp_path / "results")
    assert len(computed) == 4
    assert_same_numbers(tmp_path / "results", undisturbed[0])
    assert [path.name for path in tmp_path.iterdir()] == ["results"]


def test_other_settings_take_no_part_of_the_interrupted_run(
    network: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    interrupted(network, tmp_path / "results", monkeypatch)
    other = tmp_path / "other"
    shutil.copytree(network, other)
    text = (other / "network.toml").read_text().replace("seed = ", "seed = 7")
    (other / "network.toml").write_text(text)
    estimate_to_folder(other, tmp_path / "results")
    estimate_to_folder(other, tmp_path / "alone")
    assert_same_numbers(tmp_path / "results", tmp_path / "alone")


def test_the_number_of_processes_changes_no_part(
    network: Path, undisturbed: tuple[Path, float], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    interrupted(network, tmp_path / "results", monkeypatch)

    def idle(*given: object) -> list[object]:
        assert given[-1] == []  # no part is left to compute
        return []

    monkeypatch.setattr(Workers, "results", idle)
    result = estimate_to_folder(network, tmp_path / "results", workers=2)
    assert result.provenance["processes"] == 2
    assert_same_numbers(tmp_path / "results", undisturbed[0])


def test_old_results_stay_until_new_ones_are_whole(
    network: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, run: massfit.results.estimate.Estimate
) -> None:
    place = tmp_path / "results"
    place.mkdir()
    for name in ("run.json", "estimate.json"):
        (place / name).write_text("of an older run")
    with pytest.raises(InputError, match="finished results"):
        estimate_to_folder(network, place)
    assert [path.name for path in tmp_path.iterdir()] == ["results"]

    def stop(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr("massfit.pipeline.save.estimate", lambda *_, **__: run)
    monkeypatch.setattr("massfit.io.results.results_folder.write_dataset", stop)
    with pytest.raises(KeyboardInterrupt):
        estimate_to_folder(network, place, overwrite=True)
    assert {path.name for path in place.iterdir()} == {"run.json", "estimate.json"}


# through the command line, with processes


def command(network: Path, folder: Path, mark: str) -> subprocess.Popen[str]:
    return subprocess.Popen(
        [sys.executable, "-m", "massfit", "estimate", str(network), "--output", str(folder)],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
        env={**os.environ, "MASSFIT_TEST_MARK": mark},
    )


def alive(mark: str) -> list[int]:
    """Processes that carry a mark in their environment."""
    found = []
    for place in Path("/proc").glob("[0-9]*"):
        try:
            if f"MASSFIT_TEST_MARK={mark}".encode() in (place / "environ").read_bytes().split(b"\0"):
                found.append(int(place.name))
        except OSError:  # gone, or another user's
            continue
    return found


def wait_for(process: subprocess.Popen[str], stage: str) -> None:
    assert process.stderr is not None
    for line in process.stderr:
        if stage in line:
            return
    raise AssertionError(f"the run ended before {stage}")


needs_proc = pytest.mark.skipif(not Path("/proc/self/environ").exists(), reason="this system lists no processes here")


@needs_proc
@pytest.mark.parametrize("stage", ["reading", "network posterior"])
def test_no_process_outlives_a_killed_run(network: Path, tmp_path: Path, stage: str) -> None:
    process = command(network, tmp_path / "results", mark := f"{tmp_path}-{stage}")
    wait_for(process, stage)
    process.kill()
    process.communicate()
    deadline = time.monotonic() + 20.0
    while (left := alive(mark)) and time.monotonic() < deadline:
        time.sleep(0.05)
    assert left == []


@needs_proc
def test_control_c_says_so_keeps_what_is_finished_and_leaves_no_process(
    network: Path, undisturbed: tuple[Path, float], tmp_path: Path
) -> None:
    process = command(network, tmp_path / "results", mark := str(tmp_path))
    wait_for(process, "network posterior")
    os.killpg(process.pid, signal.SIGINT)  # as a terminal does: to every process of the group
    out, err = process.communicate()
    assert process.returncode == 130
    assert out == ""
    assert err.splitlines() == [
        "massfit: interrupted. What estimate had finished is kept: the same command goes on from there."
    ]
    assert alive(mark) == []
    parts = tmp_path / ".results-partial" / "parts"
    assert len(list(parts.iterdir())) >= 3
    again = command(network, tmp_path / "results", mark)
    out, err = again.communicate()
    assert again.returncode == 0, err
    assert_same_numbers(tmp_path / "results", undisturbed[0])
    assert [path.name for path in tmp_path.iterdir()] == ["results"]


def test_two_runs_do_not_share_a_folder(network: Path, tmp_path: Path) -> None:
    process = command(network, tmp_path / "results", str(tmp_path))
    wait_for(process, "reading")
    with pytest.raises(InputError, match=f"another run is writing here .process {process.pid} on "):
        estimate_to_folder(network, tmp_path / "results")
    with claimed(tmp_path / "elsewhere"):
        pass  # another folder is free
    process.kill()
    process.communicate()
    assert json.loads((tmp_path / ".results-partial" / "lock").read_text())["process"] == process.pid
    estimate_to_folder(network, tmp_path / "results")  # the lock of the dead is no lock
    read_results(tmp_path / "results")
