"""Which sites to keep, by what they would tell and not by what they read.

The error of A is computed at fixed scales, so that the phasors have no say: what counts is the error of each record,
its fingerprint, its models, its group and its years. The A-criterion is the trace of the covariance of A, the
D-criterion its determinant (Atkinson, Donev & Tobias 2007, Optimum Experimental Designs, chapter 10; exchange after
Fedorov 1972, Theory of Optimal Experiments).
"""

from collections.abc import Callable
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.robust_terms import Points
from massfit.posterior.subsets import PreparedNetwork

Floats = NDArray[np.float64]
Kept = NDArray[np.bool_]
Cost = Callable[[Kept], Floats]

CRITERIA = ("A", "D")

EXCHANGE_SITES = 30
"""Sites up to which greedy subsets are improved by exchanges: their number grows with the cube."""

_BLOCK = 256
_STUDENT_VARIANCE = 2.0  # variance of Student scatter with 4 degrees of freedom, in units of its squared scale


def planned_cost(network: PreparedNetwork, log_scales: Floats, criterion: str) -> Cost:
    """Criterion as a function of the sites kept.

    Parameters
    ----------
    network : PreparedNetwork
    log_scales : (n_scale,) array
        At which the error is computed.
    criterion : str
        ``"A"``: root of half the trace, the width, Pa; ``"D"``: fourth root of the determinant, Pa.

    Returns
    -------
    callable
        From subsets (n, n_site) of bool to (n,), Pa; smaller is better.
    """
    scales = log_scales.copy()
    if network.table.model.student:
        scales[0] += 0.5 * np.log(_STUDENT_VARIANCE)
    # nobody is known to be far off before it is seen
    table = replace(network.table, extra=np.zeros_like(network.table.extra))
    factors = replace(network.factors, extra=np.zeros_like(network.factors.extra))

    def block(kept: Kept) -> Floats:
        points = Points(table, factors, kept.astype(float), np.tile(scales, (len(kept), 1)))
        covariance = points.answers(*points.normal_factors(), normal=True).covariance
        if criterion == "A":
            return np.asarray(np.sqrt(0.5 * np.trace(covariance, axis1=1, axis2=2)))
        return np.asarray(np.linalg.det(covariance) ** 0.25)

    return lambda kept: np.concatenate([block(part) for part in np.split(kept, range(_BLOCK, len(kept), _BLOCK))])


def best_subsets(cost: Cost, site_count: int) -> tuple[Kept, Floats]:
    """Find a good subset of every size: dropping and adding one by one, then exchanging.

    Parameters
    ----------
    cost : callable
        As from :func:`planned_cost`.
    site_count : int

    Returns
    -------
    kept : (site_count, site_count) array of bool
        Row k - 1 holds k sites.
    value : (site_count,) array

    Examples
    --------
    Where every site counts for itself the best are kept:

    >>> worth = np.array([3.0, 1.0, 2.0])
    >>> kept, _ = best_subsets(lambda kept: -(kept @ worth), 3)
    >>> kept.astype(int).tolist()
    [[1, 0, 0], [1, 0, 1], [1, 1, 1]]
    """
    best, value = _dropping(cost, site_count)
    added, own = _adding(cost, site_count)
    better = own < value
    best[better], value[better] = added[better], own[better]
    if site_count <= EXCHANGE_SITES:
        for k in range(site_count - 1):
            best[k], value[k] = _exchanged(cost, best[k], value[k])
    return best, value


def _dropping(cost: Cost, count: int) -> tuple[Kept, Floats]:
    kept = np.ones(count, dtype=bool)
    rows, values = [kept], [cost(kept[None])[0]]
    while kept.sum() > 1:
        inside = np.flatnonzero(kept)
        fewer = np.tile(kept, (len(inside), 1))
        fewer[np.arange(len(inside)), inside] = False
        found = cost(fewer)
        kept = fewer[found.argmin()]
        rows.append(kept)
        values.append(found.min())
    return np.array(rows[::-1]), np.array(values[::-1])


def _adding(cost: Cost, count: int) -> tuple[Kept, Floats]:
    kept = np.zeros(count, dtype=bool)
    rows, values = [], []
    while not kept.all():
        outside = np.flatnonzero(~kept)
        more = np.tile(kept, (len(outside), 1))
        more[np.arange(len(outside)), outside] = True
        found = cost(more)
        kept = more[found.argmin()]
        rows.append(kept)
        values.append(found.min())
    return np.array(rows), np.array(values)


def _exchanged(cost: Cost, kept: Kept, value: float) -> tuple[Kept, float]:
    """Exchange one site for another, the best pair first, until none is better."""
    while True:
        pairs = [(i, o) for i in np.flatnonzero(kept) for o in np.flatnonzero(~kept)]
        others = np.tile(kept, (len(pairs), 1))
        for row, (inside, outside) in zip(others, pairs, strict=True):
            row[[inside, outside]] = False, True
        found = cost(others)
        if found.min() >= value - 1e-9 * abs(value):
            return kept, value
        kept, value = others[found.argmin()], float(found.min())
