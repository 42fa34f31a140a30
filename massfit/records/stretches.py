"""Stretches of a long record, worked on one after another so that what is made on the way stays in the cache."""

from collections.abc import Iterator

AT_ONCE = 100_000
"""Samples of a stretch."""


def stretches(count: int) -> Iterator[slice]:
    """Slices that cover so many samples.

    Parameters
    ----------
    count : int

    Yields
    ------
    slice

    Examples
    --------
    >>> [part.stop - part.start for part in stretches(250_000)]
    [100000, 100000, 50000]
    """
    for first in range(0, count, AT_ONCE):
        yield slice(first, min(first + AT_ONCE, count))
