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
