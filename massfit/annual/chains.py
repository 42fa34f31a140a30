"""Joint sample of the drift terms of a site that has several.

Terms meet in the annual phasor that the deployments share. Gibbs chains
(Geman & Geman 1984) run over the nodes of the grids at the mode of the noise; their
conditional masses, averaged over the chains, show where the grids must be finer than
each in turn would ask for. The evidence is taken to a power below one, so that the
sample is wide enough to be re-weighted to other noise amplitudes.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from massfit.annual.evidence import DriftBasis, Reduction, conditional_log_evidence
from massfit.annual.grid import DriftGrid
from massfit.annual.noise import NoiseCovariance

Floats = NDArray[np.float64]
Choices = NDArray[np.int64]

CHAINS = 64
"""Chains run side by side."""

BURN_IN = 8
"""Sweeps before the sample is kept; the chains start from the masses in turn."""

KEPT_SWEEPS = 32

POWER = 0.7
"""Power of the evidence that the chains sample."""

REFINEMENTS = 4

REFINEMENT_SWEEPS = 4


@dataclass(frozen=True)
class DriftSample:
    """Choices of the drift terms and how they are to be weighed.

    Parameters
    ----------
    grid : DriftGrid
    choices : (R, C, D) array of int
        R sets of C choices of nodes.
    log_ratio : (R, C) array
        Log of prior mass over sampling density: a weight needs the log evidence added.
    """

    grid: DriftGrid
    choices: Choices
    log_ratio: Floats


def sample_drift(noise: NoiseCovariance, basis: DriftBasis, grid: DriftGrid, rng: np.random.Generator) -> DriftSample:
    """Choices of the drift terms: every node for one, a joint sample for more.

    Parameters
    ----------
    noise : NoiseCovariance
        At the joint mode.
    basis : DriftBasis
    grid : DriftGrid
        Refined in turn.
    rng : numpy.random.Generator

    Returns
    -------
    DriftSample
    """
    if len(grid.nodes) < 2:
        grid = grid.pruned()
        choices = np.arange(len(grid.nodes[0]) if grid.nodes else 1)[None, :, None][:, :, : len(grid.nodes)]
        log_ratio = np.log(grid.nodes[0].prior) if grid.nodes else np.zeros(1)
        return DriftSample(grid, choices, log_ratio[None, :])
    whole = basis.reduce(noise)
    choices = np.column_stack([_draw(np.tile(mass, (CHAINS, 1)), rng) for mass in grid.mass])
    for _ in range(REFINEMENTS):
        chains = _Chains(whole, basis, grid, choices)
        finer = replace(grid, mass=chains.run(REFINEMENT_SWEEPS, rng)).split()
        choices = _moved(chains.choices, grid, finer)
        if all(len(new) == len(old) for new, old in zip(finer.nodes, grid.nodes, strict=True)):
            break
        grid = finer
    chains = _Chains(whole, basis, grid, choices)
    final = replace(grid, mass=chains.run(REFINEMENT_SWEEPS, rng)).pruned()
    choices, grid = _moved(chains.choices, grid, final), final
    chains = _Chains(whole, basis, grid, choices)
    chains.run(BURN_IN, rng)
    kept, log_evidence = [], []
    for _ in range(KEPT_SWEEPS):
        chains.run(1, rng)
        kept.append(chains.choices.copy())
        log_evidence.append(chains.log_evidence)
    return DriftSample(grid, np.array(kept), -POWER * np.array(log_evidence) - np.log(CHAINS))


class _Chains:
    """Gibbs chains over the nodes of one grid."""

    def __init__(self, whole: Reduction, basis: DriftBasis, grid: DriftGrid, choices: Choices) -> None:
        self.grid = grid
        self.reduction = whole.combined(basis.combination(grid.nodes))
        self.choices = choices.copy()
        self.log_evidence = np.zeros(len(choices))

    def run(self, sweeps: int, rng: np.random.Generator) -> tuple[Floats, ...]:
        """Run some sweeps; returns the conditional masses averaged over chains and sweeps."""
        masses = [np.zeros(len(nodes)) for nodes in self.grid.nodes]
        first = self.grid.first_columns
        for _ in range(sweeps):
            for place, prior in enumerate(nodes.prior for nodes in self.grid.nodes):
                columns = first[place] + np.arange(len(prior))
                log_evidence = conditional_log_evidence(self.reduction, self.choices + first, place, columns)
                density = prior * np.exp(POWER * (log_evidence - log_evidence.max(axis=1, keepdims=True)))
                density /= density.sum(axis=1, keepdims=True)
                masses[place] += density.mean(axis=0) / sweeps
                self.choices[:, place] = _draw(density, rng)
                self.log_evidence = log_evidence[np.arange(len(log_evidence)), self.choices[:, place]]
        return tuple(masses)


def _moved(choices: Choices, old: DriftGrid, new: DriftGrid) -> Choices:
    """Places on a new grid of (C, D) choices on an old one."""
    columns = [
        after.nearest(before.form[own], before.log_time[own])
        for before, after, own in zip(old.nodes, new.nodes, choices.T, strict=True)
    ]
    return np.column_stack(columns)


def _draw(mass: Floats, rng: np.random.Generator) -> Choices:
    """One node for every row of (C, G) masses."""
    reached = np.cumsum(mass, axis=1)
    column = np.sum(reached < rng.random((len(mass), 1)) * reached[:, -1:], axis=1)
    return np.asarray(np.minimum(column, mass.shape[1] - 1), np.int64)
