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

    Examples
    --------
    Water on a belt of the northern mid-latitudes, most at the end of March:

    >>> latitude, longitude = np.arange(-87.5, 90.0, 5.0), np.arange(2.5, 360.0, 5.0)
    >>> belt = np.where(abs(latitude - 55.0) < 15.0, 60.0 * np.exp(2j * np.pi * 88 / 365.2422), 0.0)
    >>> pattern = LoadPattern("belt", latitude, longitude, np.repeat(belt[:, None], longitude.size, axis=1))
    >>> pattern.values.shape
    (36, 72)
    """

    name: str
    latitude_deg: NDArray[np.float64]
    longitude_deg: NDArray[np.float64]
    values: NDArray[np.complex128]
    reference: str = ""
