"""The linear operator that turns a site's record into its annual phasor."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from massfit.annual.design import Design
from massfit.annual.evidence import ANNUAL, linear_fit
from massfit.annual.families import log_score_prior, noise_families
from massfit.annual.mode import minimise
from massfit.annual.nodes import Nodes
from massfit.annual.noise import NoiseCovariance
from massfit.constants import JULIAN_YEAR_DAYS
from massfit.phasor import annual_basis
from massfit.settings import Priors

Floats = NDArray[np.float64]


def phasor_operator(noise: NoiseCovariance, design: Design, terms: Sequence[Nodes]) -> Floats:
    """Weights L of the observations: annual phasor = L y.

    Parameters
    ----------
    noise : NoiseCovariance
    design : Design
    terms : sequence of Nodes
        The one choice of each drift term.

    Returns
    -------
    (2, n) array
        Annual rows of (X' V^-1 X + P)^-1 X' V^-1.
    """
    columns = np.column_stack([design.fixed, design.drift_columns(terms)])
    precision = np.append(design.precision, np.full(len(terms), design.exponential_sd**-2))
    weighted = noise.solve(columns)
    inverse = np.linalg.inv(columns.T @ weighted + np.diag(precision))
    return np.asarray(inverse[ANNUAL] @ weighted.T)


def model_noise(design: Design, priors: Priors, operator: Floats) -> Floats:
    """Covariance D_s of each model's own weather at the annual line.

    The M models give M - 1 orthonormal contrasts, each with the covariance of one
    model; a sum of Ornstein-Uhlenbeck terms, which follows any spectrum, is fitted to them
    together (its mode), with a level, a slope and the two harmonics of their own, and passed
    through the operator.

    Parameters
    ----------
    design : Design
    priors : Priors
    operator : (2, n) array
        From :func:`phasor_operator`.

    Returns
    -------
    (2, 2) array
        Pa^2; zero for fewer than two models.
    """
    models = design.contrasts.shape[1]
    if models < 2:
        return np.zeros((2, 2))
    days, first, place = np.unique(design.days[design.observed], return_index=True, return_inverse=True)
    contrasts = design.contrasts[design.observed][first] @ orthonormal_contrasts(models)
    if not contrasts.any():
        return np.zeros((2, 2))
    centred = (days - days.mean()) / JULIAN_YEAR_DAYS
    columns = np.column_stack([np.ones_like(days), centred, annual_basis(days), annual_basis(days, harmonic=2)])
    stacked, count = np.column_stack([columns, contrasts]), columns.shape[1]

    (family,) = noise_families(replace(priors, noise_forms=("sum",)))

    def covariance_at(scores: Floats) -> NoiseCovariance:
        return NoiseCovariance(days, np.zeros(len(days), np.int64), family.model(scores, np.ones(1)))

    def negative_log_posterior(scores: Floats) -> float:
        covariance = covariance_at(scores)
        white = covariance.whiten(stacked)
        fit = linear_fit(white[:, :count], white[:, count:], np.zeros(count))
        determinants = (models - 1) * (covariance.log_determinant + fit.log_determinant)
        return float(0.5 * (determinants + fit.misfit.sum()) - log_score_prior(scores))

    start = min(family.starts(float(contrasts.std())), key=negative_log_posterior)
    scores = minimise(negative_log_posterior, start).scores
    merged = np.zeros((2, len(days)))
    for row, weights in zip(merged, operator[:, design.observed], strict=True):
        np.add.at(row, place, weights)
    return np.asarray(merged @ covariance_at(scores).multiply(merged.T.copy()))


def orthonormal_contrasts(count: int) -> Floats:
    """Helmert contrasts: (count, count - 1), columns orthonormal and summing to zero.

    Examples
    --------
    >>> orthonormal_contrasts(2).round(4)
    array([[-0.7071],
           [ 0.7071]])
    """
    # contrast i sets model i + 1 against the mean of those before it
    contrasts = np.triu(np.full((count, count - 1), -1.0))
    order = np.arange(1, count)
    contrasts[order, order - 1] = order
    return np.asarray(contrasts / np.sqrt(order * (order + 1.0)))


def year_shares(design: Design, operator: Floats, reference_year: int) -> dict[int, float]:
    """Share of each calendar year in the annual phasor of a site.

    The operator returns an annual cycle unchanged, so that its responses to the cycle of
    one year at a time sum to the identity; the share is half their trace. It can be
    slightly negative for a year of a few days.

    Parameters
    ----------
    design : Design
    operator : (2, n) array
    reference_year : int

    Returns
    -------
    dict of int to float
        Sums to 1.
    """
    years = calendar_years(design.days, reference_year)
    share = 0.5 * np.einsum("in,ni->n", operator, design.fixed[:, ANNUAL])
    return {int(year): float(share[years == year].sum()) for year in np.unique(years[design.observed])}


def calendar_years(days: Floats, reference_year: int) -> NDArray[np.int64]:
    """Calendar year of days counted from 1 January of the reference year.

    Examples
    --------
    >>> calendar_years(np.array([-0.5, 0.5, 366.5]), 2016)
    array([2015, 2016, 2017])
    """
    dates = np.datetime64(f"{reference_year:04d}-01-01T00:00", "m") + np.round(days * 1440).astype("m8[m]")
    return dates.astype("datetime64[Y]").astype(np.int64) + 1970
