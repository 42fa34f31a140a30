"""The network model with normal scatter, as a regression with independent rows.

Given the scales, every site is normal and independent of the others once the network
phasor A, the air-pressure correction a and the models' common errors c_m are known. A
site's phasors split into their mean over the models and contrasts between them, and
each turns onto the axes on which its covariance is diagonal whatever the scales are:

    mean      variance = lambda + s_site^2 + s_local^2 / M_s
    contrast  variance = delta + s_local^2

so that the information of any scales is one product of row weights with one table. A site
of which only the mean over its models is known has no contrasts: its mean row is the same.
With A, a and c in units of their prior standard deviations the prior is the identity
and vanishing scales need no special case (Gelman et al. 2013, Bayesian Data Analysis,
chapters 5 and 14, for the model; the algebra is that of linear regression).
"""

from dataclasses import dataclass, fields, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from massfit.phasor import admittance_matrix
from massfit.posterior.observations import Observations, record_covariance

SCALES = ("s_site", "s_local", "s_common")
"""Names of the scales, in the order of every scale axis."""


@dataclass(frozen=True)
class Rows:
    """Independent rows that hold all the sites' phasors.

    Parameters
    ----------
    site : (n_row,) array of int
    direction : (n_row, 2) array
        Unit vector of the row in (in phase, quadrature).
    model_weight : (n_row, n_model) array
        How the models' phasors enter: equal weights (sum 1) for the mean, orthonormal
        contrasts (sum 0) otherwise.
    value : (n_row,) array
        Pa.
    variance : (n_row,) array
        Pa2, the part that does not depend on the scales.
    """

    site: NDArray[np.int64]
    direction: NDArray[np.float64]
    model_weight: NDArray[np.float64]
    value: NDArray[np.float64]
    variance: NDArray[np.float64]

    @cached_property
    def is_mean(self) -> NDArray[np.bool_]:
        """(n_row,), whether the row is a mean over models."""
        return np.asarray(self.model_weight.sum(axis=1) > 0.5)

    @cached_property
    def local_factor(self) -> NDArray[np.float64]:
        """(n_row,), what s_local^2 is multiplied with: 1 / M_s for a mean, 1 for a contrast."""
        return np.asarray((self.model_weight**2).sum(axis=1))


def observation_rows(observations: Observations) -> Rows:
    """Turn every site's phasors into independent rows.

    Parameters
    ----------
    observations : Observations

    Returns
    -------
    Rows
        Two rows for every site-model pair; two in all for a site of which only the mean is known.
    """
    parts = [_site_rows(observations, s) for s in range(len(observations.sites))]
    site = np.repeat(np.arange(len(parts)), [len(part[2]) for part in parts])
    direction, weight, value, variance = (np.concatenate(column) for column in zip(*parts, strict=True))
    return Rows(site, direction, weight, value, variance)


def _site_rows(observations: Observations, s: int) -> tuple[NDArray[np.float64], ...]:
    present = np.flatnonzero(observations.present[s])
    count = len(present)
    known = count if observations.has_contrasts[s] else 1
    weights = np.zeros((known, len(observations.models)))
    weights[0, present] = 1.0 / count
    weights[1:, present] = _contrasts(count)[: known - 1]
    noise = observations.model_noise[s]
    mean = record_covariance(observations.covariance[s], noise, count) + noise / count
    phasor = np.nan_to_num(observations.phasor[s])
    blocks = [np.linalg.eigh(mean)] + [np.linalg.eigh(noise)] * (known - 1)
    direction = np.concatenate([vectors.T for _, vectors in blocks])
    variance = np.concatenate([np.maximum(values, 0.0) for values, _ in blocks])
    weight = np.repeat(weights, 2, axis=0)
    value = np.einsum("rc,rm,mc->r", direction, weight, phasor)
    return direction, weight, value, variance


def _contrasts(count: int) -> NDArray[np.float64]:
    """Orthonormal rows (count - 1, count) that sum to zero (Helmert's)."""
    rows = np.zeros((count - 1, count))
    for k in range(1, count):
        rows[k - 1, :k] = 1.0
        rows[k - 1, k] = -k
        rows[k - 1] /= np.sqrt(k * (k + 1.0))
    return rows


@dataclass(frozen=True)
class LinearModel:
    """Rows and design of one load member, ready for any scales.

    Parameters
    ----------
    rows : Rows
    design : (n_row, 4 + 2 n_model) array
        Pa per prior standard deviation of A and a, and per s_common of the models'
        common errors.
    table : (n_row, ...) array
        Products of design and value that the row weights are summed with.
    annual_sd, atmosphere_sd : float
        Prior standard deviations of A and a, Pa.
    truth : float
        r: variance of the truth about the models' centre in units of s_common^2.
    """

    rows: Rows
    design: NDArray[np.float64]
    table: NDArray[np.float64]
    annual_sd: float
    atmosphere_sd: float
    truth: float

    @property
    def has_contrasts(self) -> bool:
        """Whether some site carries more than one model."""
        return bool((~self.rows.is_mean).any())


def linear_model(
    rows: Rows, admittance: NDArray[np.complex128], *, annual_sd: float, atmosphere_sd: float, truth: float
) -> LinearModel:
    """Prepare the regression of one load member.

    Parameters
    ----------
    rows : Rows
    admittance : (n_site,) array of complex
    annual_sd, atmosphere_sd : float
        Pa.
    truth : float
        1 where the truth is exchangeable with the models, 0 where they are centred on it.

    Returns
    -------
    LinearModel
    """
    total = rows.model_weight.sum(axis=1, keepdims=True)
    annual = total * np.einsum("rc,rcd->rd", rows.direction, admittance_matrix(admittance)[rows.site])
    count = rows.model_weight.shape[1]
    root = np.linalg.cholesky(np.eye(count) + truth)
    common = np.einsum("rm,mn,rc->rnc", rows.model_weight, root, rows.direction).reshape(len(total), -1)
    design = np.hstack([annual_sd * annual, atmosphere_sd * total * rows.direction, common])
    products = np.einsum("ri,rj->rij", design, design).reshape(len(total), -1)
    table = np.hstack([products, design * rows.value[:, None], rows.value[:, None] ** 2])
    return LinearModel(rows, design, table, annual_sd, atmosphere_sd, truth)


def row_variance(rows: Rows, log_scales: NDArray[np.float64]) -> NDArray[np.float64]:
    """Variance of every row at the scales.

    Parameters
    ----------
    rows : Rows
    log_scales : (n, >= 2) array
        Natural logarithms of s_site and s_local in Pa.

    Returns
    -------
    (n, n_row) array
        Pa2.
    """
    site, local = np.exp(2.0 * log_scales[:, :1]), np.exp(2.0 * log_scales[:, 1:2])
    return np.asarray(rows.variance + site * rows.is_mean + local * rows.local_factor)


def information(
    model: LinearModel, log_scales: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Information, weighted data and half the misfit at A = a = c = 0, with log determinant.

    Parameters
    ----------
    model : LinearModel
    log_scales : (n, >= 2) array

    Returns
    -------
    information : (n, p, p) array
    weighted : (n, p) array
    log_density : (n,) array
        Log density of the data at zero.
    """
    variance = row_variance(model.rows, log_scales)
    sums = (1.0 / variance) @ model.table
    p = model.design.shape[1]
    misfit = sums[:, -1] + np.log(2.0 * np.pi * variance).sum(axis=1)
    return sums[:, : p * p].reshape(-1, p, p), sums[:, p * p : -1], -0.5 * misfit


def _posterior_precision(
    model: LinearModel, log_scales: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    gram, weighted, log_density = information(model, log_scales)
    unit = np.ones((len(log_scales), model.design.shape[1]))
    unit[:, 4:] = np.exp(log_scales[:, 2:3])
    precision = np.eye(unit.shape[1]) + unit[:, :, None] * gram * unit[:, None, :]
    return precision, unit * weighted, log_density


def log_likelihood(model: LinearModel, log_scales: NDArray[np.float64]) -> NDArray[np.float64]:
    """Log density of the rows' values given the scales; A, a and c are integrated out.

    Parameters
    ----------
    model : LinearModel
    log_scales : (n, 3) array
        Natural logarithms of s_site, s_local and s_common in Pa.

    Returns
    -------
    (n,) array
    """
    precision, weighted, log_density = _posterior_precision(model, log_scales)
    root = np.linalg.cholesky(precision)
    whitened = np.linalg.solve(root, weighted[..., None])[..., 0]
    log_determinant = np.log(np.diagonal(root, axis1=1, axis2=2)).sum(axis=1)
    return np.asarray(log_density - log_determinant + 0.5 * (whitened**2).sum(axis=1))


def annual_given_scales(
    model: LinearModel, log_scales: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Mean and covariance of the network phasor given the scales.

    Parameters
    ----------
    model : LinearModel
    log_scales : (n, 3) array

    Returns
    -------
    mean : (n, 2) array
        Pa.
    covariance : (n, 2, 2) array
        Pa2.
    """
    precision, weighted, _ = _posterior_precision(model, log_scales)
    columns = np.linalg.solve(precision, np.eye(precision.shape[1])[:, :2])
    mean = np.einsum("nij,ni->nj", columns, weighted)
    return model.annual_sd * mean, np.asarray(model.annual_sd**2 * columns[:, :2])


def estimator(model: LinearModel, log_scales: NDArray[np.float64]) -> NDArray[np.float64]:
    """Linear map from the values of the rows to the posterior mean of A.

    Parameters
    ----------
    model : LinearModel
    log_scales : (n, 3) array

    Returns
    -------
    (n, 2, n_row) array
    """
    precision, _, _ = _posterior_precision(model, log_scales)
    columns = np.linalg.solve(precision, np.eye(precision.shape[1])[:, :2])
    columns[:, 4:] *= np.exp(log_scales[:, 2])[:, None, None]
    to_rows = np.einsum("nij,ri->njr", columns, model.design)
    return np.asarray(model.annual_sd * to_rows / row_variance(model.rows, log_scales)[:, None])


def without_site(model: LinearModel, site: int) -> LinearModel:
    """Leave out one site, by its index, from the regression."""
    kept = model.rows.site != site
    rows = Rows(*(getattr(model.rows, field.name)[kept] for field in fields(Rows)))
    return replace(model, rows=rows, design=model.design[kept], table=model.table[kept])


def joined(first: LinearModel, second: LinearModel) -> LinearModel:
    """Join two regressions on the same models and priors; sites keep their own index."""
    rows = Rows(
        *(np.concatenate([getattr(first.rows, f.name), getattr(second.rows, f.name)]) for f in fields(Rows))
    )
    design, table = (np.concatenate(pair) for pair in ((first.design, second.design), (first.table, second.table)))
    return replace(first, rows=rows, design=design, table=table)


def predict_site(
    model: LinearModel, others: LinearModel, site: int, log_scales: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Residual of a site's mean over models under the prediction from the other sites.

    Parameters
    ----------
    model : LinearModel
        With the site.
    others : LinearModel
        Without it.
    site : int
    log_scales : (n, 3) array

    Returns
    -------
    residual : (n, 2) array
        Pa, on the axes of the site's own covariance.
    covariance : (n, 2, 2) array
        Pa2, of the residual: of the prediction and of the site itself.
    """
    precision, weighted, _ = _posterior_precision(others, log_scales)
    chosen = (model.rows.site == site) & model.rows.is_mean
    design = np.repeat(model.design[None, chosen], len(log_scales), axis=0)
    design[:, :, 4:] *= np.exp(log_scales[:, 2])[:, None, None]
    solved = np.linalg.solve(precision, np.swapaxes(design, 1, 2))
    residual = model.rows.value[chosen] - np.einsum("nij,ni->nj", solved, weighted)
    own = row_variance(model.rows, log_scales)[:, chosen]
    return residual, design @ solved + own[:, :, None] * np.eye(2)


def log_scale_prior(log_scales: NDArray[np.float64], prior_scales: NDArray[np.float64]) -> NDArray[np.float64]:
    """Log density, per unit of log scale, of independent half-t priors with 4 degrees of freedom.

    Parameters
    ----------
    log_scales : (..., 3) array
    prior_scales : (3,) array
        Pa.

    Returns
    -------
    (...,) array

    Notes
    -----
    The half-t family for scales is Gelman (2006, Bayesian Analysis 1, 515-534). Student's
    density with 4 degrees of freedom is 3/8 at its centre.
    """
    ratio = log_scales - np.log(prior_scales)
    density = np.log(0.75) + ratio - 2.5 * np.log1p(np.exp(2.0 * ratio) / 4.0)
    return np.asarray(density.sum(axis=-1))
