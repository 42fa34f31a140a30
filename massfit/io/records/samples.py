"""What a record file holds, before it becomes a Record."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from massfit.io.records.deployment import DeploymentFile
from massfit.records.record import Action
from massfit.records.stretches import stretches

COARSE = "resolution is limited"
"""What is said of single-precision numbers that are too large for it."""
_COARSE_PA = 1.0
"""A step of single-precision numbers above this is worth a word, Pa."""


@dataclass(frozen=True)
class Flags:
    """Quality flags of the samples.

    Parameters
    ----------
    name : str
        Variable or column.
    values : (n,) array of float64
        Whole numbers; NaN where a sample has no flag.
    meanings : mapping of int to str
        What the file says of them; empty where it says nothing.
    """

    name: str
    values: NDArray[np.float64]
    meanings: Mapping[int, str] = field(default_factory=dict)


@dataclass(frozen=True)
class Samples:
    """Samples of one instrument in the order of the file.

    Parameters
    ----------
    time : (n,) array of datetime64[ns]
        Stamps.
    pressure : (n,) array of float64
        Pa, absolute or not; NaN is missing.
    centred : bool
        Whether the stamps are known to be the middles of the intervals.
    actions : tuple of Action
        What was done while reading.
    units : str
        Unit in which the file was read.
    flags : tuple of Flags
        Not yet used to leave samples out.
    """

    time: NDArray[np.datetime64]
    pressure: NDArray[np.float64]
    centred: bool = False
    actions: tuple[Action, ...] = ()
    units: str = ""
    flags: tuple[Flags, ...] = ()


def in_pascal(stored: NDArray[Any], entry: DeploymentFile, factor: float) -> NDArray[np.float64]:
    """Pressure from the numbers of a file: missing ones to NaN, then scale factor, offset and unit.

    Parameters
    ----------
    stored : (n,) array
        Any kind of number.
    entry : DeploymentFile
        Its `missing`, `scale_factor` and `add_offset`.
    factor : float
        Pa in one unit.

    Returns
    -------
    (n,) array of float64
        Pa.

    Examples
    --------
    >>> in_pascal(np.array([-150970000, 0]), DeploymentFile("a.mat", missing=(0.0,), scale_factor=-1e-5), 1.0).tolist()
    [1509.7, nan]
    """
    # a code such as -999.9 is another number in single precision
    codes = np.asarray(entry.missing, dtype=stored.dtype if stored.dtype.kind == "f" else np.float64)
    values = stored.astype(np.float64)  # the one copy of a record that may be long
    if codes.size:
        values[np.isin(stored, codes)] = np.nan
    for operation, number in ((np.multiply, entry.scale_factor), (np.add, entry.add_offset), (np.multiply, factor)):
        if number != (0.0 if operation is np.add else 1.0):
            operation(values, number, out=values)
    return values


def coarse(stored: NDArray[Any], factor: float) -> tuple[Action, ...]:
    """Say how little single-precision numbers of this size resolve, where that is worth a word.

    Parameters
    ----------
    stored : (n,) array
    factor : float
        Pa in one of them.
    """
    if stored.dtype != np.float32:
        return ()
    count, largest, flat = 0, np.float32(0.0), stored.ravel()
    for part in stretches(flat.size):
        size = np.abs(flat[part])
        valid = size < 1.0e9  # a pressure, and no fill value
        count += int(np.count_nonzero(valid))
        largest = max(largest, size.max(initial=0.0, where=valid))
    step = float(np.spacing(largest)) * abs(factor)
    if not count or step <= _COARSE_PA:
        return ()
    detail = f"single-precision numbers of this size resolve {step:.1f} Pa only"
    return (Action(COARSE, count, detail),)
