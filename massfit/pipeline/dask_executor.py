"""The work on a Dask cluster: one of this machine, or one that is there."""

import logging
from collections import deque
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from importlib import metadata
from tempfile import TemporaryDirectory
from typing import Any, TypeVar

from massfit.display import counted
from massfit.errors import Fault, InputError

Part = TypeVar("Part")
Result = TypeVar("Result")

_AHEAD = 2  # parts to a worker that are under way or waiting to be fetched
_RETRIES = 2  # of a part that fails for another reason than its input
_ANSWER_WITHIN_S = 20


class DaskExecutor:
    """Hands parts to the workers of a cluster, a few ahead, and takes the results in order.

    A worker that is lost costs its parts another try, on another worker or on the one that takes its place; what was
    fetched is safe here.

    Parameters
    ----------
    client : distributed.Client
    """

    def __init__(self, client: Any) -> None:
        self._client = client

    @property
    def count(self) -> int:
        """Workers that are there now."""
        return len(self._client.scheduler_info(n_workers=-1)["workers"])

    def results(self, function: Callable[[Part], Result], parts: Sequence[Part]) -> Iterator[Result]:
        """Apply the function to each part on some worker."""
        waiting: deque[Any] = deque()
        left = iter(parts)
        try:
            while True:
                while len(waiting) < _AHEAD * max(self.count, 1) and (part := next(left, None)) is not None:
                    waiting.append(self._client.submit(function, part, pure=False, retries=_RETRIES))
                if not waiting:
                    return
                yield _fetched(waiting.popleft())
        finally:
            for future in waiting:
                future.cancel()

    @property
    def address(self) -> str:
        """Where the scheduler listens."""
        return str(self._client.scheduler_info(n_workers=0)["address"])

    def everywhere(self, function: Callable[[], Result]) -> list[Result]:
        """Call a function once in every worker, for example to ask for its memory."""
        return list(self._client.run(function).values())


def _fetched(future: Any) -> Any:
    from distributed.scheduler import KilledWorker

    try:
        return future.result()
    except KilledWorker as error:
        problem = f"one part of the work ended {counted(error.allowed_failures + 1, 'worker')}, one after the other"
        action = "Most likely their memory is too small: give less with --memory, or use fewer workers"
        raise InputError(Fault("workers", "", problem, "", action)) from error
    finally:
        future.release()


@contextmanager
def dask_executor(*, workers: int | None, scheduler: str | None, memory_gb: float) -> Iterator[DaskExecutor]:
    """Start a cluster on this machine, or go to one that is there.

    Parameters
    ----------
    workers : int or None
    scheduler : str or None
    memory_gb : float
        Memory at which a process started here is ended.

    Yields
    ------
    DaskExecutor

    Raises
    ------
    InputError
        Both or neither given; Dask not installed; no answer; workers without this massfit.
    """
    if workers is not None and scheduler is not None:
        problem = "both a number of workers and a scheduler are given"
        action = "Give --workers for a cluster on this machine, or --scheduler for one that is there"
        raise InputError(Fault("workers", "", problem, "Must be one of them", action))
    _require_dask()
    import dask

    # parts bring the masks and areas of their cells with them, on purpose: a worker that is lost takes nothing along
    with (
        dask.config.set({"distributed.admin.large-graph-warning-threshold": "10GB"}),
        _own_cluster(workers, memory_gb) if workers is not None else _client_of(str(scheduler)) as client,
    ):
        yield DaskExecutor(client)


def _require_dask() -> None:
    try:
        import distributed  # noqa: F401
    except ImportError as error:
        problem = f"Dask is not installed ({error})"
        action = "Install massfit[big], or leave out --workers and --scheduler: this process then does all"
        raise InputError(Fault("workers", "", problem, "", action)) from error


@contextmanager
def _own_cluster(workers: int, memory_gb: float) -> Iterator[Any]:
    from distributed import Client, LocalCluster

    with (
        TemporaryDirectory(prefix="massfit-") as scratch,
        LocalCluster(
            n_workers=workers, threads_per_worker=1, processes=True, host="127.0.0.1", dashboard_address=":0",
            memory_limit=f"{memory_gb}GB", local_directory=scratch, silence_logs=logging.ERROR,
        ) as cluster,
        Client(cluster, set_as_default=False) as client,
    ):  # fmt: skip
        yield client


@contextmanager
def _client_of(address: str) -> Iterator[Any]:
    from distributed import Client

    try:
        client = Client(address, timeout=_ANSWER_WITHIN_S, set_as_default=False)
    except (OSError, ValueError, TypeError) as error:
        problem = f"no Dask scheduler answers there within {_ANSWER_WITHIN_S} s"
        allowed = "Must be an address such as tcp://10.0.0.5:8786"
        raise InputError(Fault("scheduler", address, problem, allowed, "Start one with `dask scheduler`")) from error
    with client:
        _require_same_massfit(client, address)
        yield client


def _require_same_massfit(client: Any, address: str) -> None:
    own, action = metadata.version("massfit"), "Install the same massfit[big] where the workers run"
    try:
        versions = set(client.run(metadata.version, "massfit").values())
    except metadata.PackageNotFoundError as error:
        raise InputError(Fault("scheduler", address, "its workers have no massfit", "", action)) from error
    if not versions:
        raise InputError(Fault("scheduler", address, "it has no workers", "At least one", "Start `dask worker` there"))
    if versions != {own}:
        problem = f"its workers have massfit {', '.join(sorted(versions))}"
        raise InputError(Fault("scheduler", address, problem, f"Must be {own} as here", action))
