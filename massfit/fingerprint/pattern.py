"""A load pattern: an annual phasor of mass per area on a regular grid."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class LoadPattern:
    """Annual phasor of a quantity on a regular global grid of cells.

    Parameters
    ----------
    name : str
        Member name; unique in the ensemble.
    latitude_deg : (n_lat,) array
        Cell centres, degrees north, monotonic, equally spaced.
    longitude_deg : (n_lon,) array
        Cell centres, degrees east, monotonic, equally spaced, covering the circle once.
    values : (n_lat, n_lon) array of complex
        Phasor, kg m-2 of whole-cell area (Pa for an air-pressure pattern); no NaN.
    reference : str
        Where the pattern comes from.
    """

    name: str
    latitude_deg: NDArray[np.float64]
    longitude_deg: NDArray[np.float64]
    values: NDArray[np.complex128]
    reference: str = ""
