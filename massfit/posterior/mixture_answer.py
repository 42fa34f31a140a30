"""Amplitude and peak day of a mixture of normal distributions, without any random number."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.constants import TROPICAL_YEAR_DAYS
from massfit.posterior.importance import ScalePosterior
from massfit.posterior.network_model import inflation

Floats = NDArray[np.float64]

COMPONENTS = 24
"""Normal components that stand for the nodes of a load member."""

_REACH = 7.0  # standard deviations
_RINGS, _RAYS = 112, 80


@dataclass(frozen=True)
class Mixture:
    """A mixture of normal distributions of the network phasor.

    Parameters
    ----------
    weight : (n,) array
        Sum 1.
    mean : (n, 2) array
    covariance : (n, 2, 2) array
    """

    weight: Floats
    mean: Floats
    covariance: Floats

    def moments(self) -> tuple[Floats, Floats]:
        """Mean (2,) and covariance (2, 2)."""
        centre = self.weight @ self.mean
        shift = self.mean - centre
        within = np.einsum("n,nij->ij", self.weight, self.covariance)
        return centre, within + (self.weight[:, None] * shift).T @ shift

    def density(self, points: Floats) -> Floats:
        """Density (n_point,) at points (n_point, 2)."""
        inverse = np.linalg.inv(self.covariance)
        height = self.weight / (2.0 * np.pi * np.sqrt(np.linalg.det(self.covariance)))
        total = np.zeros(len(points))
        for h, centre, precision in zip(height, self.mean, inverse, strict=True):
            away = points - centre
            total += h * np.exp(-0.5 * np.einsum("pi,ij,pj->p", away, precision, away))
        return total


def pooled_mixture(posteriors: Sequence[ScalePosterior]) -> Mixture:
    """Pool the load members, their means apart by their inflated spread, each as a few normal components.

    Parameters
    ----------
    posteriors : sequence of ScalePosterior
        One a load member.

    Returns
    -------
    Mixture
        Mean and covariance are those of the nodes exactly. Nodes of like width are one component: what the scales
        change is the width above all.
    """
    means = np.array([posterior.mean for posterior in posteriors])
    apart = (np.sqrt(inflation(len(posteriors))) - 1.0) * (means - means.mean(axis=0))
    parts = [_components(posterior, shift) for posterior, shift in zip(posteriors, apart, strict=True)]
    weight, mean, covariance = (np.concatenate([part[k] for part in parts]) for k in range(3))
    return Mixture(weight / len(posteriors), mean, covariance)


def _components(posterior: ScalePosterior, shift: Floats) -> tuple[Floats, Floats, Floats]:
    size = np.log(np.trace(posterior.node_covariance, axis1=1, axis2=2))
    centre = posterior.weight @ size
    spread = max(float(np.sqrt(posterior.weight @ (size - centre) ** 2)), 1e-9)
    # each node is shared between the two components next to it
    place = np.clip((size - centre) / spread + 4.0, 0.0, 8.0) * (COMPONENTS - 1) / 8.0
    share = np.maximum(1.0 - np.abs(place - np.arange(COMPONENTS)[:, None]), 0.0) * posterior.weight
    share = share[share.sum(axis=1) > 1e-12]
    total = share.sum(axis=1)
    mean = share @ posterior.node_mean / total[:, None]
    away = posterior.node_mean - mean[:, None]
    covariance = np.einsum("cn,nij->cij", share, posterior.node_covariance)
    covariance += np.einsum("cn,cni,cnj->cij", share, away, away)
    return total / total.sum(), mean + shift, covariance / total[:, None, None]


def amplitude_and_day(mixture: Mixture) -> tuple[dict[str, float | list[float]], dict[str, float | list[float]]]:
    """Median, mean, standard deviation and equal-tailed regions of amplitude and peak day.

    Parameters
    ----------
    mixture : Mixture

    Returns
    -------
    amplitude : dict
        In the unit of the mixture.
    day : dict
        Days after 1 January; the median in [0, 365.2422), the regions do not wrap.

    Notes
    -----
    By the midpoint rule on cells in amplitude and phase that reach seven standard deviations from the mean.

    Examples
    --------
    >>> narrow = Mixture(np.ones(1), np.array([[0.0, 2.0]]), np.array([[[1e-4, 0.0], [0.0, 1e-4]]]))
    >>> amplitude, day = amplitude_and_day(narrow)
    >>> round(amplitude["median"], 3), round(day["median"], 2), round(365.2422 / 4, 2)
    (2.0, 91.31, 91.31)
    """
    centre, covariance = mixture.moments()
    distance, reach = float(np.hypot(*centre)), _REACH * float(np.sqrt(np.linalg.eigvalsh(covariance)[-1]))
    half = float(np.arcsin(reach / distance)) if reach < distance else np.pi
    low = max(0.0, distance - reach)
    step, turn = (distance + reach - low) / _RINGS, 2.0 * half / _RAYS
    rings = low + step * (np.arange(_RINGS) + 0.5)
    phases = np.arctan2(centre[1], centre[0]) - half + turn * (np.arange(_RAYS) + 0.5)
    points = rings[:, None, None] * np.stack([np.cos(phases), np.sin(phases)], axis=-1)
    mass = mixture.density(points.reshape(-1, 2)).reshape(_RINGS, _RAYS) * rings[:, None]
    mass /= mass.sum()
    days = TROPICAL_YEAR_DAYS / (2.0 * np.pi)
    amplitude = _summary(mass.sum(axis=1), low, step)
    day = _summary(mass.sum(axis=0), days * (phases[0] - 0.5 * turn), days * turn)
    return amplitude, _from_new_year(day)


def _summary(mass: Floats, low: float, step: float) -> dict[str, float | list[float]]:
    """Summarise the masses (n,) of cells of a width, the first beginning at `low`."""
    middles = low + step * (np.arange(len(mass)) + 0.5)
    mean = float(mass @ middles)
    low95, low50, median, high50, high95 = (_quantile(p, mass, low, step) for p in (0.025, 0.25, 0.5, 0.75, 0.975))
    sd = float(np.sqrt(mass @ (middles - mean) ** 2))
    return {"median": median, "mean": mean, "sd": sd, "region50": [low50, high50], "region95": [low95, high95]}


def _quantile(probability: float, mass: Floats, low: float, step: float) -> float:
    """Quantile of a density of which the midpoints of cells are known; straight lines between their edges."""
    left, right = np.concatenate([[0.0], mass]), np.concatenate([mass, [0.0]])
    # the first term of Euler and Maclaurin's series for the midpoint rule
    reached = np.concatenate([[0.0], np.cumsum(mass)]) + (right - left) / 24.0
    cell = int(np.clip(np.searchsorted(reached, probability, side="right") - 1, 0, len(mass) - 1))
    share = (probability - reached[cell]) / max(reached[cell + 1] - reached[cell], 1e-300)
    first, last = (0.5 * (left[k] + right[k]) for k in (cell, cell + 1))
    within = share * (first + last) / (first + np.sqrt(max(first**2 + share * (last**2 - first**2), 0.0)) + 1e-300)
    return float(low + step * (cell + within))


def _from_new_year(day: dict[str, float | list[float]]) -> dict[str, float | list[float]]:
    years = TROPICAL_YEAR_DAYS * np.floor(float(np.asarray(day["median"])) / TROPICAL_YEAR_DAYS)
    return {key: value if key == "sd" else (np.asarray(value) - years).tolist() for key, value in day.items()}
