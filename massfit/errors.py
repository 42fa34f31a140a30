"""The errors massfit raises on purpose, each carrying its data."""

from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass

_STEERING = {*range(0x20), *range(0x7F, 0xA0), 0x2028, 0x2029, *range(0x202A, 0x202F), *range(0x2066, 0x206A)}
_ESCAPES = {code: f"\\x{code:02x}" if code < 0x100 else f"\\u{code:04x}" for code in _STEERING}


def printable(text: str) -> str:
    r"""Write out the characters that would steer a terminal or turn the direction of text.

    Parameters
    ----------
    text : str
        For example a name from a file.

    Returns
    -------
    str
        With control characters and marks of direction (Unicode Standard Annex 9) as escapes.

    Examples
    --------
    >>> print(printable("site\x1b[2J"))
    site\x1b[2J
    """
    return text.translate(_ESCAPES)


class MassfitError(Exception):
    """Base of every error that massfit raises on purpose."""


@dataclass(frozen=True)
class Fault:
    """One thing that is wrong with the user's input.

    Parameters
    ----------
    source : str
        File (as the user wrote it) or object that holds the fault.
    name : str
        Key, variable, column or site concerned.
    problem : str
        What was found, with the value.
    allowed : str
        What is allowed.
    action : str
        What to do about it.
    line : int, optional
        Line in `source`, counted from 1.
    """

    source: str
    name: str
    problem: str
    allowed: str = ""
    action: str = ""
    line: int | None = None

    def __str__(self) -> str:
        place = self.source if self.line is None else f"{self.source}:{self.line}"
        sentences = [self.problem, self.allowed, self.action]
        text = " ".join(s if s.endswith((".", "?", "!")) else s + "." for s in sentences if s)
        return printable(f"{place}: {self.name}: {text}" if self.name else f"{place}: {text}")


class InputError(MassfitError):
    """The user's input is wrong; holds every fault that was found.

    Parameters
    ----------
    faults : Fault or iterable of Fault
        All faults, in the order a reader meets them.

    Examples
    --------
    >>> error = InputError([Fault("network.toml", "site[A3].latitude", "the value is 95", "Must be within [-90, 90]")])
    >>> [fault.name for fault in error.faults]
    ['site[A3].latitude']
    """

    def __init__(self, faults: Fault | Iterable[Fault]) -> None:
        self.faults: tuple[Fault, ...] = (faults,) if isinstance(faults, Fault) else tuple(faults)
        super().__init__("\n".join(str(fault) for fault in self.faults))

    def __reduce__(self) -> tuple[type["InputError"], tuple[tuple[Fault, ...]]]:
        return (InputError, (self.faults,))


@contextmanager
def collect(faults: list[Fault]) -> Iterator[None]:
    """Add the faults of a block to a list instead of raising them.

    Parameters
    ----------
    faults : list of Fault
        Extended in place.

    Examples
    --------
    >>> faults = []
    >>> with collect(faults):
    ...     raise InputError(Fault("a.nc", "p", "the variable is missing"))
    >>> len(faults)
    1
    """
    try:
        yield
    except InputError as error:
        faults.extend(error.faults)


class ConvergenceError(MassfitError):
    """An iteration did not reach its tolerance.

    Parameters
    ----------
    what : str
        The iteration.
    reached, tolerance : float
        Relative change reached and allowed.
    """

    def __init__(self, what: str, reached: float, tolerance: float) -> None:
        self.what, self.reached, self.tolerance = what, reached, tolerance
        super().__init__(f"{what} stopped at a relative change of {reached:.3g}; allowed is {tolerance:.3g}.")
