"""Merge many weighted Gaussian components into a few parts."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.annual.components import Components

Floats = NDArray[np.float64]

MOST_PARTS = 24

FINE_ENOUGH = 2e-4
"""A part is not split when its share of the weight times the variance of its members, in squared sigmas
of the whole and squared logarithms of their own sigmas, is less than this: the whole differs from a
mixture of such parts by less than the integration error."""


@dataclass(frozen=True)
class Parts:
    """A Gaussian mixture for the phasor of one site.

    Parameters
    ----------
    weight : (K,) array
        Sums to 1.
    phasor : (K, 1 + M + C, 2) array
        Of the data, and of the response to each contrast and companion, Pa.
    covariance : (K, 2, 2) array
        Pa^2.
    """

    weight: Floats
    phasor: Floats
    covariance: Floats


def merge_components(components: Components) -> Parts:
    """Merge components, keeping overall mean and covariance exactly.

    The set with the widest members, by weight, is split at the mean of its widest
    feature until all are narrow; each set becomes the Gaussian of its own moments.

    Parameters
    ----------
    components : Components

    Returns
    -------
    Parts
        At most 24, heaviest first.
    """
    features = _features(components)
    sets = [np.flatnonzero(components.weight > 0.0)]
    while len(sets) < MOST_PARTS:
        spreads = [_spread(features[members], components.weight[members]) for members in sets]
        widest = int(np.argmax([spread.max() for spread in spreads]))
        if spreads[widest].max() < FINE_ENOUGH:
            break
        members = sets.pop(widest)
        feature = features[members, np.argmax(spreads[widest])]
        below = feature < np.average(feature, weights=components.weight[members])
        sets += [members[below], members[~below]]
    sets.sort(key=lambda members: -components.weight[members].sum())
    merged = [_moments(components, members) for members in sets]
    weight, phasor, covariance = (np.array(values) for values in zip(*merged, strict=True))
    return Parts(weight / weight.sum(), phasor, covariance)


def _features(components: Components) -> Floats:
    """Whitened phasor and log sigma of every component: (K, 3)."""
    _, phasor, covariance = _moments(components, np.arange(len(components.weight)))
    away = components.annual[:, :, 0] - phasor[0]
    whitened = np.linalg.solve(np.linalg.cholesky(covariance), away.T).T
    log_sigma = 0.25 * np.linalg.slogdet(components.annual_covariance)[1]
    return np.column_stack([whitened, log_sigma])


def _spread(features: Floats, weight: Floats) -> Floats:
    mean = weight @ features / weight.sum()
    return np.asarray(weight @ (features - mean) ** 2)


def _moments(components: Components, members: NDArray[np.int64]) -> tuple[float, Floats, Floats]:
    """Weight, mean (1 + M + C, 2) and covariance (2, 2) of a set of components."""
    weight = components.weight[members]
    total = float(weight.sum())
    share = weight / total
    phasor = np.einsum("k,kcm->mc", share, components.annual[members])
    away = components.annual[members][:, :, 0] - phasor[0]
    within = np.einsum("k,kij->ij", share, components.annual_covariance[members])
    return total, phasor, within + np.einsum("k,ki,kj->ij", share, away, away)
