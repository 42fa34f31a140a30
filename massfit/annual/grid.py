"""Grids of the drift terms, refined in turn about the joint mode."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from massfit.annual.evidence import ANNUAL, DriftBasis, Reduction, Solutions, annual_covariance, solve_choices
from massfit.annual.nodes import Nodes, first_nodes
from massfit.annual.noise import NoiseCovariance

Floats = NDArray[np.float64]
Choices = NDArray[np.int64]

LARGEST_MASS = 0.2
"""A grid is fine enough when no node with a time constant holds more of its mass than this ..."""

PHASOR_TOLERANCE = 0.01
"""... and the annual phasor moved by less than this part of its sigma in the last refinement."""

NEGLIGIBLE_MASS = 1e-4
"""Nodes of less mass are left out."""

MAX_ROUNDS = 25


@dataclass(frozen=True)
class DriftGrid:
    """Nodes of every drift term of a site.

    Parameters
    ----------
    nodes : tuple of Nodes
        One entry a term.
    mass : tuple of (G_d,) array
        Posterior masses; each sums to 1.
    best : (D,) array of int
        Node of each term at the joint mode.
    """

    nodes: tuple[Nodes, ...]
    mass: tuple[Floats, ...]
    best: Choices

    @property
    def first_columns(self) -> Choices:
        """Column of each term's first node when all nodes stand side by side."""
        return np.cumsum([0, *(len(nodes) for nodes in self.nodes)])[:-1].astype(np.int64)

    @property
    def mode(self) -> tuple[Nodes, ...]:
        """The one node of each term at the joint mode."""
        return tuple(nodes.take(np.array([node])) for nodes, node in zip(self.nodes, self.best, strict=True))

    @property
    def size(self) -> int:
        """Nodes of all terms together."""
        return sum(len(nodes) for nodes in self.nodes)

    @property
    def resolved(self) -> bool:
        """Whether no node with a time constant holds much of its mass."""
        return all((mass[nodes.timed] < LARGEST_MASS).all() for nodes, mass in zip(self.nodes, self.mass, strict=True))

    def split(self) -> "DriftGrid":
        """Grid with every heavy interval halved; its masses are still to be found."""
        return grid_of(tuple(nodes.split(mass) for nodes, mass in zip(self.nodes, self.mass, strict=True)), self.mode)

    def pruned(self) -> "DriftGrid":
        """Grid without the nodes of negligible mass."""
        keep = [mass > NEGLIGIBLE_MASS for mass in self.mass]
        nodes = tuple(own.take(kept) for own, kept in zip(self.nodes, keep, strict=True))
        masses = tuple(mass[kept] / mass[kept].sum() for mass, kept in zip(self.mass, keep, strict=True))
        best = [int(np.sum(kept[:node])) for node, kept in zip(self.best, keep, strict=True)]
        return DriftGrid(nodes, masses, np.array(best, np.int64))


def grid_of(nodes: tuple[Nodes, ...], near: tuple[Nodes, ...]) -> DriftGrid:
    """Grid on given nodes whose mode is next to `near` and whose masses are the prior's."""
    best = [int(own.nearest(one.form, one.log_time)[0]) for own, one in zip(nodes, near, strict=True)]
    return DriftGrid(nodes, tuple(own.prior for own in nodes), np.array(best, np.int64))


def refine_grid(noise: NoiseCovariance, basis: DriftBasis, start: DriftGrid | None = None) -> DriftGrid:
    """Refine the grids in turn until the annual phasor stands still.

    Parameters
    ----------
    noise : NoiseCovariance
    basis : DriftBasis
    start : DriftGrid, optional
        Grid to begin with, found with other noise.

    Returns
    -------
    DriftGrid
        Masses are those in turn, the other terms held at the joint mode.
    """
    if start is None:
        nodes = tuple(first_nodes(term.forms, term.low, term.high) for term in basis.design.terms)
        start = grid_of(nodes, tuple(own.take(np.array([len(own) // 2])) for own in nodes))
    if not start.nodes:
        return start
    reduction = basis.reduce(noise)
    grid, phasors, _ = _weigh(reduction, basis, start)
    for _ in range(MAX_ROUNDS):
        finer, previous = grid.split(), phasors
        if finer.size == grid.size:
            return grid
        grid, phasors, sigma = _weigh(reduction, basis, finer)
        if grid.resolved and np.abs((phasors - previous) / sigma).max() < PHASOR_TOLERANCE:
            return grid
    return grid


def _weigh(whole: Reduction, basis: DriftBasis, grid: DriftGrid) -> tuple[DriftGrid, Floats, Floats]:
    """Grid with mode and masses, the phasors (D, 2) with each grid in turn, and their sigmas."""
    reduction = whole.combined(basis.combination(grid.nodes))
    best, settled = grid.best, False
    while not settled:
        grid = replace(grid, best=best)
        best = best.copy()
        scans = []
        for place in range(len(best)):
            scans.append(_scan(reduction, grid, best, place))
            best[place] = int(np.argmax(scans[place].log_evidence))
        settled = np.array_equal(best, grid.best)
    masses, phasors, sigmas = [], [], []
    for solutions, nodes in zip(scans, grid.nodes, strict=True):
        mass = np.exp(solutions.log_evidence - solutions.log_evidence.max()) * nodes.prior
        masses.append(mass / mass.sum())
        annual = solutions.mean[:, ANNUAL, 0]
        phasors.append(masses[-1] @ annual)
        within = np.diagonal(annual_covariance(reduction, solutions), axis1=1, axis2=2)
        sigmas.append(np.sqrt(masses[-1] @ (within + (annual - phasors[-1]) ** 2)))
    return replace(grid, mass=tuple(masses)), np.array(phasors), np.array(sigmas)


def _scan(reduction: Reduction, grid: DriftGrid, best: Choices, place: int) -> Solutions:
    count = len(grid.nodes[place])
    choices = np.tile(best, (count, 1))
    choices[:, place] = np.arange(count)
    return solve_choices(reduction, choices + grid.first_columns)
