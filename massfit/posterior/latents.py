"""Exact draws of what a walker carries: stretches of the places' scatter and parts of the sites' mixtures."""

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.likelihood import active_rows, base_variance, log_scale_prior, units
from massfit.posterior.regression import FREEDOM, Condition, LinearModel

Floats = NDArray[np.float64]


def draw_latents(model: LinearModel, condition: Condition, shared: Floats, rng: np.random.Generator) -> Condition:
    """Draw parts and stretches anew, given the scales and a draw of what the sites share.

    Parameters
    ----------
    model : LinearModel
    condition : Condition
    shared : (n, n_column) array
        Drawn at the condition, in prior standard deviations.
    rng : numpy.random.Generator

    Returns
    -------
    Condition
    """
    effect = units(model, condition) * shared
    residual = model.rows.value - _signal(model, condition.member, effect)
    if model.rows.has_parts:
        condition = _draw_parts(model, condition, residual, rng)
    if model.student:
        condition = _draw_stretches(model, condition, residual, shared, rng)
    return condition


def _signal(model: LinearModel, member: NDArray[np.int64], effect: Floats) -> Floats:
    if model.member_count == 1:
        return np.asarray(effect @ model.design[0].T)
    signal = np.empty((len(effect), model.design.shape[1]))
    for k in np.unique(member):
        signal[member == k] = effect[member == k] @ model.design[k].T
    return signal


def _draw_parts(model: LinearModel, condition: Condition, residual: Floats, rng: np.random.Generator) -> Condition:
    base, contrast, scatter = base_variance(model, condition)
    variance = np.concatenate([base + scatter, contrast], axis=1)
    log_density = -0.5 * (np.log(variance) + residual**2 / variance)
    rows, part = model.rows, condition.part.copy()
    for s in np.flatnonzero((rows.log_weight > -np.inf).sum(axis=1) > 1):
        parts = np.flatnonzero(rows.log_weight[s] > -np.inf)
        log_mass = rows.log_weight[s, parts] + np.column_stack(
            [log_density[:, (rows.site == s) & (rows.part == k)].sum(axis=1) for k in parts]
        )
        # the largest of the log masses with Gumbel noise is a draw in proportion to them
        part[:, s] = parts[(log_mass + rng.gumbel(size=log_mass.shape)).argmax(axis=1)]
    return Condition(condition.log_scales, condition.stretch, part, condition.member)


def _draw_stretches(
    model: LinearModel, condition: Condition, residual: Floats, shared: Floats, rng: np.random.Generator
) -> Condition:
    """Draw the scatter of each place, then its stretch, which is an inverse gamma variable given the scatter."""
    base, _, _ = base_variance(model, condition)
    count = base.shape[1]
    site_sd = np.exp(condition.log_scales[:, :1])
    stretch = condition.stretch[:, model.row_place]
    # scatter in units of s_site: normal, between its prior of variance `stretch` and the residual
    total = site_sd**2 * stretch + base
    mean = residual[:, :count] * site_sd * stretch / total
    scatter = mean + np.sqrt(stretch * base / total) * rng.standard_normal(base.shape)
    counted = np.broadcast_to(model.own_scatter, base.shape)
    active = active_rows(model, condition)
    if active is not None:
        counted = counted & active[:, :count]
    square = (scatter**2 * counted) @ (model.row_place[:, None] == np.arange(model.place_count)).astype(float)
    if len(model.columns.shared_place):
        unit_square = (shared[:, model.columns.place] ** 2).reshape(len(base), -1, 2).sum(axis=2)
        places = model.columns.shared_place
        square[:, places] = unit_square * condition.stretch[:, places]
    half = 0.5 * (FREEDOM + square)
    drawn = half / rng.standard_gamma(0.5 * FREEDOM + 1.0, size=half.shape)
    return Condition(condition.log_scales, drawn, condition.part, condition.member)


def draw_shared_scales(
    model: LinearModel, condition: Condition, shared: Floats, prior_scales: Floats, rng: np.random.Generator
) -> Condition:
    """Move s_common and s_group with the models' errors and the shared scatter themselves held fixed.

    Parameters
    ----------
    model : LinearModel
    condition : Condition
    shared : (n, n_column) array
        Drawn at the condition, in prior standard deviations.
    prior_scales : (n_scale,) array
        Pa.
    rng : numpy.random.Generator

    Returns
    -------
    Condition
    """
    log_scales = condition.log_scales.copy()
    of_scale = {2: model.columns.common, 3: model.columns.group}
    for scale, columns in of_scale.items():
        if scale < model.scale_count:
            # given the effects, 1 / scale^2 is a gamma variable but for the prior
            half_sum = 0.5 * np.exp(2.0 * log_scales[:, scale]) * (shared[:, columns] ** 2).sum(axis=1)
            shape = 0.5 * (columns.stop - columns.start)
            proposed = 0.5 * np.log(half_sum / rng.standard_gamma(shape, size=len(half_sum)))
            _accept(log_scales, scale, proposed, prior_scales, rng)
    return Condition(log_scales, condition.stretch, condition.part, condition.member)


def _accept(log_scales: Floats, scale: int, proposed: Floats, prior_scales: Floats, rng: np.random.Generator) -> None:
    """Take proposals that hold everything but the prior of the scale (and a uniform one of its logarithm)."""
    prior = prior_scales[scale : scale + 1]
    here = log_scale_prior(log_scales[:, scale : scale + 1], prior)
    ratio = log_scale_prior(proposed[:, None], prior) - here
    log_scales[:, scale] = np.where(np.log(rng.random(len(ratio))) < ratio, proposed, log_scales[:, scale])


def draw_site_scale(
    model: LinearModel, condition: Condition, prior_scales: Floats, rng: np.random.Generator
) -> Condition:
    """Move s_site with the variances s_site^2 x stretch held fixed: the likelihood stays, only the priors change.

    Alternating what is held fixed takes the dependence between the two away (Yu & Meng 2011, Journal of Computational
    and Graphical Statistics 20, 531-570).

    Parameters
    ----------
    model : LinearModel
    condition : Condition
    prior_scales : (n_scale,) array
        Pa.
    rng : numpy.random.Generator

    Returns
    -------
    Condition
    """
    if not model.student:
        return condition
    log_scales = condition.log_scales.copy()
    log_square = 2.0 * log_scales[:, 0]
    rate = 0.5 * FREEDOM * np.exp(-log_square) * (1.0 / condition.stretch).sum(axis=1)
    shape = 0.5 * FREEDOM * model.place_count
    proposed = 0.5 * np.log(rng.standard_gamma(shape, size=len(rate)) / rate)
    _accept(log_scales, 0, proposed, prior_scales, rng)
    stretch = condition.stretch * np.exp(log_square - 2.0 * log_scales[:, 0])[:, None]
    return Condition(log_scales, stretch, condition.part, condition.member)
