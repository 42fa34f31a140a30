"""Evidence and coefficients of the linear model, given noise and drift times.

With y = X b + noise of covariance V and a normal prior of precision P on b, the
evidence is |V|^-1/2 |X'V^-1 X + P|^-1/2 exp(-q/2), q the least squares at the
posterior mean (for example Rasmussen & Williams 2006, section 2.7). The fixed
columns are eliminated once for a noise model; what is left for a choice of drift
times is a problem of one row and column per exponential.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import block_diag

from massfit.annual.design import Design
from massfit.annual.noise import NoiseCovariance

Floats = NDArray[np.float64]

ANNUAL = np.array([0, 1])
"""Fixed columns that hold the annual phasor."""

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
        Response of the fixed coefficients to each exponential.
    exponential : (E, E) array
        Normal matrix of the exponentials, prior included.
    exponential_right : (E, 1 + M + C) array
        Their right-hand sides.
    log_exponential_sd : float
        Logarithm of the prior standard deviation of an exponential's size.
    """

    log_evidence: float
    mean: Floats
    covariance: Floats
    leak: Floats
    exponential: Floats
    exponential_right: Floats
    log_exponential_sd: float


def compress(exponentials: Floats, first_columns: NDArray[np.int64]) -> tuple[Floats, Floats]:
    """Few columns that span those of each deployment, by singular values.

    Decays with neighbouring time constants are nearly the same: a grid of forty needs
    about ten directions.

    Parameters
    ----------
    exponentials : (n, E) array
    first_columns : (D,) array of int
        First column of each deployment.

    Returns
    -------
    basis : (n, B) array
    combination : (B, E) array
        ``basis @ combination`` is `exponentials`.
    """
    if not len(first_columns):
        return exponentials, np.zeros((0, 0))
    bases, combinations = [], []
    for block in np.split(exponentials, first_columns[1:], axis=1):
        rows = block.any(axis=1)
        left, values, right = np.linalg.svd(block[rows], full_matrices=False)
        kept = int(np.sum(values > COMPRESSION * values.max(initial=0.0)))
        bases.append(np.zeros((len(block), kept)))
        bases[-1][rows] = left[:, :kept]
        combinations.append(values[:kept, None] * right[:kept])
    return np.column_stack(bases), block_diag(*combinations)


class Reducer:
    """Columns of one site laid side by side, to be reduced under one noise model after another.

    Parameters
    ----------
    design : Design
    exponentials : (n, E) array
        Columns of every choice of every drift term, or what spans them.
    combination : (B, E) array, optional
        How they are made of the columns given.
    data_only : bool
        Whether contrasts and companions are left out; the search of the mode has no use for them.
    """

    def __init__(
        self, design: Design, exponentials: Floats, combination: Floats | None = None, *, data_only: bool = False
    ) -> None:
        further = [] if data_only else [design.contrasts, design.companions]
        self._design, self._combination, self._width = design, combination, exponentials.shape[1]
        self._stacked = np.column_stack([design.fixed, exponentials, design.data, *further])

    def __call__(self, noise: NoiseCovariance) -> Reduction:
        """Whiten all columns and eliminate the fixed ones."""
        design, combination, count, width = self._design, self._combination, self._design.fixed.shape[1], self._width
        white = noise.whiten(self._stacked)
        sums = white.T @ white
        normal = sums[:count, :count] + np.diag(design.precision)
        covariance = np.asarray(np.linalg.inv(normal), float)
        solved = covariance @ sums[:count, count:]
        rest = sums[count:, count:] - sums[count:, :count] @ solved
        leak, exponential, right = solved[:, :width], rest[:width, :width], rest[:width, width:]
        if combination is not None:
            leak, right = leak @ combination, combination.T @ right
            exponential = combination.T @ exponential @ combination
        log_evidence = -0.5 * (noise.log_determinant + np.linalg.slogdet(normal)[1] + rest[width, width])
        return Reduction(
            log_evidence=float(log_evidence),
            mean=solved[:, width:],
            covariance=covariance,
            leak=leak,
            exponential=exponential + np.eye(len(exponential)) / design.exponential_sd**2,
            exponential_right=right,
            log_exponential_sd=float(np.log(design.exponential_sd)),
        )


def reduce_columns(noise: NoiseCovariance, design: Design, exponentials: Floats) -> Reduction:
    """Whiten all columns of a site and eliminate the fixed ones; see `Reducer`."""
    return Reducer(design, exponentials)(noise)


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
    normal = reduction.exponential[choices[:, :, None], choices[:, None, :]]
    right = reduction.exponential_right[choices]
    covariance = np.asarray(np.linalg.inv(normal), float)
    size = covariance @ right
    gain = np.sum(right[..., 0] * size[..., 0], axis=1)
    log_determinant = np.linalg.slogdet(normal)[1] + 2.0 * choices.shape[1] * reduction.log_exponential_sd
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
    normal = reduction.exponential[others[:, :, None], others[:, None, :]]
    cross = reduction.exponential[others[:, :, None], columns]
    right = reduction.exponential_right[:, 0]
    solved = np.linalg.inv(normal) @ cross
    own = np.diag(reduction.exponential)[columns] - np.sum(cross * solved, axis=1)
    # no less than the prior precision, which rounding can hide where two recorders agree to their resolution
    own = np.maximum(own, np.exp(-2.0 * reduction.log_exponential_sd))
    own_right = right[columns] - np.sum(right[others][:, :, None] * solved, axis=1)
    alone = solve_choices(reduction, others).log_evidence
    return np.asarray(alone[:, None] + 0.5 * (own_right**2 / own - np.log(own)) - reduction.log_exponential_sd)


def annual_covariance(reduction: Reduction, solutions: Solutions) -> Floats:
    """Covariance of the annual phasor for every choice: (C, 2, 2), Pa^2."""
    leak = solutions.leak[:, ANNUAL]
    own = reduction.covariance[np.ix_(ANNUAL, ANNUAL)]
    return np.asarray(own + leak @ solutions.size_covariance @ leak.swapaxes(1, 2))


def fixed_variance(reduction: Reduction, solutions: Solutions) -> Floats:
    """Variance of every fixed coefficient for every choice: (C, f), Pa^2."""
    spread = np.sum((solutions.leak @ solutions.size_covariance) * solutions.leak, axis=2)
    return np.asarray(np.diag(reduction.covariance) + spread)
