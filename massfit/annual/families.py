"""Forms that the noise of a site may have, and the priors of their parameters.

Parameters are handled through *scores* v, whose prior is standard normal: a parameter is
the quantile of its prior at Phi(v). A density in v is that in the parameter times its
derivative by construction, and an amplitude that is not needed falls off like a normal tail.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr, ndtri

from massfit.annual.noise import RESOLUTION, NoiseModel
from massfit.constants import PASCAL_PER_HPA
from massfit.settings import Priors

Floats = NDArray[np.float64]

LADDER_STEP = 10.0
"""Largest ratio R of neighbouring time scales of the power law: the spectrum of equal terms ripples by
2 / cosh(pi^2 / ln R) about flicker noise, 5.5 % at 10."""

LADDER_REACH = 10.0
"""The ladder of the power law ends at so many times the longest time scale: terms beyond that of the year still carry
a tenth of flicker noise at the annual line, and half of noise as steep as a random walk."""

STEEPEST, FLATTEST = -2.0, -0.5
"""Range of the exponent of the spectrum of the power law, uniform; flicker noise has -1."""

SMOOTH_RATIO = 1.2
"""Ratio of the two rates of smooth noise; 1 is the Matern process of smoothness 3/2, which this is within 1 %."""

SMOOTH_MEMORY = 2.146193
"""Lag at which (1 + x) exp(-x) is 1/e."""


WHITE_SHARES, LEADING_SHARE = (0.5, 0.1, 0.01, 0.9), 0.9
"""Shares of the white noise in a variance, and of one term of a sum in what is left, from the best of which the search
for a mode begins."""


@dataclass(frozen=True)
class NoiseFamily:
    """One form of noise; its scores are those of the red noise, then that of the white noise.

    Parameters
    ----------
    form : str
        "white": none of it red. "exponential": an Ornstein-Uhlenbeck process (amplitude, time
        scale). "smooth": one driven by another, correlation (1 + x) exp(-x) (amplitude, lag at
        which it is 1/e). "power-law": spectrum of a free exponent (amplitude, exponent). "sum":
        an Ornstein-Uhlenbeck process at each time scale (amplitudes).
    time_scales : (J,) array
        Days; those of the sum, and the least and largest of all others.
    red_scale, white_scale : float
        Scales of the half-t priors (4 degrees of freedom; Gelman 2006) of the standard deviations, Pa.

    Examples
    --------
    >>> family = NoiseFamily("exponential", np.array([2.0, 200.0]), red_scale=50.0, white_scale=20.0)
    >>> family.size
    3
    >>> model = family.model(np.zeros(3), np.ones(1))  # medians of the priors
    >>> (1 / model.rates).round(6), np.sqrt(model.variances).round(2), model.white.round(2)
    (array([20.]), array([37.03]), array([14.81]))
    """

    form: str
    time_scales: Floats
    red_scale: float
    white_scale: float

    @property
    def size(self) -> int:
        """Number of scores."""
        return {"white": 1, "sum": 1 + len(self.time_scales)}.get(self.form, 3)

    def model(self, scores: Floats, white_ratio: Floats) -> NoiseModel:
        """Noise at given scores.

        Parameters
        ----------
        scores : (size,) array
        white_ratio : (D,) array
            White noise of each deployment over that of the site.

        Returns
        -------
        NoiseModel
        """
        rates, variances = self._red(scores[:-1])
        return NoiseModel(rates, variances, float(half_t(scores[-1], self.white_scale)) * white_ratio)

    def starts(self, sd: float) -> list[Floats]:
        """Scores at which white and red noise share a variance in several ways, each term of a sum leading in turn."""
        count = {"white": 0, "sum": self.size - 1}.get(self.form, 1)
        if not count:
            return [half_t_score(np.array([np.hypot(sd, RESOLUTION)]), self.white_scale)]
        starts = []
        for white in WHITE_SHARES:
            for lead in range(count):
                scores, red = np.zeros(self.size), np.full(count, (1.0 - LEADING_SHARE) / max(count - 1, 1))
                red[lead] = LEADING_SHARE if count > 1 else 1.0
                scores[:count] = half_t_score(np.hypot(sd * np.sqrt((1.0 - white) * red), RESOLUTION), self.red_scale)
                scores[-1] = half_t_score(np.hypot(sd * np.sqrt(white), RESOLUTION), self.white_scale)
                starts.append(scores)
        return starts

    def _red(self, scores: Floats) -> tuple[Floats, Floats]:
        if self.form == "white":
            return np.zeros(0), np.zeros(0)
        if self.form == "sum":
            return 1.0 / self.time_scales, half_t(scores, self.red_scale) ** 2
        variance, place = float(half_t(scores[0], self.red_scale)) ** 2, float(ndtr(scores[1]))
        low, high = self.time_scales.min(), self.time_scales.max()
        if self.form == "power-law":
            high *= LADDER_REACH
            times = np.geomspace(low, high, 1 + int(np.ceil(np.log(high / low) / np.log(LADDER_STEP) - 1e-9)))
            share = times ** -(1.0 + FLATTEST + place * (STEEPEST - FLATTEST))
            return 1.0 / times, variance * share / share.sum()
        rate = 1.0 / (low * (high / low) ** place)
        if self.form == "exponential":
            return np.array([rate]), np.array([variance])
        slow = SMOOTH_MEMORY * rate / np.sqrt(SMOOTH_RATIO)
        fast = slow * SMOOTH_RATIO
        return np.array([slow, fast]), variance * np.array([fast, -slow]) / (fast - slow)


def noise_families(priors: Priors) -> tuple[NoiseFamily, ...]:
    """Forms of noise that the settings compare."""
    scales = np.array(priors.noise_time_scales_days)
    red, white = priors.red_noise_hpa * PASCAL_PER_HPA, priors.white_noise_hpa * PASCAL_PER_HPA
    return tuple(NoiseFamily(form, scales, red, white) for form in dict.fromkeys(priors.noise_forms))


def half_t(scores: Floats, scale: float) -> Floats:
    """Quantiles of the half-t distribution with 4 degrees of freedom at Phi(scores).

    Examples
    --------
    >>> half_t(np.array([0.0]), 1.0).round(4)
    array([0.7407])
    """
    # P(|t_4| < s) = (3 x - x^3) / 2 with x = s / sqrt(4 + s^2); a cubic with a root in sines.
    # Beyond seven sigma the normal distribution runs out of digits
    sine = 2.0 * np.sin(np.arcsin(ndtr(np.minimum(scores, 7.0))) / 3.0)
    return np.asarray(scale * 2.0 * sine / np.sqrt(1.0 - sine**2))


def half_t_score(value: Floats | float, scale: float) -> Floats:
    """Scores of given quantiles: the inverse of `half_t`."""
    sine = value / np.hypot(value, 2.0 * scale)
    return np.asarray(ndtri(0.5 * (3.0 * sine - sine**3)))


def log_score_prior(scores: Floats) -> float:
    """Log prior density of scores.

    Examples
    --------
    >>> round(log_score_prior(np.zeros(2)), 4)
    -1.8379
    """
    return float(-0.5 * np.sum(scores**2) - 0.5 * len(scores) * np.log(2.0 * np.pi))
