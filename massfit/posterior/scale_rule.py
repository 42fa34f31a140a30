"""A fixed rule that integrates a scale under its whole prior, with few nodes.

The logarithm of a density of data is a smooth function of the logarithm of a scale: flat below the errors of the data,
a straight line far above their scatter, and each turn between the two is about one unit wide however many data there
are. So it is computed on a few knots, laid through them by a cubic spline, and integrated on fine cells that hold the
exact mass of the prior. Means of smooth functions follow by the same spline, read backwards: the weights of the fine
cells are handed back to the knots. Nothing depends on where the posterior lies, so one rule serves every subset.
"""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

Floats = NDArray[np.float64]

HIGHEST = 40.0
"""Last knot in units of the prior's scale: 5e-6 of the mass and 0.4 % of the variance lie beyond."""

_BULK = 4.0  # the cells are wider beyond, in units of the prior's scale


@dataclass(frozen=True)
class ScaleRule:
    """Knots and cells for one scale.

    Parameters
    ----------
    knot : (n_knot,) array
        Natural logarithm of the scale in Pa.
    spline : (n_cell, n_knot) array
        From values on the knots to values at the cells; rows sum to 1.
    mass : (n_cell,) array
        Mass of the prior in each cell, sum 1. Where the cells are the knots, the integral of the spline through values
        on them: one at the far end may be a little negative.
    """

    knot: Floats
    spline: Floats
    mass: Floats


def scale_rule(prior_scale: float, lowest: float, effects: int, *, narrow: bool = True) -> ScaleRule:
    """Make the rule for a scale with a half-t prior of 4 degrees of freedom.

    Parameters
    ----------
    prior_scale : float
        Scale of the prior, Pa.
    lowest : float
        Value below which no density of data depends on the scale any more, Pa; less than 4 prior scales.
    effects : int
        Largest number of independent effects that the scale is seen in: the posterior of the logarithm is
        1 / sqrt(2 effects) wide at least.
    narrow : bool
        Whether the posterior may be narrower than the distance of the knots. Where it is not, for a dozen effects or
        less, the knots are the cells.

    Returns
    -------
    ScaleRule

    Examples
    --------
    The mass of the prior, and its variance: 2 prior scales squared.

    >>> for narrow in (True, False):
    ...     rule = scale_rule(30.0, 1.0, 6, narrow=narrow)
    ...     variance = rule.mass @ rule.spline @ np.exp(2 * rule.knot)
    ...     round(float(rule.mass.sum()), 12), round(float(variance) / 30.0**2, 1)
    (1.0, 2.0)
    (1.0, 2.0)
    """
    low, high = np.log(lowest), np.log(HIGHEST * prior_scale)
    sharpest = 1.0 / np.sqrt(2.0 * max(effects, 1))
    if narrow:
        # the error of a cubic spline grows with the fourth power of the spacing and with the number of data
        spacing, cell = 0.6 * min(1.0, 40.0 / max(effects, 1)) ** 0.25, min(0.3, 1.3 * sharpest)
    else:
        spacing, cell = min(0.5, max(0.35, 1.8 * sharpest)), 0.02
    knot = np.linspace(low, high, 1 + int(np.ceil((high - low) / spacing)))
    edges = [knot[:1]]
    for left, right in pairwise(knot):
        width = cell if left < np.log(_BULK * prior_scale) else max(cell, 0.25)
        edges.append(np.linspace(left, right, 1 + int(np.ceil((right - left) / width)))[1:])
    edge = np.concatenate(edges)
    # flat below the first knot
    curve = CubicSpline(knot, np.eye(len(knot)), bc_type=((1, np.zeros(len(knot))), "not-a-knot"))
    spline, mass = curve(0.5 * (edge[1:] + edge[:-1])), _cell_masses(edge - np.log(prior_scale))
    if not narrow:
        spline, mass = np.eye(len(knot)), mass @ spline
    return ScaleRule(knot, spline, mass)


def _cell_masses(log_edge: Floats) -> Floats:
    """Masses (n - 1,) of the half-t distribution between the edges; what lies outside goes to the outer cells."""
    square = np.exp(2.0 * log_edge[1:-1])
    below = 0.75 * np.sqrt(square / (1.0 + square / 4.0)) * (1.0 - square / (12.0 + 3.0 * square))
    return np.diff(np.concatenate([[0.0], below, [1.0]]))
