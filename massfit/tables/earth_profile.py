"""The table of the reference Earth profile."""

from importlib.resources import files

import numpy as np
from numpy.typing import NDArray


def read_prem_polynomials() -> NDArray[np.float64]:
    """Read the layers of PREM as cubic polynomials of the relative radius.

    Returns
    -------
    (12, 14) array
        One row a layer from the centre up: lower and upper radius in km, then the four coefficients
        of density (g cm-3), compressional speed and shear speed (km s-1) in x = r / 6371 km.

    Notes
    -----
    Dziewonski & Anderson (1981), table I, isotropic form at 1 s.

    Examples
    --------
    >>> read_prem_polynomials()[0, 1]
    np.float64(1221.5)
    """
    text = files("massfit.tables").joinpath("prem_polynomials.csv").read_text(encoding="utf-8")
    rows = [line for line in text.splitlines() if line and not line.startswith("#")]
    return np.array([[float(value) for value in row.split(",")] for row in rows[1:]])
