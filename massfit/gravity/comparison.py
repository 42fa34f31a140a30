"""Two phasors side by side: whether they agree, and what they say together."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import chi2

from massfit.constants import TROPICAL_YEAR_DAYS
from massfit.phasor import as_complex, as_components, peak_days, polar_sd

COMPATIBLE_ABOVE = 0.05
"""Two determinations are put together where a difference as large has at least this probability."""


@dataclass(frozen=True, eq=False)
class Agreement:
    """Difference of two determinations and its size beside its error.

    Parameters
    ----------
    difference : complex
        First less second.
    covariance : (2, 2) array
        Of the difference.
    chi_square : float
        With 2 degrees of freedom.
    probability : float
        Of a chi-square at least as large.
    amplitude_difference, amplitude_difference_sd : float
        In the unit of the phasors.
    day_difference, day_difference_sd : float
        First less second, days, the shorter way around the year.
    joint_phasor : complex or None
        Mean weighted by the inverse covariances, where the two are compatible.
    joint_covariance : (2, 2) array or None
    """

    difference: complex
    covariance: NDArray[np.float64]
    chi_square: float
    probability: float
    amplitude_difference: float
    amplitude_difference_sd: float
    day_difference: float
    day_difference_sd: float
    joint_phasor: complex | None
    joint_covariance: NDArray[np.float64] | None

    @property
    def compatible(self) -> bool:
        """Whether the two may be put together."""
        return self.joint_phasor is not None


def agreement(
    first: complex, first_covariance: NDArray[np.float64], second: complex, second_covariance: NDArray[np.float64]
) -> Agreement:
    """Compare two determinations whose errors are independent.

    Parameters
    ----------
    first, second : complex
        In one unit and one phase convention.
    first_covariance, second_covariance : (2, 2) array

    Returns
    -------
    Agreement

    Examples
    --------
    >>> found = agreement(1.0 + 0j, 0.01 * np.eye(2), 0.8 + 0j, 0.01 * np.eye(2))
    >>> round(found.chi_square, 3), round(found.probability, 3), round(found.joint_phasor.real, 3)
    (2.0, 0.368, 0.9)
    """
    z = as_components(np.array([first, second]))
    step = z[0] - z[1]
    covariance = first_covariance + second_covariance
    chi_square = float(step @ np.linalg.solve(covariance, step))
    probability = float(chi2.sf(chi_square, df=2))
    sizes, days = np.abs([first, second]), peak_days(np.array([first, second]))
    sds = np.array([polar_sd(first, first_covariance), polar_sd(second, second_covariance)])
    joint, joint_covariance = None, None
    if probability >= COMPATIBLE_ABOVE:
        weights = np.linalg.inv(first_covariance), np.linalg.inv(second_covariance)
        joint_covariance = np.linalg.inv(weights[0] + weights[1])
        joint = complex(as_complex(joint_covariance @ (weights[0] @ z[0] + weights[1] @ z[1])))
    half = TROPICAL_YEAR_DAYS / 2.0
    return Agreement(
        complex(as_complex(step)), covariance, chi_square, probability,
        float(sizes[0] - sizes[1]), float(np.hypot(*sds[:, 0])),
        float((days[0] - days[1] + half) % TROPICAL_YEAR_DAYS - half), float(np.hypot(*sds[:, 1])),
        joint, joint_covariance,
    )  # fmt: skip
