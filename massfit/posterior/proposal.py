"""Draws of each place's stretch and each site's part under the prediction from everything else."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.likelihood import Collapsed, base_variance, log_stretch_prior, units
from massfit.posterior.regression import Condition, LinearModel

Floats = NDArray[np.float64]

_DEFENSIVE = 0.2
"""Share of the parts that is drawn by their weights alone."""


def stretch_grid(place_count: int) -> Floats:
    """Log stretches at which the density is taken; it is a straight line between two of these.

    The prior leaves 4e-8 below and 4e-9 above. The weights correct the lines, at a cost that grows with the number of
    places and the fourth power of the step.

    Parameters
    ----------
    place_count : int

    Returns
    -------
    (n_grid,) array
    """
    return np.linspace(np.log(0.1), np.log(3e4), 1 + int(np.ceil(25.0 * max(1.0, place_count / 20.0) ** 0.25)))


@dataclass(frozen=True)
class Prediction:
    """What everything but a row itself says of the row.

    Parameters
    ----------
    residual, variance : (n_row,) array
        Row less its prediction, Pa, and the variance of the prediction, Pa2.
    place_effect, place_variance : (n_shared_place, 2) array
        The same of the scatter of places with several sites, Pa and Pa2.
    """

    residual: Floats
    variance: Floats
    place_effect: Floats
    place_variance: Floats


def predict_rows(
    model: LinearModel, condition: Condition, collapsed: Collapsed, rng: np.random.Generator, draws: int | None = None
) -> Prediction:
    """Predict every row from the others, roughly: from draws of what the sites share.

    Parameters
    ----------
    model : LinearModel
    condition : Condition
        Points of equal weight, n.
    collapsed : Collapsed
        At these points.
    rng : numpy.random.Generator
    draws : int, optional
        Draws in all where there is one point; one a point otherwise.

    Returns
    -------
    Prediction

    Notes
    -----
    What a row itself says is taken out of mean and variance as if both were normal.
    """
    if draws is not None:
        chosen = np.zeros(draws, dtype=np.int64)
        condition = condition.take(chosen)
        collapsed = Collapsed(collapsed.root[chosen], collapsed.log_likelihood[chosen], collapsed.annual_sd)
    unit = units(model, condition)
    shared = unit * collapsed.solution(rng.standard_normal(unit.shape))
    signal = shared @ model.design[condition.member[0]].T
    base, contrast, scatter = base_variance(model, condition)
    own = 1.0 / (1.0 / np.concatenate([base + scatter, contrast], axis=1)).mean(axis=0)
    prior_variance = (unit.mean(axis=0) ** 2 * model.design[condition.member[0]] ** 2).sum(axis=1)
    # which part's rows a site used differs from draw to draw: nothing is taken out there
    several = (model.rows.log_weight > -np.inf).sum(axis=1) > 1
    own = np.where(several[model.rows.site], np.inf, own)
    centre, variance = _cavity(signal.mean(axis=0), signal.var(axis=0), model.rows.value, own, prior_variance)
    effect = shared[:, model.columns.place]
    prior = (unit[:, model.columns.place] ** 2).mean(axis=0)
    likely = _cavity(effect.mean(axis=0), effect.var(axis=0), np.zeros_like(prior), prior, 1e4 * prior)
    shape = (-1, 2)
    return Prediction(model.rows.value - centre, variance, likely[0].reshape(shape), likely[1].reshape(shape))


def _cavity(mean: Floats, variance: Floats, value: Floats, own: Floats, widest: Floats) -> tuple[Floats, Floats]:
    """Take a measurement `value` of variance `own` out of a mean and variance that hold it."""
    # a variance from draws is good to a tenth: the rest is never taken as sharper than that allows
    precision = np.maximum(1.0 / variance - 1.0 / own, np.maximum(0.02 / variance, 1.0 / widest))
    left = np.maximum(precision, 1e-300)
    return (mean / variance - value * (1.0 / variance - left)) / left, 1.0 / left


def propose_latents(
    model: LinearModel, condition: Condition, prediction: Prediction, rng: np.random.Generator
) -> tuple[Condition, Floats]:
    """Draw stretches and parts at the scales of a condition.

    Parameters
    ----------
    model : LinearModel
    condition : Condition
        Its stretches and parts are replaced.
    prediction : Prediction
    rng : numpy.random.Generator

    Returns
    -------
    Condition
    log_density : (n,) array
        Per unit of log stretch.
    """
    total = np.zeros(len(condition))
    if not (model.student or model.rows.has_parts):
        return condition, total
    stretch, part = condition.stretch.copy(), condition.part.copy()
    table = _part_table(model, condition, prediction)  # (n, site, part, grid or 1)
    if model.rows.has_parts:
        for s in np.flatnonzero((model.rows.log_weight > -np.inf).sum(axis=1) > 1):
            mass = table[:, s].sum(axis=-1)
            # a share by the weights alone: no part is ever out of reach (defensive mixture, Hesterberg 1995)
            prior = np.exp(model.rows.log_weight[s])
            probability = (1.0 - _DEFENSIVE) * mass / mass.sum(axis=1, keepdims=True) + _DEFENSIVE * prior / prior.sum()
            part[:, s] = (rng.random((len(part), 1)) > np.cumsum(probability, axis=1)[:, :-1]).sum(axis=1)
            total += np.log(np.take_along_axis(probability, part[:, s : s + 1], axis=1)[:, 0])
    if model.student:
        grid = stretch_grid(model.place_count)
        density = np.take_along_axis(table, part[:, :, None, None], axis=2)[:, :, 0]
        of_place = np.empty((len(part), model.place_count, len(grid)))
        of_place[:, model.sharing.place] = density
        for column, place in enumerate(model.columns.shared_place):
            of_place[:, place] = _place_density(condition, prediction, column, grid)
        log_stretch, log_density = _draw_on_grid(of_place, grid, rng)
        stretch = np.exp(log_stretch)
        total += log_density.sum(axis=1)
    return Condition(condition.log_scales, stretch, part, condition.member), total


def _part_table(model: LinearModel, condition: Condition, prediction: Prediction) -> Floats:
    """Density (n, n_site, n_part, n_grid) of every part and stretch, up to a factor a site."""
    base, contrast, _ = base_variance(model, condition)
    count = base.shape[1]
    grid = np.exp(stretch_grid(model.place_count)) if model.student else np.ones(1)
    own = np.exp(2.0 * condition.log_scales[:, :1]) * model.own_scatter
    variance = (base + prediction.variance[:count])[:, :, None] + own[:, :, None] * grid
    square = prediction.residual**2
    # a product of two, one logarithm: the rows come in pairs
    log_density = -0.5 * np.log(variance[:, ::2] * variance[:, 1::2])
    log_density -= 0.5 * (square[:count:2, None] / variance[:, ::2] + square[1:count:2, None] / variance[:, 1::2])
    site, part = model.rows.site[::2], model.rows.part[::2]
    pairs = count // 2
    table = np.full((len(base), *model.rows.log_weight.shape, len(grid)), -np.inf)
    table[:, site[:pairs], part[:pairs]] = log_density + model.rows.log_weight[site[:pairs], part[:pairs], None]
    if model.rows.has_parts:
        spread = contrast + prediction.variance[count:]
        rest = -0.5 * (np.log(spread) + square[count:] / spread)
        together = rest[:, ::2] + rest[:, 1::2]
        for pair in np.flatnonzero(np.isin(site[pairs:], np.flatnonzero(model.rows.log_weight[:, 1] > -np.inf))):
            table[:, site[pairs + pair], part[pairs + pair]] += together[:, pair, None]
    if model.student:
        table += log_stretch_prior(np.log(grid))
    return np.asarray(np.exp(table - table.max(axis=(2, 3), keepdims=True)))


def _place_density(condition: Condition, prediction: Prediction, column: int, grid: Floats) -> Floats:
    """Density (n, n_grid) of the stretch of a place with several sites."""
    effect, own = prediction.place_effect[column], prediction.place_variance[column]
    variance = own + np.exp(2.0 * condition.log_scales[:, :1] + grid)[:, :, None]
    log_density = -0.5 * (np.log(variance) + effect**2 / variance).sum(axis=2) + log_stretch_prior(grid)
    return np.asarray(np.exp(log_density - log_density.max(axis=1, keepdims=True)))


def _draw_on_grid(density: Floats, grid: Floats, rng: np.random.Generator) -> tuple[Floats, Floats]:
    """Draw from densities (..., n_grid) that are straight lines between the nodes; their logs at the draws."""
    step = grid[1] - grid[0]
    mass = 0.5 * (density[..., :-1] + density[..., 1:])
    cumulative = np.cumsum(mass, axis=-1)
    whole = cumulative[..., -1:]
    cell = (rng.random(whole.shape) * whole > cumulative[..., :-1]).sum(axis=-1)[..., None]
    left, right = (np.take_along_axis(density, cell + k, axis=-1)[..., 0] for k in (0, 1))
    share = rng.random(left.shape)
    place = share * (left + right) / (left + np.sqrt(left**2 + share * (right**2 - left**2)) + 1e-300)
    height = left + (right - left) * place
    return grid[cell[..., 0]] + step * place, np.log(height / (step * whole[..., 0]) + 1e-300)
