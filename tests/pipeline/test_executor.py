"""The same results whoever does the work, and whatever happens to a worker."""

import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator, Sequence
from typing import Any

import pytest
import xarray as xr
from screening.invented_ocean import eddying_ocean

from massfit.errors import InputError
from massfit.pipeline.dask_executor import DaskExecutor
from massfit.pipeline.executor import Embedded, Executor, local_processes, make_executor
from massfit.pipeline.screen import screen_sea_floor
from massfit.screening.field import ModelField


def screened(executor: Executor) -> xr.Dataset:
    field = ModelField("invented", eddying_ocean(spacing=5.0), "subtract")
    return screen_sea_floor([field], executor=executor, memory_gb=0.02)


def slow_square(number: int) -> int:
    time.sleep(0.2)
    return number**2


def own_process(number: int) -> int:
    del number
    return os.getpid()


def ends_its_worker(number: int) -> int:
    os.kill(os.getpid(), signal.SIGKILL)
    return number


def forgive_nothing(dask_scheduler: Any) -> None:
    dask_scheduler.allowed_failures = 0


class Murderous:
    """Kills a worker when the first result is there, with others under way."""

    def __init__(self, executor: Executor) -> None:
        self._executor, self.count, self.killed = executor, executor.count, 0

    def results(self, function: Any, parts: Sequence[Any]) -> Iterator[Any]:
        process = next(iter(self._executor.results(own_process, [0])))
        for result in self._executor.results(function, parts):
            if not self.killed:
                self.killed = process
                os.kill(process, signal.SIGKILL)
            yield result


@pytest.fixture(scope="module")
def cluster() -> Iterator[Executor]:
    with make_executor(workers=2) as executor:
        yield executor


def test_a_worker_killed_in_the_middle_leaves_the_result_identical(cluster: Executor) -> None:
    assert cluster.count == 2
    expected = screened(Embedded())
    murderous = Murderous(cluster)
    found = screened(murderous)
    assert murderous.killed not in (0, os.getpid())
    xr.testing.assert_identical(found, expected)  # to the last bit


def test_results_come_in_the_order_of_the_parts(cluster: Executor) -> None:
    assert list(cluster.results(slow_square, range(5))) == [0, 1, 4, 9, 16]


def test_giving_up_in_the_middle_leaves_the_cluster_free(cluster: Executor) -> None:
    results = cluster.results(slow_square, range(200))
    assert next(iter(results)) == 0
    results.close()  # type: ignore[attr-defined]
    began = time.monotonic()
    assert list(cluster.results(slow_square, [3])) == [9]
    assert time.monotonic() - began < 5.0


def test_a_fault_of_the_input_comes_back_as_it_is(cluster: Executor) -> None:
    pressure = eddying_ocean()
    with pytest.raises(InputError, match="ocean mean"):
        screen_sea_floor([ModelField("north", pressure, "removed")], executor=cluster)


def test_a_scheduler_that_is_there_is_used_and_left_running(cluster: Executor) -> None:
    assert isinstance(cluster, DaskExecutor)
    field = ModelField("north", eddying_ocean(spacing=15.0), "subtract")
    with make_executor(scheduler=cluster.address) as guest:
        assert guest.count == 2
        shared = screen_sea_floor([field], executor=guest)
    xr.testing.assert_identical(shared, screen_sea_floor([field]))
    assert list(cluster.results(slow_square, [2])) == [4]


def test_a_part_that_ends_its_workers_is_given_up(cluster: Executor) -> None:
    assert isinstance(cluster, DaskExecutor)
    cluster._client.run_on_scheduler(forgive_nothing)  # as it is, four workers would have to start anew
    with pytest.raises(InputError) as caught:
        list(cluster.results(ends_its_worker, [0]))
    assert str(caught.value) == (
        "workers: one part of the work ended 1 worker, one after the other. "
        "Most likely their memory is too small: give less with --memory, or use fewer workers."
    )


def test_processes_without_dask_give_the_same() -> None:
    with local_processes(1) as executor:
        assert list(executor.results(abs, [-3, 2, -1])) == [3, 2, 1]


def test_the_default_needs_no_dask() -> None:
    code = """
import sys
for name in ("dask", "distributed", "zarr"):
    sys.modules[name] = None
from screening.invented_ocean import eddying_ocean
from massfit.errors import InputError
from massfit.pipeline.dask_executor import DaskExecutor
from massfit.pipeline.executor import make_executor
from massfit.pipeline.screen import screen_sea_floor
from massfit.screening.field import ModelField
with make_executor() as executor:
    found = screen_sea_floor([ModelField("north", eddying_ocean(), "subtract")], executor=executor)
print(round(float(found["sd"].max() / 100.0), 1))
try:
    with make_executor(workers=2):
        pass
except InputError as error:
    print(error)
"""
    tests = os.path.dirname(os.path.dirname(__file__))
    path = os.pathsep.join([tests, *filter(None, [os.environ.get("PYTHONPATH")])])
    environment = {**os.environ, "PYTHONPATH": path}
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False, env=environment)
    assert done.returncode == 0, done.stderr
    assert done.stdout.splitlines() == [
        "3.7",
        "workers: Dask is not installed (import of distributed halted; None in sys.modules). Install massfit[big], or "
        "leave out --workers and --scheduler: this process then does all.",
    ]


def test_a_wrong_address_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("massfit.pipeline.dask_executor._ANSWER_WITHIN_S", 1)
    with pytest.raises(InputError) as caught, make_executor(scheduler="tcp://127.0.0.1:9"):
        pass
    assert str(caught.value) == (
        "scheduler: tcp://127.0.0.1:9: no Dask scheduler answers there within 1 s. "
        "Must be an address such as tcp://10.0.0.5:8786. Start one with `dask scheduler`."
    )
    with (
        pytest.raises(InputError, match="both a number of workers and a scheduler"),
        make_executor(workers=1, scheduler="tcp://127.0.0.1:9"),
    ):
        pass
