"""How a run reports where it is."""

import time
from collections.abc import Callable

Progress = Callable[[str, int, int], None]
"""Called with the stage, how many parts of it are done, and how many there are."""


def ignore(stage: str, done: int, total: int) -> None:
    """Report to nobody."""
    del stage, done, total


class StageTimes:
    """Passes progress on and remembers how long each stage took.

    Parameters
    ----------
    progress : callable
    """

    def __init__(self, progress: Progress) -> None:
        self._progress = progress
        self._spans: dict[str, tuple[float, float]] = {}
        self._open: set[str] = set()

    def __call__(self, stage: str, done: int, total: int) -> None:
        """Note the time and pass the progress on."""
        now = time.monotonic()
        self._spans[stage] = (self._spans.get(stage, (now, now))[0], now)
        (self._open.discard if done >= total else self._open.add)(stage)
        self._progress(stage, done, total)

    def seconds(self) -> dict[str, float]:
        """Elapsed time of each stage, s; of one that is not done, the time so far."""
        now = time.monotonic()
        return {
            stage: round((now if stage in self._open else last) - first, 3)
            for stage, (first, last) in self._spans.items()
        }
