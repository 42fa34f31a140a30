"""Ellipses of two-dimensional normal distributions."""

from typing import Any

import numpy as np
from matplotlib.patches import Ellipse
from numpy.typing import NDArray


def normal_ellipse(centre: NDArray[np.float64], covariance: NDArray[np.float64], sigmas: float, **look: Any) -> Ellipse:
    """Draw the contour of a normal distribution.

    Parameters
    ----------
    centre : (2,) array
    covariance : (2, 2) array
    sigmas : float
        Half the axes in standard deviations; sqrt(-2 ln(1 - p)) encloses the probability p.
    **look
        Of the patch.

    Returns
    -------
    matplotlib.patches.Ellipse
    """
    values, vectors = np.linalg.eigh(covariance)
    size = 2.0 * sigmas * np.sqrt(np.maximum(values, 0.0))
    angle = float(np.degrees(np.arctan2(vectors[1, 0], vectors[0, 0])))
    return Ellipse((centre[0], centre[1]), size[0], size[1], angle=angle, **look)
