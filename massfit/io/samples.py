"""What a record file holds, before it becomes a Record."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.records.record import Action


@dataclass(frozen=True)
class Samples:
    """Samples of one instrument in the order of the file.

    Parameters
    ----------
    time : (n,) array of datetime64[ns]
        UTC stamps.
    pressure : (n,) array of float64
        Pa, absolute or not; NaN is missing.
    centred : bool
        Whether the stamps are known to be the middles of the intervals.
    actions : tuple of Action
        What was done while reading.
    units : str
        Unit in which the file was read.
    """

    time: NDArray[np.datetime64]
    pressure: NDArray[np.float64]
    centred: bool = False
    actions: tuple[Action, ...] = ()
    units: str = ""
