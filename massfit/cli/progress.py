"""Progress of the stages: a live line on a terminal, plain lines elsewhere."""

import os
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager

import click

Progress = Callable[[str, int, int], None]


@contextmanager
def shown_progress(*, quiet: bool) -> Iterator[Progress]:
    """Give a callback that shows stages on standard error.

    Parameters
    ----------
    quiet : bool
        Show nothing.

    Yields
    ------
    callable
        Called with the stage, parts done and parts in all.
    """
    if quiet:
        yield _ignore
    elif sys.stderr.isatty() and os.environ.get("TERM") != "dumb":
        with _live() as tick:
            yield tick
    else:
        yield _PlainLines()


def _ignore(stage: str, done: int, total: int) -> None:
    del stage, done, total


class _PlainLines:
    """One line when a stage begins, with the seconds since the start."""

    def __init__(self) -> None:
        self._start = time.monotonic()
        self._stage = ""

    def __call__(self, stage: str, done: int, total: int) -> None:
        del done
        if stage != self._stage:
            self._stage = stage
            parts = f" ({total})" if total > 1 else ""
            click.echo(f"{time.monotonic() - self._start:6.1f} s  {stage}{parts}", err=True)


@contextmanager
def _live() -> Iterator[Progress]:
    """Show one line a stage: its name, how far it is, the time it took and the time it still needs."""
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, TextColumn, TimeElapsedColumn, TimeRemainingColumn
    from rich.progress import Progress as Bars

    columns = (
        TextColumn("{task.description:<18}", markup=False),
        BarColumn(bar_width=16),
        MofNCompleteColumn(),
        TimeElapsedColumn(),
        TimeRemainingColumn(elapsed_when_finished=False),
        TextColumn("left", style="progress.remaining"),
    )
    with Bars(*columns, console=Console(stderr=True), refresh_per_second=4) as bars:
        known: dict[str, int] = {}

        def tick(stage: str, done: int, total: int) -> None:
            if stage not in known:
                known[stage] = int(bars.add_task(stage, total=total))
            bars.update(bars.task_ids[known[stage]], completed=done, total=total)

        yield tick
