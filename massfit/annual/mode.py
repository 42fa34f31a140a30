"""Modes of the noise of one site, one a form of noise, and of its drift time constants."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize

from massfit.annual.design import Design
from massfit.annual.evidence import reduce_columns, solve_choices
from massfit.annual.families import NoiseFamily, log_score_prior
from massfit.annual.grid import DriftGrid, refine_grid
from massfit.annual.noise import NoiseModel
from massfit.errors import ConvergenceError

Floats = NDArray[np.float64]

MODE_TOLERANCE = 0.02
"""The alternation ends when the log posterior gains less than this in a round."""

MAX_ALTERNATIONS = 8

GRADIENT_TOLERANCE = 0.1
"""Of the log posterior per unit of score, whose posterior sigma is below one: a proposal needs no more."""

HESSIAN_STEP = 0.1
"""Step of the second differences in score: wide enough to see past rounding and small kinks."""

WHITE_RATIO_SD = 0.5
"""Prior standard deviation of the logarithm of a recorder's white noise over that of its site."""

RATIO_STEP, RATIO_SWEEPS = 0.2, 3

NEGLIGIBLE_FORM = 3e-3
"""Forms of noise of less weight than this part of the best, by Laplace's approximation, are left out."""


@dataclass(frozen=True)
class FamilyMode:
    """Where the posterior of one form of noise peaks, and how sharply.

    Parameters
    ----------
    family : NoiseFamily
    scores : (k,) array
    spread : (k, k) array
        Inverse of the curvature in score.
    log_evidence : float
        By Laplace's approximation.
    """

    family: NoiseFamily
    scores: Floats
    spread: Floats
    log_evidence: float


@dataclass(frozen=True)
class Mode:
    """Modes of all forms of noise that count, and of the drift.

    Parameters
    ----------
    families : tuple of FamilyMode
        Best first.
    white_ratio : (D,) array
        White noise of each deployment over that of the site.
    grid : DriftGrid
        Drift time constants, in turn about the mode of the best form of noise.
    """

    families: tuple[FamilyMode, ...]
    white_ratio: Floats
    grid: DriftGrid

    @property
    def noise(self) -> NoiseModel:
        """Noise at the joint mode."""
        best = self.families[0]
        return best.family.model(best.scores, self.white_ratio)


def joint_mode(design: Design, families: Sequence[NoiseFamily]) -> Mode:
    """Find the mode by turns: noise at fixed drift times, drift times at fixed noise.

    The white noise of each deployment over that of the site is found once, at the mode, and
    held from there: days are many enough to tell it within a few parts in a hundred.

    Parameters
    ----------
    design : Design
    families : sequence of NoiseFamily

    Returns
    -------
    Mode
    """
    leader = max(families, key=lambda family: family.size)
    scores, ratio = leader.start(_rough_sd(design)), np.ones(len(design.drifts))
    grid = refine_grid(design.covariance(leader.model(scores, ratio)), design)
    scores, grid = _alternate(design, leader, ratio, scores, grid)
    ratio = _white_ratio(design, leader, scores, grid.mode)
    modes = [
        _family_mode(design, family, ratio, grid.mode, scores if family == leader else _start(family, scores))
        for family in families
    ]
    best = max(modes, key=lambda mode: mode.log_evidence)
    if best.family != leader:
        scores, grid = _alternate(design, best.family, ratio, best.scores, grid)
    kept = [mode for mode in modes if mode.log_evidence > best.log_evidence + np.log(NEGLIGIBLE_FORM)]
    return Mode(tuple(sorted(kept, key=lambda mode: -mode.log_evidence)), ratio, grid)


def minimise(objective: Callable[[Floats], float], start: Floats) -> Floats:
    """Minimum of a smooth function of a few scores (quasi-Newton, BFGS)."""
    return np.asarray(minimize(objective, start, method="BFGS", options={"gtol": GRADIENT_TOLERANCE}).x)


def _rough_sd(design: Design) -> float:
    """Give the standard deviation that a rough fit leaves, Pa."""
    decays = [np.geomspace(low, high, 4) for low, high in design.time_ranges]
    columns = np.column_stack([design.fixed, design.exponentials(decays)])
    return float((design.data - columns @ np.linalg.lstsq(columns, design.data, rcond=1e-8)[0]).std())


def _start(family: NoiseFamily, leader: Floats) -> Floats:
    """Scores with the amplitudes of another form's mode."""
    scores = np.zeros(family.size)
    scores[: family.size - 1 if family.form == "sum" else min(1, family.size - 1)] = leader[0]
    scores[-1] = leader[-1]
    return scores


def _alternate(
    design: Design, family: NoiseFamily, ratio: Floats, scores: Floats, grid: DriftGrid
) -> tuple[Floats, DriftGrid]:
    reached = np.inf
    for _ in range(MAX_ALTERNATIONS):
        objective = _objective(design, family, ratio, grid.mode)
        scores = minimise(objective, scores)
        value = objective(scores)
        if reached - value < MODE_TOLERANCE:
            break
        reached = value
        grid = refine_grid(design.covariance(family.model(scores, ratio)), design, grid.mode)
    return scores, grid


def _objective(design: Design, family: NoiseFamily, ratio: Floats, time_constants: Floats) -> Callable[[Floats], float]:
    """Negative log posterior of the scores at fixed drift times."""
    evidence = _log_evidence(design, time_constants)

    def negative_log_posterior(scores: Floats) -> float:
        return -evidence(family.model(scores, ratio)) - log_score_prior(scores)

    return negative_log_posterior


def _log_evidence(design: Design, time_constants: Floats) -> Callable[[NoiseModel], float]:
    exponentials = design.exponentials([np.array([time]) for time in time_constants])
    choice = np.arange(len(time_constants))[None, :]

    def log_evidence(model: NoiseModel) -> float:
        reduction = reduce_columns(design.covariance(model), design, exponentials)
        return float(solve_choices(reduction, choice).log_evidence[0])

    return log_evidence


def _white_ratio(design: Design, family: NoiseFamily, scores: Floats, time_constants: Floats) -> Floats:
    """White noise of each deployment over that of the site, each in turn by Newton steps in the logarithm."""
    logs = np.zeros(len(design.drifts))
    if len(logs) < 2:
        return np.ones(1)
    evidence = _log_evidence(design, time_constants)

    def objective(values: Floats) -> float:
        penalty = 0.5 * np.sum(values**2) / WHITE_RATIO_SD**2
        return float(penalty - evidence(family.model(scores, np.exp(values))))

    for _ in range(RATIO_SWEEPS):
        for step in RATIO_STEP * np.eye(len(logs)):
            low, here, high = (objective(logs + sign * step) for sign in (-1, 0, 1))
            slope, curvature = (high - low) / 2.0, max(high - 2.0 * here + low, 1e-9)
            logs = logs - step * np.clip(slope / curvature, -4.0, 4.0)
    return np.exp(logs)


def _family_mode(
    design: Design, family: NoiseFamily, ratio: Floats, time_constants: Floats, start: Floats
) -> FamilyMode:
    objective = _objective(design, family, ratio, time_constants)
    scores = minimise(objective, start)
    spread = _spread(objective, scores)
    volume = 0.5 * (np.linalg.slogdet(spread)[1] + len(scores) * np.log(2.0 * np.pi))
    return FamilyMode(family, scores, spread, float(volume - objective(scores)))


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
