"""Finished parts of a stage, kept so that an interrupted run need not compute them again."""

from collections.abc import Callable, Iterable, Iterator, Sequence
from typing import Any, Protocol, TypeVar

from massfit.pipeline.digest import digest

Part = TypeVar("Part")
Result = TypeVar("Result")
Mapped = Callable[[Callable[[Any], Any], Sequence[Any]], Iterable[Any]]


class Store(Protocol):
    """Keeps the results of finished parts under the digest of all that they depend on."""

    def get(self, key: str) -> Any | None:
        """Give what was kept under a key; None where nothing sound is."""

    def put(self, key: str, value: Any) -> Any:
        """Keep a value and give it back as a later `get` will: the same bits in the same layout."""


def kept(mapped: Mapped, store: Store | None) -> Mapped:
    """Let a way of applying a function to parts keep what is finished, and compute only what is not.

    Parameters
    ----------
    mapped : callable
        Applies a function to each of a sequence and gives the results in order.
    store : Store or None
        With None everything is computed and nothing kept.

    Returns
    -------
    callable
        Like `mapped`. A part must hold everything its result depends on.

    Examples
    --------
    >>> class Memory(dict):
    ...     def put(self, key, value):
    ...         self[key] = value
    ...         return value
    >>> memory = Memory()
    >>> list(kept(map, memory)(abs, [-1, 2])), list(kept(map, memory)(abs, [-1, 2, -3])), len(memory)
    ([1, 2], [1, 2, 3], 3)
    """
    return mapped if store is None else lambda function, parts: _kept(mapped, store, function, parts)


def _kept(mapped: Mapped, store: Store, function: Callable[[Part], Result], parts: Sequence[Part]) -> Iterator[Result]:
    # digests first: a part may hold a random generator, which moves on when it is used
    keys = [digest((function, part)) for part in parts]
    found = [store.get(key) for key in keys]
    missing = [part for part, result in zip(parts, found, strict=True) if result is None]
    computed = iter(mapped(function, missing))
    for key, result in zip(keys, found, strict=True):
        yield store.put(key, next(computed)) if result is None else result
