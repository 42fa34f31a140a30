"""Grids of the drift time constants, refined in turn about the joint mode."""

from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from massfit.annual.design import Design
from massfit.annual.evidence import ANNUAL, Reduction, Solutions, annual_covariance, reduce_columns, solve_choices
from massfit.annual.noise import NoiseCovariance

Floats = NDArray[np.float64]
Choices = NDArray[np.int64]

FIRST_NODES = 13
"""Nodes of the first grid, log-spaced over the prior range."""

LARGEST_MASS = 0.2
"""A grid is fine enough when no node holds more of its mass than this ..."""

PHASOR_TOLERANCE = 0.01
"""... and the annual phasor moved by less than this part of its sigma in the last refinement."""

SPLIT_MASS = 0.06
"""An interval is halved when it holds more mass than this."""

NEGLIGIBLE_MASS = 1e-4
"""Nodes of less mass are left out."""

MAX_ROUNDS = 25


@dataclass(frozen=True)
class DriftGrid:
    """Nodes of every exponential of a site.

    Parameters
    ----------
    logs : tuple of (G_d,) array
        Sorted logarithms of the time constants in days.
    prior_mass : tuple of (G_d,) array
        Trapezoid masses of the log-uniform prior.
    mass : tuple of (G_d,) array
        Posterior masses; each sums to 1.
    best : (D,) array of int
        Node of each exponential at the joint mode.
    """

    logs: tuple[Floats, ...]
    prior_mass: tuple[Floats, ...]
    mass: tuple[Floats, ...]
    best: Choices

    @property
    def time_constants(self) -> tuple[Floats, ...]:
        """Nodes in days."""
        return tuple(np.exp(nodes) for nodes in self.logs)

    @property
    def first_columns(self) -> Choices:
        """Column of each exponential's first node when all nodes stand side by side."""
        return np.cumsum([0, *(len(nodes) for nodes in self.logs)])[:-1].astype(np.int64)

    @property
    def mode(self) -> Floats:
        """Time constants at the joint mode: (D,), days."""
        chosen = [nodes[node] for nodes, node in zip(self.logs, self.best, strict=True)]
        return np.asarray(np.exp(chosen), float)

    def nearest(self, logs: Floats) -> Choices:
        """Nodes nearest to (..., D) logarithms."""
        columns = [np.abs(logs[..., d, None] - nodes).argmin(axis=-1) for d, nodes in enumerate(self.logs)]
        return np.stack(columns, axis=-1).astype(np.int64) if columns else np.zeros(logs.shape, np.int64)

    def split(self) -> "DriftGrid":
        """Grid with every heavy interval halved; its masses are still to be found."""
        logs = tuple(_insert(nodes, mass) for nodes, mass in zip(self.logs, self.mass, strict=True))
        return grid_of(logs, np.log(self.mode))

    def pruned(self) -> "DriftGrid":
        """Grid without the nodes of negligible mass."""
        keep = [mass > NEGLIGIBLE_MASS for mass in self.mass]
        logs = tuple(nodes[kept] for nodes, kept in zip(self.logs, keep, strict=True))
        prior = tuple(mass[kept] for mass, kept in zip(self.prior_mass, keep, strict=True))
        masses = tuple(mass[kept] / mass[kept].sum() for mass, kept in zip(self.mass, keep, strict=True))
        best = [int(np.sum(kept[:node])) for node, kept in zip(self.best, keep, strict=True)]
        return DriftGrid(logs, prior, masses, np.array(best, np.int64))


def grid_of(logs: tuple[Floats, ...], near: Floats) -> DriftGrid:
    """Grid on given nodes whose mode is next to (D,) `near` and whose masses are the prior's."""
    prior = tuple(_trapezoid_mass(nodes) for nodes in logs)
    grid = DriftGrid(logs, prior, prior, np.zeros(len(logs), np.int64))
    return replace(grid, best=grid.nearest(near))


def refine_grid(noise: NoiseCovariance, design: Design, start: Floats | None = None) -> DriftGrid:
    """Refine the grids in turn until the annual phasor stands still.

    Parameters
    ----------
    noise : NoiseCovariance
    design : Design
    start : (D,) array, optional
        Time constants to begin the search of the mode from, days.

    Returns
    -------
    DriftGrid
        Masses are those in turn, the other time constants held at the joint mode.
    """
    ranges = np.log(design.time_ranges)
    logs = tuple(np.linspace(low, high, FIRST_NODES) for low, high in ranges)
    grid = grid_of(logs, ranges.mean(axis=1) if start is None else np.log(start))
    previous: Floats | None = None
    for _ in range(MAX_ROUNDS if logs else 0):
        grid, phasors, sigma = _weigh(noise, design, grid)
        resolved = all(mass.max() < LARGEST_MASS for mass in grid.mass)
        if resolved and previous is not None and np.abs((phasors - previous) / sigma).max() < PHASOR_TOLERANCE:
            break
        previous, grid = phasors, grid.split()
    else:
        grid = _weigh(noise, design, grid)[0] if logs else grid
    return grid


def _weigh(noise: NoiseCovariance, design: Design, grid: DriftGrid) -> tuple[DriftGrid, Floats, Floats]:
    """Grid with mode and masses, the phasors (D, 2) with each grid in turn, and their sigmas."""
    reduction = reduce_columns(noise, design, design.exponentials(grid.time_constants))
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
    for solutions, prior in zip(scans, grid.prior_mass, strict=True):
        mass = np.exp(solutions.log_evidence - solutions.log_evidence.max()) * prior
        masses.append(mass / mass.sum())
        annual = solutions.mean[:, ANNUAL, 0]
        phasors.append(masses[-1] @ annual)
        within = np.diagonal(annual_covariance(reduction, solutions), axis1=1, axis2=2)
        sigmas.append(np.sqrt(masses[-1] @ (within + (annual - phasors[-1]) ** 2)))
    return replace(grid, mass=tuple(masses)), np.array(phasors), np.array(sigmas)


def _scan(reduction: Reduction, grid: DriftGrid, best: Choices, place: int) -> Solutions:
    count = len(grid.logs[place])
    choices = np.tile(best, (count, 1))
    choices[:, place] = np.arange(count)
    return solve_choices(reduction, choices + grid.first_columns)


def _trapezoid_mass(nodes: Floats) -> Floats:
    halves = np.diff(nodes) / (2.0 * (nodes[-1] - nodes[0]))
    return np.asarray(np.append(halves, 0.0) + np.append(0.0, halves))


def _insert(nodes: Floats, mass: Floats) -> Floats:
    middles = [
        0.5 * (low + high)
        for (low, high), (left, right) in zip(pairwise(nodes), pairwise(mass), strict=True)
        if 0.5 * (left + right) > SPLIT_MASS
    ]
    return np.sort(np.append(nodes, middles))
