"""Modes of the noise of one site, one a form of noise, and of its drift time constants."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from massfit.annual.design import Design
from massfit.annual.evidence import ChosenEvidence, DriftBasis
from massfit.annual.families import NoiseFamily, half_t_score, log_score_prior
from massfit.annual.grid import DriftGrid, refine_grid
from massfit.annual.nodes import Nodes, exponential_nodes
from massfit.annual.noise import RESOLUTION, NoiseModel
from massfit.errors import ConvergenceError

Floats = NDArray[np.float64]

MODE_TOLERANCE = 0.1
"""The alternation ends when the log posterior gains less than this from drift terms found anew."""

MAX_ALTERNATIONS = 8

NEWTON_TOLERANCE = 0.1
"""Gain of the log posterior that a Newton step promises at which it is the last: what remains after it is of the order
of its square, and a proposal needs no more."""

MAX_NEWTON_STEPS = 20

LONGEST_STEP = 1.5
"""Of a score in one Newton step."""

DIFFERENCE_STEP = 0.05
"""Step of the differences in score: wide enough to see past rounding."""

WHITE_RATIO_SD = 0.5
"""Prior standard deviation of the logarithm of a recorder's white noise over that of its site."""

RATIO_STEP, RATIO_SWEEPS = 0.2, 2

STARTING_PLACES = (-1.0, 0.0, 1.0)
"""Scores of the time scale or the exponent from which the search for a form of noise begins at best."""

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
        Drift terms, in turn about the mode of the best form of noise.
    """

    families: tuple[FamilyMode, ...]
    white_ratio: Floats
    grid: DriftGrid

    @property
    def noise(self) -> NoiseModel:
        """Noise at the joint mode."""
        best = self.families[0]
        return best.family.model(best.scores, self.white_ratio)


def joint_mode(basis: DriftBasis, families: Sequence[NoiseFamily]) -> Mode:
    """Find the mode by turns: noise at fixed drift terms, drift terms at fixed noise.

    The white noise of each deployment over that of the site is found once, at the mode, and
    held from there: days are many enough to tell it within a few parts in a hundred.

    Parameters
    ----------
    basis : DriftBasis
    families : sequence of NoiseFamily

    Returns
    -------
    Mode
    """
    design = basis.design
    leader, ratio = max(families, key=lambda family: family.size), np.ones(len(design.drifts))
    found, grid = _alternate(basis, leader, ratio)
    ratio = _white_ratio(design, leader, found.scores, grid.mode)
    modes = []
    for family in families:
        objective = _objective(design, family, ratio, grid.mode)
        start = min(_starts(family, leader, found.scores), key=objective)
        modes.append(_family_mode(family, minimise(objective, start)))
    best = max(modes, key=lambda mode: mode.log_evidence)
    if best.family is not leader:
        grid = refine_grid(design.covariance(best.family.model(best.scores, ratio)), basis, grid)
    kept = [mode for mode in modes if mode.log_evidence > best.log_evidence + np.log(NEGLIGIBLE_FORM)]
    return Mode(tuple(sorted(kept, key=lambda mode: -mode.log_evidence)), ratio, grid)


@dataclass(frozen=True)
class Minimum:
    """Minimum of a smooth function of a few scores.

    Parameters
    ----------
    scores : (k,) array
    value : float
    spread : (k, k) array
        Inverse of the curvature.
    """

    scores: Floats
    value: float
    spread: Floats


def minimise(objective: Callable[[Floats], float], start: Floats) -> Minimum:
    """Minimise a negative log posterior of scores by Newton steps with differences.

    Examples
    --------
    >>> found = minimise(lambda x: float(2 * (x[0] - 1) ** 2 + (x[1] - 2) ** 2 / 2), np.zeros(2))
    >>> found.scores.round(6), found.spread.diagonal().round(6)
    (array([1., 2.]), array([0.25, 1.  ]))
    """
    scores, value = start, objective(start)
    for _ in range(MAX_NEWTON_STEPS):
        shape = _local_shape(objective, scores, value)
        step = -_inverse(shape.hessian) @ shape.gradient
        last = bool(-shape.gradient @ step < 2.0 * NEWTON_TOLERANCE)
        step *= min(1.0, LONGEST_STEP / max(np.abs(step).max(), LONGEST_STEP))
        trial = objective(scores + step)
        while not (last or trial < value) and np.abs(step).max() > 1e-3:
            step = 0.4 * step
            trial = objective(scores + step)
        last = last or not trial < value
        if trial < value:
            scores, value = scores + step, trial
        if last:
            break
    return Minimum(scores, value, _inverse(_centred_hessian(objective, shape)))


@dataclass(frozen=True)
class _Shape:
    """Value, gradient and Hessian at some scores by differences, central but for the mixed second derivatives."""

    scores: Floats
    value: float
    gradient: Floats
    hessian: Floats


def _local_shape(objective: Callable[[Floats], float], scores: Floats, value: float) -> _Shape:
    steps = DIFFERENCE_STEP * np.eye(len(scores))
    low, high = (np.array([objective(scores + sign * step) for step in steps]) for sign in (-1, 1))
    gradient, hessian = (high - low) / (2.0 * DIFFERENCE_STEP), np.diag(high + low - 2.0 * value) / DIFFERENCE_STEP**2
    for i, j in combinations(range(len(scores)), 2):
        both = objective(scores + steps[i] + steps[j])
        hessian[i, j] = hessian[j, i] = (both + value - high[i] - high[j]) / DIFFERENCE_STEP**2
    return _Shape(scores, value, gradient, hessian)


def _centred_hessian(objective: Callable[[Floats], float], shape: _Shape) -> Floats:
    """Hessian whose mixed derivatives are central too: a proposal wants its shape, a step does not."""
    steps, hessian = DIFFERENCE_STEP * np.eye(len(shape.scores)), shape.hessian.copy()
    # the values where one score is lower, from the first two differences
    low = shape.value - DIFFERENCE_STEP * shape.gradient + 0.5 * DIFFERENCE_STEP**2 * np.diag(hessian)
    for i, j in combinations(range(len(steps)), 2):
        both = objective(shape.scores - steps[i] - steps[j])
        other = (both + shape.value - low[i] - low[j]) / DIFFERENCE_STEP**2
        hessian[i, j] = hessian[j, i] = 0.5 * (hessian[i, j] + other)
    return hessian


def _inverse(hessian: Floats) -> Floats:
    """Inverse of a Hessian; directions of no curvature get a wide unit spread."""
    if not np.isfinite(hessian).all():
        raise ConvergenceError("the fit of the noise of a site", float("nan"), NEWTON_TOLERANCE)
    curvature, directions = np.linalg.eigh(hessian)
    return np.asarray((directions / np.maximum(curvature, 1.0)) @ directions.T)


def _rough_sd(design: Design) -> float:
    """Give the standard deviation that a rough fit leaves, Pa."""
    decays = [exponential_nodes(np.geomspace(term.low, term.high, 4)) for term in design.terms]
    columns = np.column_stack([design.fixed, design.drift_columns(decays)])
    left = design.data - columns @ np.linalg.lstsq(columns, design.data, rcond=1e-8)[0]
    return float(left[design.observed].std())


def _starts(family: NoiseFamily, leader: NoiseFamily, found: Floats) -> list[Floats]:
    """Scores from which the mode of a form may be near, by the mode of the leading form."""
    if family is leader:
        return [found]
    noise = leader.model(found, np.ones(1))
    if family.form in ("white", "sum"):
        return family.starts(float(np.hypot(noise.red_sd, noise.white[0])))
    lag = float(np.sqrt(family.time_scales.min() * family.time_scales.max()))
    starts = []
    for place in STARTING_PLACES:
        own = family.model(np.array([0.0, place, 0.0]), np.ones(1))
        # whatever their spectra, both change as much over such a time
        sd = own.red_sd * np.sqrt(noise.change(lag) / own.change(lag))
        starts.append(np.array([half_t_score(np.hypot(sd, RESOLUTION), family.red_scale), place, found[-1]]))
    return starts


def _alternate(basis: DriftBasis, family: NoiseFamily, ratio: Floats) -> tuple[Minimum, DriftGrid]:
    design, starts = basis.design, family.starts(_rough_sd(basis.design))
    grid = refine_grid(design.covariance(family.model(starts[0], ratio)), basis)
    for _ in range(MAX_ALTERNATIONS):
        objective = _objective(design, family, ratio, grid.mode)
        found = minimise(objective, min(starts, key=objective))
        starts = [found.scores]
        grid = refine_grid(design.covariance(family.model(found.scores, ratio)), basis, grid)
        if found.value - _objective(design, family, ratio, grid.mode)(found.scores) < MODE_TOLERANCE:
            break
    return found, grid


def _objective(design: Design, family: NoiseFamily, ratio: Floats, terms: Sequence[Nodes]) -> Callable[[Floats], float]:
    """Negative log posterior of the scores at fixed drift terms."""
    evidence = ChosenEvidence(design, design.drift_columns(terms))

    def negative_log_posterior(scores: Floats) -> float:
        return -evidence(family.model(scores, ratio)) - log_score_prior(scores)

    return negative_log_posterior


def _white_ratio(design: Design, family: NoiseFamily, scores: Floats, terms: Sequence[Nodes]) -> Floats:
    """White noise of each deployment over that of the site, each in turn by Newton steps in the logarithm."""
    logs = np.zeros(len(design.drifts))
    if len(logs) < 2:
        return np.ones(1)
    evidence = ChosenEvidence(design, design.drift_columns(terms))

    def objective(values: Floats) -> float:
        penalty = 0.5 * np.sum(values**2) / WHITE_RATIO_SD**2
        return float(penalty - evidence(family.model(scores, np.exp(values))))

    for _ in range(RATIO_SWEEPS):
        for step in RATIO_STEP * np.eye(len(logs)):
            low, here, high = (objective(logs + sign * step) for sign in (-1, 0, 1))
            slope, curvature = (high - low) / 2.0, max(high - 2.0 * here + low, 1e-9)
            logs = logs - step * np.clip(slope / curvature, -4.0, 4.0)
    return np.exp(logs)


def _family_mode(family: NoiseFamily, found: Minimum) -> FamilyMode:
    volume = 0.5 * (np.linalg.slogdet(found.spread)[1] + len(found.scores) * np.log(2.0 * np.pi))
    return FamilyMode(family, found.scores, found.spread, float(volume - found.value))
