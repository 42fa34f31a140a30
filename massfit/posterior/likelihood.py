"""The density of the network's rows, everything linear integrated out.

Given the scales, the stretch of each place's scatter (Student) and the part of each site's mixture, every site is
normal and independent of the others once the network phasor A and what the sites share are known: the air-pressure
correction a, the models' common errors c_m, the scatter of groups, the cycles of the years, the circulation where
no model was subtracted, and the scatter of places with several sites. In units of their prior standard deviations the
prior is the identity and vanishing scales need no special case (Gelman et al. 2013, Bayesian Data Analysis,
chapters 5 and 14, for the model; the algebra is that of linear regression). The phasor A stands last, so that one
Cholesky factor of the information beside the weighted data holds the density and the moments of A.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.regression import Condition, LinearModel

Floats = NDArray[np.float64]


def base_variance(model: LinearModel, condition: Condition) -> tuple[Floats, Floats, Floats]:
    """Variances of the rows without the stretched scatter of their places, and that scatter.

    Parameters
    ----------
    model : LinearModel
    condition : Condition

    Returns
    -------
    mean : (n, n_mean_row) array
        Pa2, of the means.
    contrast : (n, n_contrast_row) array
        Pa2.
    scatter : (n, n_mean_row) array
        Pa2, stretched scatter that is the row's own; 0 where several sites share a place.
    """
    rows, count = model.rows, model.rows.mean_count
    squares = np.exp(2.0 * condition.log_scales)
    mean = rows.variance[:count] + squares[:, 1:2] * rows.local_factor[:count]
    if model.scale_count == 4 and model.sharing.alone.any():
        mean += squares[:, 3:4] * model.sharing.alone[rows.site[:count]]
    contrast = rows.variance[count:] + squares[:, 1:2] * rows.local_factor[count:]
    scatter = squares[:, :1] * condition.stretch[:, model.row_place] * model.own_scatter
    return mean, contrast, scatter


def units(model: LinearModel, condition: Condition) -> Floats:
    """Scale (n, n_column) of every column: a scale where its standard deviation is one, 1 otherwise."""
    columns, scales = model.columns, np.exp(condition.log_scales)
    unit = np.ones((len(condition), columns.size))
    unit[:, columns.common] = scales[:, 2:3]
    if model.scale_count == 4:
        unit[:, columns.group] = scales[:, 3:4]
    if len(columns.shared_place):
        stretched = scales[:, :1] * np.sqrt(condition.stretch[:, columns.shared_place])
        unit[:, columns.place] = np.repeat(stretched, 2, axis=1)
    return unit


def active_rows(model: LinearModel, condition: Condition) -> NDArray[np.bool_] | None:
    """Rows (n, n_row) of the parts chosen; None where no site has several parts."""
    if not model.rows.has_parts:
        return None
    return np.asarray(condition.part[:, model.rows.site] == model.rows.part)


@dataclass(frozen=True)
class Collapsed:
    """The regression with everything linear integrated out.

    Parameters
    ----------
    root : (n, n_column + 1, n_column + 1) array
        Cholesky factor of the precision of the columns, bordered by the weighted data.
    log_likelihood : (n,) array
        Log density of the rows in use.
    annual_sd : float
        Pa.
    """

    root: Floats
    log_likelihood: Floats
    annual_sd: float

    def moments(self) -> tuple[Floats, Floats]:
        """Mean (n, 2) and covariance (n, 2, 2) of the network phasor, Pa and Pa2."""
        corner = self.root[:, -3:-1, -3:-1]
        inverse = np.zeros_like(corner)
        inverse[:, 0, 0], inverse[:, 1, 1] = 1.0 / corner[:, 0, 0], 1.0 / corner[:, 1, 1]
        inverse[:, 1, 0] = -corner[:, 1, 0] * inverse[:, 0, 0] * inverse[:, 1, 1]
        mean = np.einsum("nij,ni->nj", inverse, self.root[:, -1, -3:-1])
        return self.annual_sd * mean, self.annual_sd**2 * np.einsum("nki,nkj->nij", inverse, inverse)

    def solution(self, noise: Floats | float = 0.0) -> Floats:
        """Columns (n, n_column) at their conditional mean, or drawn where `noise` is standard normal."""
        return _back_substituted(self.root, (self.root[:, -1, :-1] + noise)[:, :, None])[:, :, 0]


def _back_substituted(root: Floats, right: Floats) -> Floats:
    """Solve R' x = right (n, n_column, k) with the factors without their border."""
    # the points last: every step runs along memory (half the time)
    factor, rest = (np.ascontiguousarray(np.moveaxis(each, 0, -1)) for each in (root, right))
    solved = np.empty_like(rest)
    for i in range(len(rest) - 1, -1, -1):
        solved[i] = rest[i] / factor[i, i]
        rest[:i] -= solved[i] * factor[i, :i, None]
    return np.moveaxis(solved, -1, 0)


def collapse(model: LinearModel, condition: Condition) -> Collapsed:
    """Integrate everything linear out.

    Parameters
    ----------
    model : LinearModel
    condition : Condition

    Returns
    -------
    Collapsed
    """
    base, contrast, scatter = base_variance(model, condition)
    mean = base + scatter
    active = active_rows(model, condition)
    weight, contrast_weight = 1.0 / mean, 1.0 / contrast
    log_variance = [np.log(2.0 * np.pi * mean), np.log(2.0 * np.pi * contrast)]
    if active is not None:
        own, rest = active[:, : mean.shape[1]], active[:, mean.shape[1] :]
        weight, contrast_weight = weight * own, contrast_weight * rest
        log_variance = [log_variance[0] * own, log_variance[1] * rest]
    size = model.columns.size
    precision = _member_sums(weight, model.mean_table, condition.member).reshape(-1, size + 1, size + 1)
    if model.rows.has_contrasts:
        common = model.columns.common
        width = common.stop - common.start
        sums = (contrast_weight @ model.contrast_table).reshape(-1, width + 1, width + 1)
        precision[:, common, common] += sums[:, :-1, :-1]
        precision[:, -1, common] += sums[:, -1, :-1]
        precision[:, -1, -1] += sums[:, -1, -1]
    unit = np.ones((len(precision), size + 1))
    unit[:, :-1] = units(model, condition)
    precision *= unit[:, :, None] * unit[:, None, :]
    # the prior, and 1 in the corner so that a perfect fit has a root too; only the lower triangle is read
    precision.reshape(len(precision), -1)[:, :: size + 2] += 1.0
    root = np.asarray(np.linalg.cholesky(precision), dtype=float)
    diagonal = root.reshape(len(root), -1)[:, :: size + 2]
    log_determinant = np.log(diagonal[:, :-1]).sum(axis=1)
    misfit = diagonal[:, -1] ** 2 - 1.0 + sum(part.sum(axis=1) for part in log_variance)
    return Collapsed(root, -0.5 * misfit - log_determinant, model.annual_sd)


def _member_sums(weight: Floats, table: Floats, member: NDArray[np.int64]) -> Floats:
    """Add up (n, ...) each point's rows with the table of its load member."""
    members, count = len(table), len(weight)
    if members == 1:
        return np.asarray(weight @ table[0])
    if count % members == 0 and np.array_equal(member, np.repeat(np.arange(members), count // members)):
        return np.asarray((weight.reshape(members, -1, weight.shape[1]) @ table).reshape(count, -1))
    sums = np.empty((count, table.shape[2]))
    for k in np.unique(member):
        sums[member == k] = weight[member == k] @ table[k]
    return sums


def log_likelihood(model: LinearModel, condition: Condition) -> Floats:
    """Log density (n,) of the rows in use; everything linear is integrated out."""
    return collapse(model, condition).log_likelihood


def estimator(model: LinearModel, condition: Condition) -> Floats:
    """Linear map (n, 2, n_row) from the values of the rows to the posterior mean of A; one load member at a time."""
    root = collapse(model, condition).root
    unit = np.zeros((len(condition), model.columns.size, 2))
    unit[:, -2:] = np.linalg.inv(root[:, -3:-1, -3:-1])  # R x = the last two unit vectors: A stands last
    columns = _back_substituted(root, unit) * units(model, condition)[:, :, None]
    base, contrast, scatter = base_variance(model, condition)
    weight = 1.0 / np.concatenate([base + scatter, contrast], axis=1)
    active = active_rows(model, condition)
    if active is not None:
        weight *= active
    to_rows = np.swapaxes(columns, 1, 2) @ model.design[condition.member[0]].T
    return np.asarray(model.annual_sd * to_rows * weight[:, None])


def log_scale_prior(log_scales: Floats, prior_scales: Floats) -> Floats:
    """Log density, per unit of log scale, of independent half-t priors with 4 degrees of freedom.

    Parameters
    ----------
    log_scales : (..., n_scale) array
    prior_scales : (n_scale,) array
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


def log_latent_prior(model: LinearModel, condition: Condition) -> Floats:
    """Log density (n,), per unit of log stretch, of the stretches, with the log weights of the parts.

    Notes
    -----
    Student's distribution with nu degrees of freedom is a normal one whose variance is stretched by an inverse gamma
    variable with shape and scale nu / 2.
    """
    density = np.zeros(len(condition))
    if model.student:
        log_stretch = np.log(condition.stretch)
        density += log_stretch_prior(log_stretch).sum(axis=1)
    if model.rows.has_parts:
        density += model.rows.log_weight[np.arange(condition.part.shape[1]), condition.part].sum(axis=1)
    return density


def log_stretch_prior(log_stretch: Floats) -> Floats:
    """Log density per unit of log stretch: shape and scale of the inverse gamma are nu / 2 = 2."""
    return np.asarray(np.log(4.0) - 2.0 * log_stretch - 2.0 * np.exp(-log_stretch))
