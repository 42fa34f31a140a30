"""The drift of a site given its noise: weighted choices of forms and time constants, exactly normal given each."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.annual.chains import sample_drift
from massfit.annual.design import Design, DriftColumns, build_design, mean_circulation
from massfit.annual.evidence import DriftBasis, Reduction, Solutions, solve_choices
from massfit.annual.grid import DriftGrid, refine_grid
from massfit.annual.nodes import Nodes
from massfit.annual.noise import NoiseModel
from massfit.annual.record import ReducedRecord
from massfit.settings import Priors

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class DriftPosterior:
    """Drift of all deployments of a site together, at one noise model.

    Parameters
    ----------
    mode : tuple of Nodes
        One node of each drift term, at the joint mode.
    grid : DriftGrid
        Nodes of each drift term.
    choices : (C, D) array of int
        Node of each drift term.
    weight : (C,) array
        Sum 1.
    reduction : Reduction
        The fixed columns, eliminated.
    solutions : Solutions
        At the choices.
    """

    mode: tuple[Nodes, ...]
    grid: DriftGrid
    choices: NDArray[np.int64]
    weight: Floats
    reduction: Reduction
    solutions: Solutions


def drift_posterior(design: Design, noise: NoiseModel, rng: np.random.Generator) -> DriftPosterior:
    """Integrate forms and time constants of the drift at one noise model.

    Parameters
    ----------
    design : Design
    noise : NoiseModel
    rng : numpy.random.Generator

    Returns
    -------
    DriftPosterior
    """
    covariance, basis = design.covariance(noise), DriftBasis(design)
    grid = refine_grid(covariance, basis)
    sample = sample_drift(covariance, basis, grid, rng)
    reduction = basis.reduce(covariance).combined(basis.combination(sample.grid.nodes))
    choices = sample.choices.reshape(sample.log_ratio.size, -1)
    solutions = solve_choices(reduction, choices + sample.grid.first_columns)
    log_weight = solutions.log_evidence + sample.log_ratio.ravel()
    weight = np.exp(log_weight - log_weight.max())
    return DriftPosterior(grid.mode, sample.grid, choices, weight / weight.sum(), reduction, solutions)


@dataclass(frozen=True)
class DrawnDrift:
    """Draws of the drift of one deployment.

    Parameters
    ----------
    days : (count, n) array
        Level, slope, exponential or logarithm, and steps on the days of the record, Pa.
    calibrations : (count, c) array
        The same, less level and steps, at its in-situ calibrations, Pa.
    """

    days: Floats
    calibrations: Floats


def draw_drift(
    records: Sequence[ReducedRecord],
    noise: NoiseModel,
    *,
    reference_year: int,
    rng: np.random.Generator,
    priors: Priors = Priors(),  # noqa: B008 (frozen)
    count: int = 1,
) -> tuple[DrawnDrift, ...]:
    """Draw the drift of a site from its posterior at one noise model, all deployments together.

    Parameters
    ----------
    records : sequence of ReducedRecord
    noise : NoiseModel
        Such as that at the joint mode of the site's fit.
    reference_year : int
    rng : numpy.random.Generator
    priors : Priors
    count : int
        Draws.

    Returns
    -------
    tuple of DrawnDrift
        One a deployment, in the order given.

    Examples
    --------
    An invented record of one year without any drift, and white noise of 5 Pa: the drift is known to a few Pa:

    >>> time = np.datetime64("2016-01-01T12", "ns") + np.arange(365) * np.timedelta64(1, "D")
    >>> pressure = np.random.default_rng(1).normal(0.0, 5.0, 365)
    >>> record = ReducedRecord("one", time, pressure, np.empty((0, 365)), time[0], drift="linear")
    >>> white = NoiseModel(np.zeros(0), np.zeros(0), np.array([5.0]))
    >>> (drawn,) = draw_drift([record], white, reference_year=2016, rng=np.random.default_rng(2))
    >>> drawn.days.shape, bool(np.abs(drawn.days).max() < 10.0)
    ((1, 365), True)
    """
    design = build_design(records, reference_year=reference_year, priors=priors)
    found = drift_posterior(design, noise, rng)
    chosen = rng.choice(len(found.weight), count, p=found.weight)
    solutions = found.solutions
    size = solutions.size[chosen, :, 0] + _normal(solutions.size_covariance[chosen], rng)
    fixed = found.reduction.mean[:, 0] - np.einsum("nfd,nd->nf", solutions.leak[chosen], size)
    fixed += _normal(np.broadcast_to(found.reduction.covariance, (count, *found.reduction.covariance.shape)), rng)

    def curves(drift: DriftColumns, rows: NDArray[np.int64]) -> Floats:
        own = np.array(drift.fixed)
        drawn = fixed[:, own] @ design.fixed[np.ix_(rows, own)].T
        for place in drift.terms:
            columns = design.term_columns(design.terms[place], found.grid.nodes[place], rows)
            drawn = drawn + size[:, place, None] * columns.T[found.choices[chosen, place]]
        return np.asarray(drawn)

    return tuple(
        DrawnDrift(curves(drift, drift.rows) + _level(record), curves(drift, drift.calibration_rows))
        for record, drift in zip(records, design.drifts, strict=True)
    )


def _normal(covariance: Floats, rng: np.random.Generator) -> Floats:
    """Draw one vector (n, k) from each of the covariances (n, k, k), which may be singular to rounding."""
    values, vectors = np.linalg.eigh(covariance)
    noise = np.sqrt(np.maximum(values, 0.0)) * rng.standard_normal(values.shape)
    return np.asarray((vectors @ noise[:, :, None])[:, :, 0])


def _level(record: ReducedRecord) -> float:
    return float((record.pressure - mean_circulation(record)).mean())
