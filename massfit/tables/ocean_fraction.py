"""The quarter-degree ocean fraction that ships with the package."""

from importlib.resources import files

import numpy as np
from numpy.typing import NDArray

FINE_CELLS = 900
"""Cells of 30 arc-seconds in one cell of a quarter of a degree."""

REFERENCE = "global-land-mask 1.0.0, from the GLOBE 30-arc-second elevation model (Hastings & Dunbar 1999)"
"""Where the table comes from."""


def read_ocean_fraction() -> NDArray[np.float64]:
    """Read the area fraction of ocean on cells of a quarter of a degree.

    Marginal ice shelves are ocean; lakes and the Caspian are land.

    Returns
    -------
    (720, 1440) array
        Fraction, 0 to 1; the first row touches the north pole, the first column
        starts at 180 degrees west.

    Examples
    --------
    >>> read_ocean_fraction().shape
    (720, 1440)
    """
    with files("massfit.tables").joinpath("ocean_fraction.npz").open("rb") as stream, np.load(stream) as table:
        return np.asarray(table["count"] / FINE_CELLS, dtype=float)
