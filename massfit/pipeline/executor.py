"""Who does the work: this process, processes beside it, or a Dask cluster; the results are the same."""

from collections.abc import Callable, Iterator, Sequence
from contextlib import AbstractContextManager, contextmanager
from typing import Protocol, TypeVar

from massfit.pipeline.workers import Workers

Part = TypeVar("Part")
Result = TypeVar("Result")


class Executor(Protocol):
    """Applies a function to parts of the work; the order of the results is that of the parts."""

    @property
    def count(self) -> int:
        """Processes that share the work, as far as it is known at the start."""
        ...

    def results(self, function: Callable[[Part], Result], parts: Sequence[Part]) -> Iterator[Result]:
        """Give the results as they come, in order; few are kept before they are taken."""
        ...


class Embedded:
    """Does all the work in this process, one part after the other.

    Examples
    --------
    >>> list(Embedded().results(abs, [-2, 1]))
    [2, 1]
    """

    count = 1

    def results(self, function: Callable[[Part], Result], parts: Sequence[Part]) -> Iterator[Result]:
        """Apply the function to each part."""
        return map(function, parts)


def make_executor(
    *, workers: int | None = None, scheduler: str | None = None, memory_gb: float = 2.0
) -> AbstractContextManager[Executor]:
    """Choose who does the work.

    Parameters
    ----------
    workers : int, optional
        Processes of a Dask cluster on this machine, started here and ended with the work.
    scheduler : str, optional
        Address of a Dask scheduler that is there, such as ``tcp://10.0.0.5:8786``. Its workers must have this
        version of massfit and see the files under the same paths.
    memory_gb : float
        Memory at which a process that was started here is ended and its part given to another.

    Returns
    -------
    context manager
        Gives an Executor. With neither argument all is done in this process, and Dask need not be installed.

    Raises
    ------
    InputError
        Both arguments; Dask that is not installed; a scheduler that does not answer.
    """
    if workers is None and scheduler is None:
        return _embedded()
    from massfit.pipeline.dask_executor import dask_executor

    return dask_executor(workers=workers, scheduler=scheduler, memory_gb=memory_gb)


@contextmanager
def local_processes(count: int) -> Iterator[Executor]:
    """Give processes of this machine without Dask, as the other stages use them.

    Parameters
    ----------
    count : int

    Yields
    ------
    Executor
    """
    with Workers(count) as pool:
        yield pool


@contextmanager
def _embedded() -> Iterator[Executor]:
    yield Embedded()
