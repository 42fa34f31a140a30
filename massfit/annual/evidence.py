"""Evidence and coefficients of the linear model, given noise and drift times.

With y = X b + noise of covariance V and a normal prior of precision P on b, the
evidence is |V|^-1/2 |X'V^-1 X + P|^-1/2 exp(-q/2), q the least squares at the
posterior mean (for example Rasmussen & Williams 2006, section 2.7). The fixed
columns are eliminated once for a noise model; what is left for a choice of drift
times is a problem of one row and column per exponential.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import block_diag

from massfit.annual.design import Design, DriftTerm
from massfit.annual.nodes import Nodes, first_nodes
from massfit.annual.noise import NoiseCovariance, NoiseModel

Floats = NDArray[np.float64]

ANNUAL = np.array([0, 1])
"""Fixed columns that hold the annual phasor."""

SPANNING_NODES = 40
"""Time constants of a form, log-spaced over its range, whose columns make the basis."""

COMPRESSION = 1e-9
"""Singular values kept, relative to the largest: a drift of 30 hPa is kept to 1e-4 Pa over a thousand days."""


@dataclass(frozen=True)
class LinearFit:
    """Least squares with a normal prior.

    Parameters
    ----------
    mean : (f, r) array
        Coefficients of each of r data columns.
    covariance : (f, f) array
        Of the coefficients, for unit noise.
    misfit : (r,) array
        Squared residuals and squared prior terms at `mean`.
    log_determinant : float
        Of the inverse of `covariance`.
    """

    mean: Floats
    covariance: Floats
    misfit: Floats
    log_determinant: float


def linear_fit(columns: Floats, data: Floats, precision: Floats) -> LinearFit:
    """Fit whitened columns to whitened data.

    Parameters
    ----------
    columns : (n, f) array
    data : (n, r) array
    precision : (f,) array
        Prior precision of the coefficients; zero is flat.

    Returns
    -------
    LinearFit

    Examples
    --------
    >>> line = np.column_stack([np.ones(3), [0.0, 1.0, 2.0]])
    >>> fit = linear_fit(line, np.array([[1.0], [3.0], [5.0]]), np.zeros(2))
    >>> fit.mean.ravel().round(12)
    array([1., 2.])
    """
    normal = columns.T @ columns + np.diag(precision)
    right = columns.T @ data
    covariance = np.asarray(np.linalg.inv(normal), float)
    mean = covariance @ right
    residual = data - columns @ mean
    misfit = np.sum(residual**2, axis=0) + precision @ mean**2
    return LinearFit(mean, covariance, misfit, float(np.linalg.slogdet(normal)[1]))


@dataclass(frozen=True)
class Reduction:
    """Sums of one noise model with the fixed columns eliminated.

    Parameters
    ----------
    log_evidence : float
        Log evidence of the fixed columns alone.
    mean : (f, 1 + M + C) array
        Their coefficients, for data, contrasts and companions.
    covariance : (f, f) array
        Of the fixed coefficients, Pa^2.
    leak : (f, E) array
        Response of the fixed coefficients to each column of the drift terms.
    normal : (E, E) array
        Normal matrix of these columns, without the prior of their sizes.
    right : (E, 1 + M + C) array
        Their right-hand sides.
    precision : float
        Prior precision of the sizes, Pa^-2.
    """

    log_evidence: float
    mean: Floats
    covariance: Floats
    leak: Floats
    normal: Floats
    right: Floats
    precision: float

    def combined(self, combination: Floats) -> "Reduction":
        """Reduction of columns that are made of those of this one: (E, G) coefficients."""
        return replace(
            self,
            leak=self.leak @ combination,
            normal=combination.T @ self.normal @ combination,
            right=combination.T @ self.right,
        )


class ChosenEvidence:
    """Log evidence of one noise model after another at one choice of every drift term.

    Parameters
    ----------
    design : Design
    terms : (n, D) array
        The column chosen for each term.
    """

    def __init__(self, design: Design, terms: Floats) -> None:
        self._design = design
        self._stacked = np.column_stack([design.fixed, terms, design.data])
        self._precision = np.diag(np.append(design.precision, np.full(terms.shape[1], design.exponential_sd**-2)))
        self._log_prior = terms.shape[1] * np.log(design.exponential_sd)

    def __call__(self, model: NoiseModel) -> float:
        """Log evidence."""
        noise = self._design.covariance(model)
        white = noise.whiten(self._stacked)
        sums = white.T @ white
        normal, right = sums[:-1, :-1] + self._precision, sums[:-1, -1]
        misfit = sums[-1, -1] - right @ np.linalg.solve(normal, right)
        determinants = noise.log_determinant + np.linalg.slogdet(normal)[1]
        return float(-0.5 * (determinants + misfit) - self._log_prior)


class DriftBasis:
    """Few columns of every drift term that span those of all its time constants.

    Decays with neighbouring time constants are nearly the same: a dozen directions hold them
    all, and are whitened once for a noise model whatever the grid.

    Parameters
    ----------
    design : Design
    nodes : sequence of Nodes, optional
        Choices of each term to be spanned; those of the whole range by default.
    """

    def __init__(self, design: Design, nodes: Sequence[Nodes] | None = None) -> None:
        if nodes is None:
            nodes = [first_nodes(term.forms, term.low, term.high, SPANNING_NODES) for term in design.terms]
        self.design = design
        self._spans = [_span(design, term, own) for term, own in zip(design.terms, nodes, strict=True)]
        padded = [np.zeros((len(design.days), 0))]
        for rows, span in self._spans:
            padded.append(np.zeros((len(design.days), span.shape[1])))
            padded[-1][rows] = span
        self.columns = np.column_stack(padded)

    def combination(self, nodes: Sequence[Nodes]) -> Floats:
        """How the columns of given choices are made of the basis: (B, sum G_d)."""
        blocks = [
            span.T @ self.design.term_columns(term, own, rows)
            for term, own, (rows, span) in zip(self.design.terms, nodes, self._spans, strict=True)
        ]
        return np.asarray(block_diag(*blocks)) if blocks else np.zeros((0, 0))

    def of_term(self, place: int, nodes: Nodes) -> Floats:
        """How the columns of choices of one term are made of the basis: (B, G)."""
        widths = [span.shape[1] for _, span in self._spans]
        rows, span = self._spans[place]
        first = sum(widths[:place])
        combination = np.zeros((sum(widths), len(nodes)))
        combination[first : first + widths[place]] = span.T @ self.design.term_columns(
            self.design.terms[place], nodes, rows
        )
        return combination

    def reduce(self, noise: NoiseCovariance) -> "Reduction":
        """Whiten the data and the basis and eliminate the fixed columns; contrasts and companions are left out."""
        return Reducer(self.design, self.columns, data_only=True)(noise)


def _span(design: Design, term: DriftTerm, nodes: Nodes) -> tuple[NDArray[np.int64], Floats]:
    """Rows of a deployment, and orthonormal columns on them."""
    drift = design.drifts[term.deployment]
    rows = np.append(drift.rows, drift.calibration_rows)
    columns = design.term_columns(term, nodes, rows)
    left, values, _ = np.linalg.svd(columns, full_matrices=False)
    return rows, left[:, values > COMPRESSION * values[0]]


class Reducer:
    """Columns of one site laid side by side, to be reduced under one noise model after another.

    Parameters
    ----------
    design : Design
    terms : (n, B) array
        Columns of every choice of every drift term, or a basis of them.
    data_only : bool
        Whether contrasts and companions are left out.
    """

    def __init__(self, design: Design, terms: Floats, *, data_only: bool = False) -> None:
        further = [] if data_only else [design.contrasts, design.companions]
        self._design, self._width = design, terms.shape[1]
        self._stacked = np.column_stack([design.fixed, terms, design.data, *further])

    def __call__(self, noise: NoiseCovariance) -> Reduction:
        """Whiten all columns and eliminate the fixed ones."""
        design, count, width = self._design, self._design.fixed.shape[1], self._width
        white = noise.whiten(self._stacked)
        sums = white.T @ white
        normal = sums[:count, :count] + np.diag(design.precision)
        covariance = np.asarray(np.linalg.inv(normal), float)
        solved = covariance @ sums[:count, count:]
        rest = sums[count:, count:] - sums[count:, :count] @ solved
        log_evidence = -0.5 * (noise.log_determinant + np.linalg.slogdet(normal)[1] + rest[width, width])
        return Reduction(
            log_evidence=float(log_evidence),
            mean=solved[:, width:],
            covariance=covariance,
            leak=solved[:, :width],
            normal=rest[:width, :width],
            right=rest[:width, width:],
            precision=design.exponential_sd**-2,
        )


def reduce_columns(noise: NoiseCovariance, design: Design, terms: Floats) -> Reduction:
    """Whiten all columns of a site and eliminate the fixed ones; see `Reducer`."""
    return Reducer(design, terms)(noise)


@dataclass(frozen=True)
class Solutions:
    """Exact solutions for C choices of the drift times.

    Parameters
    ----------
    log_evidence : (C,) array
    size : (C, D, 1 + M + ...) array
        Sizes of the exponentials, for data, contrasts and companions, Pa.
    size_covariance : (C, D, D) array
        Pa^2.
    mean : (C, f, 1 + M + ...) array
        Fixed coefficients, for data, contrasts and companions.
    leak : (C, f, D) array
        Response of the fixed coefficients to the exponentials chosen.
    """

    log_evidence: Floats
    size: Floats
    size_covariance: Floats
    mean: Floats
    leak: Floats


def solve_choices(reduction: Reduction, choices: NDArray[np.int64]) -> Solutions:
    """Solve for choices of one exponential per deployment.

    Parameters
    ----------
    reduction : Reduction
    choices : (C, D) array of int
        Columns among the exponentials; D may be 0.

    Returns
    -------
    Solutions
    """
    normal = reduction.normal[choices[:, :, None], choices[:, None, :]] + reduction.precision * np.eye(choices.shape[1])
    right = reduction.right[choices]
    covariance = np.asarray(np.linalg.inv(normal), float)
    size = covariance @ right
    gain = np.sum(right[..., 0] * size[..., 0], axis=1)
    log_determinant = np.linalg.slogdet(normal)[1] - choices.shape[1] * np.log(reduction.precision)
    leak = reduction.leak.T[choices].swapaxes(1, 2)
    return Solutions(
        log_evidence=reduction.log_evidence + 0.5 * (gain - log_determinant),
        size=size,
        size_covariance=covariance,
        mean=reduction.mean - leak @ size,
        leak=leak,
    )


def conditional_log_evidence(
    reduction: Reduction, choices: NDArray[np.int64], place: int, columns: NDArray[np.int64]
) -> Floats:
    """Log evidence with one exponential of each choice replaced by others in turn.

    The exponentials that stay are eliminated once per choice.

    Parameters
    ----------
    reduction : Reduction
    choices : (C, D) array of int
    place : int
        Which exponential is replaced.
    columns : (G,) array of int
        What it is replaced by.

    Returns
    -------
    (C, G) array
    """
    others = np.delete(choices, place, axis=1)
    normal = reduction.normal[others[:, :, None], others[:, None, :]] + reduction.precision * np.eye(others.shape[1])
    inverse, right = np.linalg.inv(normal), reduction.right[:, 0]
    cross, right_others = reduction.normal[:, columns][others], right[others]
    weights = (inverse @ right_others[:, :, None])[:, :, 0]
    log_determinant = np.linalg.slogdet(normal)[1] - others.shape[1] * np.log(reduction.precision)
    alone = 0.5 * (np.einsum("cd,cd->c", right_others, weights) - log_determinant)
    own = reduction.precision + np.diag(reduction.normal)[columns] - np.einsum("cdg,cdg->cg", cross, inverse @ cross)
    # no less than the prior precision, which rounding can hide where two recorders agree to their resolution
    own = np.maximum(own, reduction.precision)
    own_right = right[columns] - (weights[:, None, :] @ cross)[:, 0]
    gain = own_right**2 / own - np.log(own / reduction.precision)
    return np.asarray(reduction.log_evidence + alone[:, None] + 0.5 * gain)


def annual_covariance(reduction: Reduction, solutions: Solutions) -> Floats:
    """Covariance of the annual phasor for every choice: (C, 2, 2), Pa^2."""
    leak = solutions.leak[:, ANNUAL]
    own = reduction.covariance[np.ix_(ANNUAL, ANNUAL)]
    return np.asarray(own + leak @ solutions.size_covariance @ leak.swapaxes(1, 2))


def fixed_variance(reduction: Reduction, solutions: Solutions) -> Floats:
    """Variance of every fixed coefficient for every choice: (C, f), Pa^2."""
    spread = np.sum((solutions.leak @ solutions.size_covariance) * solutions.leak, axis=2)
    return np.asarray(np.diag(reduction.covariance) + spread)
