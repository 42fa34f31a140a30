"""Independent parts of a stage, shared among processes."""

import os
import signal
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor
from contextlib import contextmanager, suppress
from importlib import import_module
from multiprocessing import get_context
from multiprocessing.connection import Connection
from threading import Thread
from types import TracebackType
from typing import TypeVar

from threadpoolctl import threadpool_limits

Part = TypeVar("Part")
Result = TypeVar("Result")


class Workers:
    """Processes that share the parts of a stage; the order of the results is that of the parts.

    Every process keeps to one thread: the matrices of a site are small, and threads
    that wait for each other cost ten times the work (measured). The processes end with
    this one however it ends, and at once when the work is given up.

    Parameters
    ----------
    count : int
        Processes; with 1 the work stays in this one.
    """

    def __init__(self, count: int) -> None:
        self._pool: ProcessPoolExecutor | None = None
        self._limit = threadpool_limits(1)
        self.count = count
        if count < 2:
            return
        # fresh processes: a fork of one with threads (transforms, progress) may hang
        context = get_context("spawn")
        lifeline, self._lifeline = context.Pipe(duplex=False)
        self._pool = ProcessPoolExecutor(count, mp_context=context, initializer=_begin, initargs=(lifeline,))
        with _no_interrupts():
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
            if error is not None:
                self._lifeline.close()
            self._pool.shutdown(cancel_futures=True)
            self._lifeline.close()

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


@contextmanager
def _no_interrupts() -> Iterator[None]:
    """Start processes that Ctrl-C does not reach, not even in their first moments: this one ends them."""
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)


def _begin(lifeline: Connection) -> None:
    """Begin a process that ends with the one that started it."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    Thread(target=_end_with, args=(lifeline,), daemon=True).start()
    _one_thread()


def _end_with(lifeline: Connection) -> None:
    # nothing is ever sent: the wait ends when the other end is closed, by its owner or by the owner's death
    with suppress(EOFError, OSError):
        lifeline.recv_bytes()
    os._exit(1)


def _one_thread() -> None:
    """Load what the stages load, then hold it to one thread: a limit acts on loaded libraries only."""
    for name in ("massfit.pipeline.sites", "massfit.posterior.sample"):
        import_module(name)

    threadpool_limits(1)
