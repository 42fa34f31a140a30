"""Independent rows that hold the sites' phasors.

A site's phasors split into their mean over the models and contrasts between them, and each turns onto the axes on which
its covariance is diagonal whatever the scales are:

    mean      variance = lambda + s_site^2 (and s_group^2 where the group is the site's alone) + s_local^2 / M_s
    contrast  variance = delta + s_local^2

so that the information of any scales is one product of row weights with one table. A site of which only the mean over
its models is known has no contrasts: its mean row is the same. A site that enters by its mixture has such rows for
every part, of which those of one part count at a time.
"""

from collections.abc import Collection
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.observations import Observations, record_covariance

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Rows:
    """Rows in pairs: two axes of one mean or contrast of one part of one site; all means come first.

    Parameters
    ----------
    site, part : (n_row,) array of int
    direction : (n_row, 2) array
        Unit vector of the row in (in phase, quadrature).
    model_weight : (n_row, n_model) array
        How the models' phasors enter: equal weights (sum 1) for the mean, orthonormal
        contrasts (sum 0) otherwise.
    value : (n_row,) array
        Pa.
    variance : (n_row,) array
        Pa2, the part that does not depend on the scales.
    log_weight : (n_site, n_part) array
        Logarithms of the weights of the parts, -inf where a site has fewer.
    record, noise : (n_row / 2, 2, 2) array
        Covariances of the pair, Pa2, on its own axes, by the record and by the models' own weather.
    """

    site: NDArray[np.int64]
    part: NDArray[np.int64]
    direction: Floats
    model_weight: Floats
    value: Floats
    variance: Floats
    log_weight: Floats
    record: Floats
    noise: Floats

    @cached_property
    def mean_count(self) -> int:
        """Number of rows that are means over models."""
        return int((self.model_weight.sum(axis=1) > 0.5).sum())

    @cached_property
    def local_factor(self) -> Floats:
        """(n_row,), what s_local^2 is multiplied with: 1 / M_s for a mean, 1 for a contrast."""
        return np.asarray((self.model_weight**2).sum(axis=1))

    @property
    def has_contrasts(self) -> bool:
        """Whether some site carries more than one model."""
        return bool(self.mean_count < len(self.site))

    @property
    def has_parts(self) -> bool:
        """Whether some site enters by its mixture."""
        return bool(self.log_weight.shape[1] > 1)


def observation_rows(observations: Observations, mixed: Collection[str] = ()) -> Rows:
    """Turn every site's phasors into independent rows.

    Parameters
    ----------
    observations : Observations
    mixed : collection of str
        Sites that enter by their mixture; the others by its mean and covariance.

    Returns
    -------
    Rows
        Two rows for every site-model pair and part; two in all for a site of which only the mean is known.
    """
    count = len(observations.sites)
    used = [
        np.flatnonzero(observations.weight[s] > 0) if site in mixed else np.array([-1])
        for s, site in enumerate(observations.sites)
    ]
    log_weight = np.full((count, max(len(parts) for parts in used)), -np.inf)
    pairs = []
    for s, parts in enumerate(used):
        log_weight[s, : len(parts)] = np.log(observations.weight[s, parts]) if parts[0] >= 0 else 0.0
        for place, k in enumerate(parts):
            phasor = observations.part_phasor[s, k] if k >= 0 else observations.phasor[s]
            covariance = observations.part_covariance[s, k] if k >= 0 else observations.covariance[s]
            pairs += [(s, place, *pair) for pair in _site_pairs(observations, s, phasor, covariance)]
    pairs.sort(key=lambda pair: pair[3].sum() < 0.5)  # stable: the means first
    site, part, direction, weight, value, variance, record, noise = (
        np.array([pair[i] for pair in pairs]) for i in range(8)
    )
    return Rows(
        np.repeat(site, 2),
        np.repeat(part, 2),
        direction.reshape(-1, 2),
        np.repeat(weight, 2, axis=0),
        value.ravel(),
        variance.ravel(),
        log_weight,
        record,
        noise,
    )


def _site_pairs(
    observations: Observations, s: int, phasor: Floats, covariance: Floats
) -> list[tuple[Floats, Floats, Floats, Floats, Floats, Floats]]:
    """Directions, model weights, values, variances, and covariances by record and by weather of each pair."""
    present = np.flatnonzero(observations.present[s])
    count = len(present)
    known = count if observations.has_contrasts[s] else 1
    weights = np.zeros((known, len(observations.models)))
    weights[0, present] = 1.0 / count
    weights[1:, present] = contrast_weights(count)[: known - 1]
    noise = observations.model_noise[s]
    record = record_covariance(covariance, noise, count)
    zero = np.zeros((2, 2))
    mean, contrast = _on_own_axes(record, noise / count), _on_own_axes(zero, noise)
    pairs = []
    for row, weight in enumerate(weights):
        direction, variance, own_record, own_noise = mean if row == 0 else contrast
        value = direction @ (weight @ np.nan_to_num(phasor))
        pairs.append((direction, weight, value, variance, own_record, own_noise))
    return pairs


def _on_own_axes(record: Floats, noise: Floats) -> tuple[Floats, Floats, Floats, Floats]:
    """Directions of the axes of the sum of two covariances, its variances along them, and the two on them."""
    values, axes = np.linalg.eigh(record + noise)
    return axes.T, np.maximum(values, 0.0), axes.T @ record @ axes, axes.T @ noise @ axes


def contrast_weights(count: int) -> Floats:
    """Orthonormal rows (count - 1, count) that sum to zero (Helmert's).

    Parameters
    ----------
    count : int

    Returns
    -------
    (count - 1, count) array

    Examples
    --------
    >>> rows = contrast_weights(3)
    >>> bool(np.allclose(rows @ rows.T, np.eye(2)) and np.allclose(rows.sum(axis=1), 0.0))
    True
    """
    rows = np.zeros((count - 1, count))
    for k in range(1, count):
        rows[k - 1, :k] = 1.0
        rows[k - 1, k] = -k
        rows[k - 1] /= np.sqrt(k * (k + 1.0))
    return rows
