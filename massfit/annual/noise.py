"""Noise of one site with every number fixed: red noise of the place, white noise of each recorder.

The covariance of two days a time t apart is ``sum_j v_j exp(-r_j |t|)``, and w_d^2 more for
a day of recorder d with itself. Sums of exponentials are semiseparable, so that factor and
solve cost O(n) and gaps cost nothing (Foreman-Mackey et al. 2017).
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from celerite2 import driver
from numpy.typing import NDArray

Floats = NDArray[np.float64]

RESOLUTION = 0.1
"""White noise that every daily mean has besides, Pa: a hundredth of a millimetre of water, below any instrument
(common practice). Without it a record free of noise has no finite likelihood."""

WHITE_FLOOR = 1e-3
"""Least white noise as a fraction of the red: keeps the covariance of instruments that share a day positive
definite in double precision; far below the resolution of a daily mean."""


@dataclass(frozen=True)
class NoiseModel:
    """Noise of one site, every number fixed.

    Parameters
    ----------
    rates : (J,) array
        Decay rates r_j of the red terms, per day.
    variances : (J,) array
        v_j, Pa^2; a negative one belongs to a pair whose sum is a covariance.
    white : (D,) array
        Standard deviation of the white noise of a daily mean of each deployment, Pa.

    Examples
    --------
    >>> model = NoiseModel(np.array([0.05]), np.array([900.0]), np.array([10.0]))
    >>> model.red_sd
    30.0
    """

    rates: Floats
    variances: Floats
    white: Floats

    @property
    def red_sd(self) -> float:
        """Standard deviation of the red noise, Pa."""
        return float(np.sqrt(max(self.variances.sum(), 0.0)))

    @property
    def memory_days(self) -> float:
        """Integral of the correlation of the red noise over positive lags, days; 0 without red noise."""
        total = self.variances.sum()
        return float(np.sum(self.variances / self.rates) / total) if total > 0.0 else 0.0

    def change(self, days: float) -> float:
        """Mean squared change of the red noise over a time, Pa^2."""
        return float(2.0 * np.sum(self.variances * -np.expm1(-self.rates * days)))

    def spectrum(self, cycles_per_day: Floats) -> Floats:
        """One-sided power density of daily means of red and mean white noise: (F,), Pa^2 day.

        The density of every term is that of its daily samples, aliases included, so that it
        integrates to the variance between 0 and half a cycle a day.

        Parameters
        ----------
        cycles_per_day : (F,) array

        Returns
        -------
        (F,) array
        """
        keep = np.exp(-self.rates)
        cosine = np.cos(2.0 * np.pi * np.asarray(cycles_per_day))[:, None]
        red = 2.0 * self.variances * (1.0 - keep**2) / (1.0 - 2.0 * keep * cosine + keep**2)
        return np.asarray(red.sum(axis=1) + 2.0 * np.mean(self.white**2))


class NoiseCovariance:
    """Covariance of the noise on given days.

    Parameters
    ----------
    days : (n,) array
        Sorted, days; equal values are two instruments on one day.
    instrument : (n,) array of int
        Deployment of each day.
    model : NoiseModel
    apart : (n,) array, optional
        Standard deviation of an observation that shares no noise with any other, Pa; NaN elsewhere.

    Examples
    --------
    >>> model = NoiseModel(np.array([0.5]), np.array([1.0]), np.array([0.5, 2.0]))
    >>> noise = NoiseCovariance(np.array([0.0, 1.0]), np.array([0, 1]), model)
    >>> noise.multiply(np.eye(2)).round(4)
    array([[1.26  , 0.6065],
           [0.6065, 5.01  ]])
    """

    def __init__(
        self, days: Floats, instrument: NDArray[np.int64], model: NoiseModel, apart: Floats | None = None
    ) -> None:
        # the factorisation wants a term: without red noise one of no size
        present = len(model.rates) > 0
        variances = model.variances if present else np.zeros(1)
        least = RESOLUTION**2 + WHITE_FLOOR**2 * max(variances.sum(), 0.0)
        self._days = np.ascontiguousarray(days, dtype=float)
        self._rates = np.ascontiguousarray(model.rates if present else np.ones(1), dtype=float)
        self._left = np.tile(variances, (len(days), 1))
        self._right = np.ones_like(self._left)
        self._diagonal = variances.sum() + (model.white**2 + least)[instrument]
        if apart is not None and not np.isnan(apart).all():
            alone = ~np.isnan(apart)
            self._left[alone], self._right[alone] = 0.0, 0.0
            self._diagonal[alone] = apart[alone] ** 2

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

    def color(self, columns: Floats) -> Floats:
        """Give (n, k) columns the covariance: V^1/2 times them, the inverse of `whiten`."""
        pivots, weights = self._factor
        scaled = np.ascontiguousarray(columns * np.sqrt(pivots)[:, None])
        lower = driver.matmul_lower(self._days, self._rates, self._left, weights, scaled, np.zeros_like(scaled))
        return np.asarray(scaled + lower)

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
