"""Independent parts of a stage, shared among processes."""

from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor
from importlib import import_module
from multiprocessing import get_context
from types import TracebackType
from typing import TypeVar

from threadpoolctl import threadpool_limits

from massfit.pipeline.progress import Progress

Part = TypeVar("Part")
Result = TypeVar("Result")


class Workers:
    """Processes that share the parts of a stage; the order of the results is that of the parts.

    Every process keeps to one thread: the matrices of a site are small, and threads
    that wait for each other cost ten times the work (measured).

    Parameters
    ----------
    count : int
        Processes; with 1 the work stays in this one.
    """

    def __init__(self, count: int) -> None:
        # fresh processes: a fork of one with threads (transforms, progress) may hang
        self._pool = (
            ProcessPoolExecutor(count, mp_context=get_context("spawn"), initializer=_one_thread) if count > 1 else None
        )
        self._limit = threadpool_limits(1)
        if self._pool is not None:
            # each submission starts a process, whose imports then run beside the first stages here
            for _ in range(count):
                self._pool.submit(_one_thread)

    def __enter__(self) -> "Workers":
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._limit.restore_original_limits()
        if self._pool is not None:
            self._pool.shutdown(cancel_futures=True)

    def map(
        self, function: Callable[[Part], Result], parts: Sequence[Part], *, stage: str, progress: Progress
    ) -> list[Result]:
        """Apply a function to every part.

        Parameters
        ----------
        function : callable
            Must be found by name in its module, so that other processes can import it.
        parts : sequence
        stage : str
            Name of the stage, for `progress`.
        progress : callable

        Returns
        -------
        list
        """
        progress(stage, 0, len(parts))
        results = []
        for done, result in enumerate(self.results(function, parts), start=1):
            results.append(result)
            progress(stage, done, len(parts))
        return results

    def results(self, function: Callable[[Part], Result], parts: Sequence[Part]) -> Iterator[Result]:
        """Apply a function to every part and give the results as they come, in order.

        Parameters
        ----------
        function : callable
        parts : sequence

        Returns
        -------
        iterator
        """
        if self._pool is None or len(parts) < 2:
            return map(function, parts)
        return self._pool.map(function, parts)


def _one_thread() -> None:
    """Load what the stages load, then hold it to one thread: a limit acts on loaded libraries only."""
    for name in ("massfit.pipeline.sites", "massfit.posterior.sample"):
        import_module(name)

    threadpool_limits(1)
