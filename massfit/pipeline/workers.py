"""Independent parts of a stage, shared among processes."""

from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor
from multiprocessing import get_context
from typing import TypeVar

from massfit.pipeline.progress import Progress

Part = TypeVar("Part")
Result = TypeVar("Result")


def mapped(
    function: Callable[[Part], Result], parts: Sequence[Part], *, stage: str, progress: Progress, workers: int
) -> list[Result]:
    """Apply a function to every part, in order.

    Parameters
    ----------
    function : callable
        Must be found by name in its module, so that other processes can import it.
    parts : sequence
    stage : str
        Name of the stage, for `progress`.
    progress : callable
    workers : int
        Processes; 1 stays in this one.

    Returns
    -------
    list
    """
    progress(stage, 0, len(parts))
    results = []
    for done, result in enumerate(_results(function, parts, workers), start=1):
        results.append(result)
        progress(stage, done, len(parts))
    return results


def _results(function: Callable[[Part], Result], parts: Sequence[Part], workers: int) -> Iterator[Result]:
    if workers == 1 or len(parts) < 2:
        yield from map(function, parts)
        return
    # fresh processes: a fork of one with threads (transforms, progress) may hang
    with ProcessPoolExecutor(min(workers, len(parts)), mp_context=get_context("spawn")) as pool:
        yield from pool.map(function, parts)
