"""Recorder by recorder: its own phasor beside what satellite gravity has there."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import chi2

from massfit.constants import STANDARD_GRAVITY
from massfit.gravity.annual import ALIAS_DAYS
from massfit.gravity.at_sites import SitePressure, satellite_at_sites, smoothed_harmonics
from massfit.gravity.inputs import GravityInputs, Solution
from massfit.gravity.mass import mass_per_coefficient
from massfit.gravity.model import formal_covariance
from massfit.gravity.satellite import (
    Context,
    SatelliteMean,
    converted,
    degree_one_names,
    replaced_names,
    unseen_degrees,
    vapour_degree_zero,
)
from massfit.phasor import as_complex, as_components
from massfit.posterior.network_model import inflation
from massfit.site import Site

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class SiteComparison:
    """Recorder and satellites at one site.

    Parameters
    ----------
    site : str
    recorder : complex
        Pa.
    recorder_covariance : (2, 2) array
        Of the record and of the circulation that no model has, Pa2.
    satellite : complex
        Brought to the point by the load members, mean over the solutions, Pa.
    satellite_covariance : (2, 2) array
        With the spread of members and solutions, Pa2; NaN where no solution states an error.
    chi_square, probability : float
        Of the difference, with 2 degrees of freedom; NaN without a recorder or an error.
    """

    site: str
    recorder: complex
    recorder_covariance: Floats
    satellite: complex
    satellite_covariance: Floats
    chi_square: float
    probability: float


def compare_sites(
    inputs: GravityInputs,
    means: Sequence[SatelliteMean],
    sites: Sequence[Site],
    recorders: NDArray[np.complex128],
    recorder_covariances: Floats,
    admittance: NDArray[np.complex128],
    context: Context,
) -> tuple[SiteComparison, ...]:
    """Compare every recorder with the satellites' pressure there.

    Parameters
    ----------
    inputs : GravityInputs
    means : sequence of SatelliteMean
        Of the solutions that are weighed.
    sites : sequence of Site
    recorders : (n_site,) array of complex
        Pa.
    recorder_covariances : (n_site, 2, 2) array
        Pa2.
    admittance : (K, n_site) array of complex
    context : Context

    Returns
    -------
    tuple of SiteComparison
        The solutions' covariances are averaged, since they share the satellites, and their spread is added.
    """
    if not sites:
        return ()
    by_name = {solution.name: solution for solution in inputs.solutions}
    every = [_of_solution(inputs, by_name[mean.name], mean, sites, admittance, context) for mean in means]
    rows = []
    for place, site in enumerate(sites):
        phasor, covariance = _pooled([found[place] for found in every])
        own, error = complex(recorders[place]), recorder_covariances[place]
        rows.append(_row(site.id, own, error, phasor, covariance))
    return tuple(rows)


def _of_solution(
    inputs: GravityInputs,
    solution: Solution,
    mean: SatelliteMean,
    sites: Sequence[Site],
    admittance: NDArray[np.complex128],
    context: Context,
) -> list[tuple[complex, Floats]]:
    """Phasor and covariance of a solution at every site, Pa and Pa2."""
    chosen = inputs.settings
    smoothing = max(chosen.smoothing_km, chosen.site_smoothing_km)
    found = satellite_at_sites(
        mean.monthly,
        sites,
        context.predicted,
        admittance,
        smoothing_km=smoothing,
        reference_year=context.reference_year,
        alias_days=ALIAS_DAYS if chosen.alias_lines else (),
        added=vapour_degree_zero(inputs, context),
        blind=unseen_degrees(inputs),
    )
    errors = _model_errors(inputs, solution, mean, sites, smoothing, context)
    return [_at_point(each, error) for each, error in zip(found, errors, strict=True)]


def _at_point(found: SitePressure, error: Floats) -> tuple[complex, Floats]:
    return converted(found.seen, found.covariance + error, found.factors)


def _model_errors(
    inputs: GravityInputs,
    solution: Solution,
    mean: SatelliteMean,
    sites: Sequence[Site],
    smoothing_km: float,
    context: Context,
) -> list[Floats]:
    """Errors that no residuals show, of each site: the formal ones of a model, NaN where its file states none."""
    if mean.kind == "months" or context.window is None:
        return [np.zeros((2, 2))] * len(sites)
    layer = mass_per_coefficient(
        context.love, mean.monthly.max_degree, radius_m=solution.models[0].field.conventions.radius_m
    )
    harmonics = smoothed_harmonics(sites, mean.monthly.max_degree, smoothing_km) * layer[None, None, :, None]
    harmonics[:, :, list(unseen_degrees(inputs))] = 0.0
    replaced = (*replaced_names(inputs, solution, context), *degree_one_names(inputs))
    found = [
        formal_covariance(
            solution, context.window, weights, replaced=replaced, reference_year=context.reference_year
        )
        for weights in harmonics
    ]  # fmt: skip
    return [np.full((2, 2), np.nan) if each is None else STANDARD_GRAVITY**2 * each for each in found]


def _pooled(found: Sequence[tuple[complex, Floats]]) -> tuple[complex, Floats]:
    phasors = as_components(np.array([phasor for phasor, _ in found]))
    centre, count = phasors.mean(axis=0), len(found)
    departures = phasors - centre
    covariance = np.mean([each for _, each in found], axis=0) + departures.T @ departures / count * inflation(count)
    return complex(as_complex(centre)), covariance


def _row(site: str, recorder: complex, error: Floats, satellite: complex, covariance: Floats) -> SiteComparison:
    both, step = error + covariance, as_components(recorder - satellite)
    known = bool(np.all(np.isfinite([*step, *both.ravel()])))
    chi_square = float(step @ np.linalg.solve(both, step)) if known else np.nan
    return SiteComparison(site, recorder, error, satellite, covariance, chi_square, float(chi2.sf(chi_square, df=2)))
