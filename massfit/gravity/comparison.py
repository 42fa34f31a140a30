"""Two phasors side by side: whether they agree, and what they say together."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import chi2

from massfit.constants import ANNUAL_RATE, TROPICAL_YEAR_DAYS
from massfit.phasor import as_complex, as_components, peak_days
from massfit.posterior.network_model import inflation

Floats = NDArray[np.float64]

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
        With 2 degrees of freedom; NaN where one of the two states no error, as everything below that needs one.
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
    def compatible(self) -> bool | None:
        """Whether the two may be put together; None where one of them states no error."""
        return None if np.isnan(self.probability) else self.joint_phasor is not None


def agreement(
    first: complex,
    first_covariance: Floats,
    second: complex,
    second_covariance: Floats,
    *,
    shared: Floats | None = None,
    weighed: bool = True,
) -> Agreement:
    """Compare two determinations.

    Parameters
    ----------
    first, second : complex
        In one unit and one phase convention.
    first_covariance, second_covariance : (2, 2) array
    shared : (2, 2) array, optional
        Covariance of the errors of the first (rows) with those of the second (columns); none by default.
    weighed : bool
        False where one of the two states no error: then only the difference is given, the rest is NaN.

    Returns
    -------
    Agreement

    Examples
    --------
    >>> found = agreement(1.0 + 0j, 0.01 * np.eye(2), 0.8 + 0j, 0.01 * np.eye(2))
    >>> round(found.chi_square, 3), round(found.probability, 3), round(found.joint_phasor.real, 3)
    (2.0, 0.368, 0.9)

    An error that both share is not in the difference, and stays in the mean:

    >>> half = agreement(1.0 + 0j, 0.01 * np.eye(2), 0.8 + 0j, 0.01 * np.eye(2), shared=0.005 * np.eye(2))
    >>> round(half.chi_square, 3), round(float(half.joint_covariance[0, 0]), 4)
    (4.0, 0.0075)
    """
    z = as_components(np.array([first, second]))
    step = z[0] - z[1]
    both = np.zeros((2, 2)) if shared is None else shared
    covariance = first_covariance + second_covariance - both - both.T
    sizes, days = np.abs([first, second]), peak_days(np.array([first, second]))
    half = TROPICAL_YEAR_DAYS / 2.0
    day_difference = float((days[0] - days[1] + half) % TROPICAL_YEAR_DAYS - half)
    if not weighed:
        return Agreement(
            complex(as_complex(step)), covariance, np.nan, np.nan,
            float(sizes[0] - sizes[1]), np.nan, day_difference, np.nan, None, None,
        )  # fmt: skip
    chi_square = float(step @ np.linalg.solve(covariance, step))
    probability = float(chi2.sf(chi_square, df=2))
    amplitude_sd, day_sd = _polar_difference_sd((first, second), (first_covariance, second_covariance), both)
    joint, joint_covariance = None, None
    if probability >= COMPATIBLE_ABOVE:
        # generalised least squares of two measurements of one phasor
        gain = np.linalg.solve(covariance, (first_covariance - both).T).T
        joint = complex(as_complex(z[0] - gain @ step))
        joint_covariance = first_covariance - gain @ (first_covariance - both).T
    return Agreement(
        complex(as_complex(step)), covariance, chi_square, probability,
        float(sizes[0] - sizes[1]), amplitude_sd, day_difference, day_sd, joint, joint_covariance,
    )  # fmt: skip


def _polar_difference_sd(
    phasors: tuple[complex, complex], covariances: tuple[Floats, Floats], shared: Floats
) -> tuple[float, float]:
    """Errors of the differences of amplitude and of day, to first order."""
    along = [as_components(phasor / abs(phasor)) for phasor in phasors]
    across = [as_components(1j * phasor / abs(phasor) ** 2 / ANNUAL_RATE) for phasor in phasors]

    def sd(one: Floats, other: Floats) -> float:
        variance = one @ covariances[0] @ one + other @ covariances[1] @ other - 2.0 * one @ shared @ other
        return float(np.sqrt(np.maximum(variance, 0.0)))

    return sd(*along), sd(*across)


def shared_covariance(first: NDArray[np.complex128], second: NDArray[np.complex128]) -> Floats:
    """Covariance of two determinations that the same load members convert.

    Parameters
    ----------
    first, second : (K,) array of complex
        Each as every member in turn converts it.

    Returns
    -------
    (2, 2) array
        Inflated as the spread of either is; zero for one member.

    Examples
    --------
    >>> members = np.array([1.0 + 0j, 1.2 + 0j, 1.1 + 0j])
    >>> round(float(shared_covariance(members, 2.0 * members)[0, 0]), 4)
    0.0267
    """
    one, other = (as_components(each - each.mean()) for each in (first, second))
    return np.asarray(one.T @ other / len(first) * inflation(len(first)))
