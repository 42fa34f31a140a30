"""How long a recorder must stay: error of the site and of the network against the years of record."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from massfit.annual.noise import NoiseModel
from massfit.settings import Priors
from massfit.siting.planned_noise import record_covariance

Floats = NDArray[np.float64]

YEARS = (0.5, 0.75, 1.0, 1.25, 1.5, 1.75, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0, 10.0)
"""Lengths of the curve."""


def record_length_curve(noise: NoiseModel, priors: Priors, *, years: Sequence[float] = YEARS) -> Floats:
    """Give the standard deviation of a component of the phasor of one recorder by the years that it records.

    Parameters
    ----------
    noise : NoiseModel
    priors : Priors
    years : sequence of float

    Returns
    -------
    (n,) array
        Pa.

    Examples
    --------
    >>> noise = NoiseModel(np.array([0.05]), np.array([100.0**2]), np.array([30.0]))
    >>> one, two = record_length_curve(noise, Priors(), years=(1.0, 2.0))
    >>> bool(2.0 < one / two < 4.0)  # the first year is mostly spent on the drift
    True
    """
    return np.sqrt([record_covariance(noise, length, priors)[0, 0] for length in years])


def years_needed(years: Sequence[float], sd: Floats, target: float) -> float:
    """Years of record at which an error falls to a target.

    Parameters
    ----------
    years : sequence of float
        Rising.
    sd : (n,) array
        The error at each.
    target : float
        In the unit of `sd`.

    Returns
    -------
    float
        Between two lengths by straight lines in the logarithms; the first length where even that is enough, infinity
        where the last is not.

    Examples
    --------
    >>> years_needed([1.0, 4.0], np.array([20.0, 10.0]), 14.142135623730951).__round__(6)
    2.0
    >>> years_needed([1.0, 4.0], np.array([20.0, 10.0]), 5.0)
    inf
    """
    low = np.minimum.accumulate(sd)
    if low[-1] > target:
        return float("inf")
    right = int(np.argmax(low <= target))
    if right == 0:
        return float(years[0])
    share = np.log(low[right - 1] / target) / np.log(low[right - 1] / low[right])
    return float(years[right - 1] * (years[right] / years[right - 1]) ** share)
