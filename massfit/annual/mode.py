"""Joint mode of the noise amplitudes and the drift time constants of one site."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize

from massfit.annual.design import Design
from massfit.annual.evidence import reduce_columns, solve_choices
from massfit.annual.grid import DriftGrid, refine_grid
from massfit.annual.noise import RESOLUTION, NoisePriors, log_score_prior
from massfit.errors import ConvergenceError

Floats = NDArray[np.float64]

MODE_TOLERANCE = 0.02
"""The alternation ends when the log posterior gains less than this in a round."""

MAX_ALTERNATIONS = 8

GRADIENT_TOLERANCE = 0.1
"""Of the log posterior per unit of score, whose posterior sigma is below one: a proposal needs no more."""

HESSIAN_STEP = 0.1
"""Step of the second differences in score: wide enough to see past rounding and small kinks."""


@dataclass(frozen=True)
class Mode:
    """Where the posterior of the non-linear parameters peaks, and how sharply.

    Parameters
    ----------
    scores : (J + 1,) array
    spread : (J + 1, J + 1) array
        Inverse of the curvature in score.
    grid : DriftGrid
        Drift time constants, in turn about the mode.
    """

    scores: Floats
    spread: Floats
    grid: DriftGrid


def joint_mode(design: Design, noise: NoisePriors) -> Mode:
    """Find the mode by turns: amplitudes at fixed drift times, drift times at fixed amplitudes.

    Parameters
    ----------
    design : Design
    noise : NoisePriors

    Returns
    -------
    Mode
    """
    current = _start(design, noise)
    grid = refine_grid(noise.covariance(design.days, current), design)
    reached = np.inf
    for _ in range(MAX_ALTERNATIONS):
        objective = _objective(design, noise, grid.mode)
        current = minimise(objective, current)
        value = objective(current)
        if reached - value < MODE_TOLERANCE:
            break
        reached = value
        grid = refine_grid(noise.covariance(design.days, current), design, grid.mode)
    return Mode(current, _spread(objective, current), grid)


def _start(design: Design, noise: NoisePriors) -> Floats:
    """Scores that share what a rough fit leaves."""
    decays = [np.geomspace(low, high, 4) for low, high in design.time_ranges]
    columns = np.column_stack([design.fixed, design.exponentials(decays)])
    residual = design.data - columns @ np.linalg.lstsq(columns, design.data, rcond=1e-8)[0]
    return equal_shares(float(residual.std()), noise)


def equal_shares(sd: float, noise: NoisePriors) -> Floats:
    """Scores at which all terms have the same share of a variance: a start at the right level."""
    share = np.hypot(sd / np.sqrt(len(noise.scales)), RESOLUTION)
    return noise.scores(np.full(len(noise.scales), share))


def minimise(objective: Callable[[Floats], float], start: Floats) -> Floats:
    """Minimum of a smooth function of a few scores (quasi-Newton, BFGS)."""
    return np.asarray(minimize(objective, start, method="BFGS", options={"gtol": GRADIENT_TOLERANCE}).x)


def _objective(design: Design, noise: NoisePriors, time_constants: Floats) -> Callable[[Floats], float]:
    """Negative log posterior of the scores at fixed drift times."""
    exponentials = design.exponentials([np.array([time]) for time in time_constants])
    choice = np.arange(len(time_constants))[None, :]

    def negative_log_posterior(scores: Floats) -> float:
        reduction = reduce_columns(noise.covariance(design.days, scores), design, exponentials)
        evidence = float(solve_choices(reduction, choice).log_evidence[0])
        return -evidence - log_score_prior(scores)

    return negative_log_posterior


def _spread(objective: Callable[[Floats], float], mode: Floats) -> Floats:
    """Inverse Hessian by second differences; directions with no curvature get a wide unit spread."""
    count = len(mode)
    steps = HESSIAN_STEP * np.eye(count)
    hessian = np.empty((count, count))
    for i in range(count):
        for j in range(i + 1):
            signs = ((1, 1), (1, -1), (-1, 1), (-1, -1))
            values = [objective(mode + a * steps[i] + b * steps[j]) for a, b in signs]
            hessian[i, j] = hessian[j, i] = (values[0] - values[1] - values[2] + values[3]) / (4 * HESSIAN_STEP**2)
    if not np.isfinite(hessian).all():
        raise ConvergenceError("the fit of the noise of a site", float("nan"), MODE_TOLERANCE)
    curvature, directions = np.linalg.eigh(hessian)
    return np.asarray((directions / np.maximum(curvature, 1.0)) @ directions.T)
