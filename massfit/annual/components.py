"""Integration over forms of noise, their parameters and drift times by importance sampling.

For every form the noise scores are proposed from a multivariate t distribution about the mode,
then from kernel estimates of the posterior made of all draws before (population Monte Carlo:
Cappe et al. 2004); the drift times from their joint sample at the mode. The weight of a
component is its exact joint evidence over its proposal, so that the proposal decides on
efficiency only; the sum of the weights of a form is its evidence. Points are quasi-random:
multiples of the square roots of primes modulo one (Richtmyer 1951) with a random shift
(Cranley & Patterson 1976).
"""

from dataclasses import dataclass, replace
from itertools import count

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaincinv, gammaln, ndtri

from massfit.annual.chains import DriftSample, sample_drift
from massfit.annual.evidence import (
    ANNUAL,
    DriftBasis,
    Reducer,
    annual_covariance,
    fixed_variance,
    solve_choices,
)
from massfit.annual.families import log_score_prior
from massfit.annual.mode import FamilyMode, Mode
from massfit.annual.nodes import Nodes
from massfit.annual.noise import NoiseModel

Floats = NDArray[np.float64]
Choices = NDArray[np.int64]

LEAST_NODES, NODES_PER_ROUND = 4, 28
"""Noise models tried in a round: the first for every form, and the second times the root of its share of the weight."""

LEAST_ROUNDS, MOST_ROUNDS = 2, 8

EFFECTIVE_NODES = 40.0
"""Rounds end when so many noise models count, shared by weight."""

PROPOSAL_DEGREES = 5
"""Degrees of freedom of the proposal: tails heavier than those of the posterior, which falls
exponentially towards vanishing amplitudes."""

PROPOSAL_WIDENING = 1.3
"""Factor on the covariance of the proposal."""

PRIMES = (2, 3, 5, 7, 11, 13, 17, 19, 23, 29, 31, 37, 41, 43, 47, 53, 59, 61, 67, 71)


@dataclass(frozen=True)
class Components:
    """Exact linear solutions at K weighted choices of noise and drift times.

    Parameters
    ----------
    weight : (K,) array
        Sums to 1.
    node : (K,) array of int
        Which of `models`.
    forms : tuple of str
        Form of each of S noise models.
    models : tuple of NoiseModel
        S of them.
    choice : (K, D) array of int
        Node of each drift term.
    nodes : tuple of Nodes
        D of them.
    annual : (K, 2, 1 + M + C) array
        Annual phasor of the data, and the response of the same operator to each contrast and companion, Pa.
    annual_covariance : (K, 2, 2) array
        Pa^2.
    mean, variance : (K, f) array
        Fixed coefficients.
    size, size_variance : (K, D) array
        Drift terms.
    """

    weight: Floats
    node: Choices
    forms: tuple[str, ...]
    models: tuple[NoiseModel, ...]
    choice: Choices
    nodes: tuple[Nodes, ...]
    annual: Floats
    annual_covariance: Floats
    mean: Floats
    variance: Floats
    size: Floats
    size_variance: Floats

    @property
    def node_weight(self) -> Floats:
        """Posterior weight of each noise model: (S,)."""
        return np.asarray(np.bincount(self.node, self.weight, len(self.models)), float)

    @property
    def effective_sample_size(self) -> float:
        """Of the noise models, the coarser of the two integrations (Kong 1992)."""
        return float(1.0 / np.sum(self.node_weight**2))


def integrate(basis: DriftBasis, mode: Mode, rng: np.random.Generator) -> Components:
    """Weighted components over forms of noise, their parameters and drift times.

    Parameters
    ----------
    basis : DriftBasis
    mode : Mode
    rng : numpy.random.Generator

    Returns
    -------
    Components
    """
    sample = sample_drift(basis.design.covariance(mode.noise), basis, mode.grid, rng)
    solver = _Solver(basis, sample)
    log_evidence = np.array([each.log_evidence for each in mode.families])
    share = np.exp(log_evidence - np.logaddexp.reduce(log_evidence))
    batches = [
        batch
        for each, part in zip(mode.families, share, strict=True)
        for batch in _explore(solver, each, mode.white_ratio, float(part), rng)
    ]
    return _collect(batches, sample.grid.nodes)


def _explore(
    solver: "_Solver", mode: FamilyMode, white_ratio: Floats, share: float, rng: np.random.Generator
) -> "list[_Batch]":
    """Weighted noise models of one form; their weights sum to its evidence."""
    size = LEAST_NODES + round(NODES_PER_ROUND * np.sqrt(share))
    start = _Proposal(mode.scores[None, :], np.ones(1), PROPOSAL_WIDENING * mode.spread)
    proposals, nodes, batches = [start], np.zeros((0, len(mode.scores))), []
    while True:
        new = proposals[-1].draw(size, rng)
        batches += [solver.solve(mode, scores, white_ratio) for scores in new]
        nodes = np.concatenate([nodes, new])
        # balance heuristic (Veach & Guibas 1995): every node is weighed against the mixture of all proposals
        log_proposal = np.logaddexp.reduce([proposal.log_density(nodes) for proposal in proposals]) + np.log(size)
        log_weight = np.array([batch.log_total for batch in batches]) - log_proposal
        weight = np.exp(log_weight - log_weight.max())
        effective = weight.sum() ** 2 / np.sum(weight**2)
        if len(proposals) >= LEAST_ROUNDS and (effective > EFFECTIVE_NODES * share or len(proposals) == MOST_ROUNDS):
            return [batch.weighed(log) for batch, log in zip(batches, log_proposal, strict=True)]
        # rare noisy models carry much of the variance: they are visited more often than their weight asks
        proposals.append(_adapted(nodes, weight * [batch.sigma for batch in batches], start))


class _Proposal:
    """Mixture of multivariate t distributions of one shape."""

    def __init__(self, centres: Floats, weight: Floats, covariance: Floats) -> None:
        self.centres, self.weight, self.covariance = centres, weight, covariance
        self.root = np.linalg.cholesky(covariance)

    def draw(self, count: int, rng: np.random.Generator) -> Floats:
        """Draws of the scores: (count, k)."""
        points = _points(count, len(self.root) + 2, rng)
        centres = np.searchsorted(np.cumsum(self.weight), points[:, 0] * self.weight.sum())
        gamma = gammaincinv(PROPOSAL_DEGREES / 2.0, points[:, 1:2])
        away = ndtri(points[:, 2:]) / np.sqrt(2.0 * gamma / PROPOSAL_DEGREES)
        return np.asarray(self.centres[np.minimum(centres, len(self.weight) - 1)] + away @ self.root.T)

    def log_density(self, values: Floats) -> Floats:
        """Log density: (S, k) to (S,)."""
        size, degrees = self.centres.shape[1], PROPOSAL_DEGREES
        white = np.linalg.solve(self.root, values.T)
        white_centres = np.linalg.solve(self.root, self.centres.T)
        distance = np.sum((white[:, :, None] - white_centres[:, None, :]) ** 2, axis=0)
        kernel = (1.0 + distance / degrees) ** (-0.5 * (degrees + size))
        constant = gammaln(0.5 * (degrees + size)) - gammaln(0.5 * degrees) - 0.5 * size * np.log(degrees * np.pi)
        shares = kernel @ (self.weight / self.weight.sum())
        return np.asarray(constant + np.log(shares) - np.log(np.diag(self.root)).sum())


def _adapted(nodes: Floats, weight: Floats, start: _Proposal) -> _Proposal:
    """Kernel estimate of the posterior from the nodes so far: it follows bent ridges."""
    weight = weight / weight.sum()
    away = nodes - weight @ nodes
    found = (weight[:, None] * away).T @ away
    # few effective nodes say little about a covariance: it is drawn to the curvature at the mode
    effective, size = 1.0 / np.sum(weight**2), nodes.shape[1]
    trust = effective / (effective + 2.0 * size)
    # kernel width after Silverman (1986)
    width = (4.0 / (effective * (size + 2.0))) ** (2.0 / (size + 4.0))
    covariance = min(width, 1.0) * (trust * found + (1.0 - trust) * start.covariance)
    return _Proposal(nodes, weight, covariance)


def _points(count: int, dimensions: int, rng: np.random.Generator) -> Floats:
    steps = np.sqrt(np.array(PRIMES[:dimensions], float))
    points = (rng.random(dimensions) + np.outer(np.arange(1, count + 1), steps)) % 1.0
    # the open interval, for the inverse distribution functions
    return np.clip(points, 1e-12, 1.0 - 1e-12)


@dataclass(frozen=True)
class _Batch:
    """All drift-time choices of one noise model."""

    form: str
    model: NoiseModel
    log_weight: Floats
    choice: Choices
    annual: Floats
    annual_covariance: Floats
    mean: Floats
    variance: Floats
    size: Floats
    size_variance: Floats

    @property
    def log_total(self) -> float:
        return float(np.logaddexp.reduce(self.log_weight))

    @property
    def sigma(self) -> float:
        """Typical sigma of the annual phasor, Pa."""
        weight = np.exp(self.log_weight - self.log_weight.max())
        variance = np.trace(self.annual_covariance, axis1=1, axis2=2)
        return float(np.sqrt(weight @ variance / weight.sum()))

    def weighed(self, log_proposal: float) -> "_Batch":
        return replace(self, log_weight=self.log_weight - log_proposal)


class _Solver:
    """Solves all drift-time choices of one set for one noise model; the sets take turns."""

    def __init__(self, basis: DriftBasis, sample: DriftSample) -> None:
        self.design, self.sample = basis.design, sample
        # the nodes that are left need fewer columns than the whole range of time constants
        narrow = DriftBasis(basis.design, sample.grid.nodes)
        self._reducer = Reducer(basis.design, narrow.columns)
        self._combination = narrow.combination(sample.grid.nodes)
        self._turns = count()

    def solve(self, mode: FamilyMode, scores: Floats, white_ratio: Floats) -> _Batch:
        """All choices of the next set under one noise model."""
        model, grid = mode.family.model(scores, white_ratio), self.sample.grid
        row = next(self._turns) % len(self.sample.choices)
        choices = self.sample.choices[row]
        reduction = self._reducer(self.design.covariance(model)).combined(self._combination)
        solutions = solve_choices(reduction, choices + grid.first_columns)
        return _Batch(
            form=mode.family.form,
            model=model,
            log_weight=solutions.log_evidence + self.sample.log_ratio[row] + log_score_prior(scores),
            choice=choices,
            annual=solutions.mean[:, ANNUAL],
            annual_covariance=annual_covariance(reduction, solutions),
            mean=solutions.mean[:, :, 0],
            variance=fixed_variance(reduction, solutions),
            size=solutions.size[:, :, 0],
            size_variance=np.diagonal(solutions.size_covariance, axis1=1, axis2=2),
        )


def _collect(batches: list[_Batch], nodes: tuple[Nodes, ...]) -> Components:
    log_weight = np.concatenate([batch.log_weight for batch in batches])
    weight = np.exp(log_weight - log_weight.max())
    return Components(
        weight=weight / weight.sum(),
        node=np.repeat(np.arange(len(batches)), [len(batch.log_weight) for batch in batches]),
        forms=tuple(batch.form for batch in batches),
        models=tuple(batch.model for batch in batches),
        choice=np.concatenate([batch.choice for batch in batches]),
        nodes=nodes,
        annual=np.concatenate([batch.annual for batch in batches]),
        annual_covariance=np.concatenate([batch.annual_covariance for batch in batches]),
        mean=np.concatenate([batch.mean for batch in batches]),
        variance=np.concatenate([batch.variance for batch in batches]),
        size=np.concatenate([batch.size for batch in batches]),
        size_variance=np.concatenate([batch.size_variance for batch in batches]),
    )
