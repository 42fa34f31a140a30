"""What is guessed about a record file: a value with its evidence, or what has to be filled in."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np


@dataclass(frozen=True)
class Guess:
    """The value of one key of the network file.

    Parameters
    ----------
    value : object
        As TOML knows it; None where it cannot be guessed and is left to the analyst.
    evidence : str
        Why; or, where there is no value, what is wanted and what is known about it.
    """

    value: Any
    evidence: str


@dataclass(frozen=True)
class RecordGuess:
    """One deployment, as far as its file tells.

    Parameters
    ----------
    file : str
        Relative to the folder.
    name : str
        What the site may be called, before files are grouped.
    keys : mapping of str to Guess
        Of `[[site.deployment]]`, in the order they are written.
    place : mapping of str to Guess
        Of `[[site]]`: any of id, latitude, longitude, depth_m.
    span : tuple of datetime64, optional
        First and last stamp.
    sampling_s : float, optional
        Median interval between samples, s.
    notes : tuple of str
        What else was noticed.
    """

    file: str
    name: str
    keys: Mapping[str, Guess]
    place: Mapping[str, Guess] = field(default_factory=dict)
    span: tuple[np.datetime64, np.datetime64] | None = None
    sampling_s: float | None = None
    notes: tuple[str, ...] = ()


def fill_in(wanted: str) -> Guess:
    """Leave a key to the analyst.

    Parameters
    ----------
    wanted : str
        What is wanted, and what is known about it.
    """
    return Guess(None, wanted)


def spoken_interval(seconds: float) -> str:
    """Name an interval of time in the unit it is spoken of.

    Examples
    --------
    >>> spoken_interval(900.0), spoken_interval(86400.0), spoken_interval(3600.0)
    ('15 min', '1 d', '1 h')
    """
    for unit, length in (("d", 86_400.0), ("h", 3_600.0), ("min", 60.0)):
        if seconds >= length and (seconds % length == 0.0 or seconds >= 10 * length):
            return f"{seconds / length:.4g} {unit}"
    return f"{seconds:.4g} s"
