"""Red noise of one site: Ornstein-Uhlenbeck terms at fixed time scales, plus white.

The covariance of two days a time t apart is
``sum_j s_j^2 exp(-|t| / tau_j)``, and s_w^2 more for a day with itself. Sums of
exponentials are semiseparable, so that factor and solve cost O(n) and gaps cost
nothing (Foreman-Mackey et al. 2017). A few log-spaced time scales stand in for
flicker noise and its relatives.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from celerite2 import driver
from numpy.typing import NDArray
from scipy.special import ndtr, ndtri

from massfit.constants import PASCAL_PER_HPA
from massfit.settings import Priors

Floats = NDArray[np.float64]

RESOLUTION = 0.1
"""White noise that every daily mean has besides, Pa: a hundredth of a millimetre of water, below any instrument
(common practice). Without it a record free of noise has no finite likelihood."""

WHITE_FLOOR = 1e-3
"""Least white amplitude as a fraction of the largest amplitude: keeps the covariance of instruments that
share a day positive definite in double precision; far below the resolution of a daily mean."""


class NoiseCovariance:
    """Covariance of the noise on given days.

    Parameters
    ----------
    days : (n,) array
        Sorted, days; equal values are two instruments on one day.
    time_scales : (J,) array
        tau_j, days.
    amplitudes : (J + 1,) array
        s_j of the Ornstein-Uhlenbeck terms, then s_w, in the unit of the data.

    Examples
    --------
    >>> noise = NoiseCovariance(np.array([0.0, 1.0]), np.array([2.0]), np.array([1.0, 0.5]))
    >>> noise.multiply(np.eye(2)).round(4)
    array([[1.25  , 0.6065],
           [0.6065, 1.25  ]])
    """

    def __init__(self, days: Floats, time_scales: Floats, amplitudes: Floats) -> None:
        white = max(amplitudes[-1], WHITE_FLOOR * amplitudes.max())
        variances = amplitudes[:-1] ** 2
        self._days = np.ascontiguousarray(days, dtype=float)
        self._rates = 1.0 / np.asarray(time_scales, dtype=float)
        self._left = np.tile(variances, (len(days), 1))
        self._right = np.ones_like(self._left)
        self._diagonal = np.full(len(days), variances.sum() + white**2)

    @cached_property
    def _factor(self) -> tuple[Floats, Floats]:
        pivots, weights = driver.factor(
            self._days, self._rates, self._diagonal, self._left, self._right,
            self._diagonal.copy(), np.empty_like(self._right),
        )  # fmt: skip
        return pivots, weights

    @property
    def log_determinant(self) -> float:
        """Natural logarithm of the determinant."""
        return float(np.log(self._factor[0]).sum())

    def whiten(self, columns: Floats) -> Floats:
        """Columns with unit covariance: V^-1/2 times (n, k) columns."""
        pivots, weights = self._factor
        columns = np.ascontiguousarray(columns)
        solved = driver.solve_lower(self._days, self._rates, self._left, weights, columns, np.empty_like(columns))
        solved /= np.sqrt(pivots)[:, None]
        return np.asarray(solved)

    def solve(self, columns: Floats) -> Floats:
        """V^-1 times (n, k) columns."""
        pivots, weights = self._factor
        scaled = np.ascontiguousarray(self.whiten(columns) / np.sqrt(pivots)[:, None])
        upper = driver.solve_upper(self._days, self._rates, self._left, weights, scaled, np.empty_like(scaled))
        return np.asarray(upper)

    def multiply(self, columns: Floats) -> Floats:
        """V times (n, k) columns."""
        columns = np.ascontiguousarray(columns)
        arguments = (self._days, self._rates, self._left, self._right, columns)
        lower = driver.matmul_lower(*arguments, np.zeros_like(columns))
        upper = driver.matmul_upper(*arguments, np.zeros_like(columns))
        return np.asarray(self._diagonal[:, None] * columns + lower + upper)


@dataclass(frozen=True)
class NoisePriors:
    """Time scales of the noise terms and half-t priors of their amplitudes (Gelman 2006).

    Amplitudes are handled through their *scores* v, whose prior is standard normal:
    s = scale * Q((1 + Phi(v)) / 2), with Q the quantiles of Student's t with 4 degrees of
    freedom and Phi the normal distribution. A density in v is that in s times ds/dv by
    construction, and a term that is not needed falls off like a normal tail.

    Parameters
    ----------
    time_scales : (J,) array
        Days.
    scales : (J + 1,) array
        Scales of the half-t priors, Pa; white last.

    Examples
    --------
    >>> noise = NoisePriors(np.array([20.0]), np.array([50.0, 20.0]))
    >>> noise.amplitudes(np.zeros(2)).round(2)  # medians of the priors
    array([37.03, 14.81])
    """

    time_scales: Floats
    scales: Floats

    @classmethod
    def of(cls, priors: Priors) -> "NoisePriors":
        """Noise part of the settings."""
        red = [priors.red_noise_hpa] * len(priors.noise_time_scales_days)
        scales = np.array([*red, priors.white_noise_hpa]) * PASCAL_PER_HPA
        return cls(np.array(priors.noise_time_scales_days), scales)

    def amplitudes(self, scores: Floats) -> Floats:
        """Amplitudes, Pa, of (..., J + 1) scores."""
        # P(|t_4| < s) = (3 x - x^3) / 2 with x = s / sqrt(4 + s^2); a cubic with a root in sines.
        # Beyond seven sigma the normal distribution runs out of digits
        sine = 2.0 * np.sin(np.arcsin(ndtr(np.minimum(scores, 7.0))) / 3.0)
        return np.asarray(self.scales * 2.0 * sine / np.sqrt(1.0 - sine**2))

    def scores(self, amplitudes: Floats) -> Floats:
        """Scores of (..., J + 1) amplitudes in Pa: the inverse of `amplitudes`."""
        sine = amplitudes / np.hypot(amplitudes, 2.0 * self.scales)
        return np.asarray(ndtri(0.5 * (3.0 * sine - sine**3)))

    def covariance(self, days: Floats, scores: Floats) -> NoiseCovariance:
        """Covariance on given days at (J + 1,) scores."""
        amplitudes = self.amplitudes(scores)
        amplitudes[-1] = np.hypot(amplitudes[-1], RESOLUTION)
        return NoiseCovariance(days, self.time_scales, amplitudes)


def log_score_prior(scores: Floats) -> float:
    """Log prior density of scores, without its constant."""
    return float(-0.5 * np.sum(scores**2))
