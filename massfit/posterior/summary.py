"""The answer in the numbers that are printed: amplitude, peak day, mass, and what they rest on."""

from collections.abc import Callable, Iterable, Sequence
from dataclasses import asdict
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.cautions import site_cautions
from massfit.annual.dataset import NO_MODEL
from massfit.constants import FRESH_WATER_DENSITY, KG_PER_GT, PASCAL_PER_HPA, STANDARD_GRAVITY
from massfit.phasor import as_complex, as_components, peak_date, unwrapped_peak_days
from massfit.posterior.alternatives import alternative_answers
from massfit.posterior.network_model import Choices, network_model
from massfit.posterior.observations import Observations, read_observations
from massfit.posterior.regions import scalar_summary
from massfit.posterior.result import Posterior
from massfit.posterior.shares import variance_shares, variance_terms
from massfit.posterior.sites import SiteCheck, leave_one_out
from massfit.posterior.years import yearly_cycles


def summarise(
    posterior: Posterior,
    site_phasors: xr.Dataset,
    fingerprints: xr.Dataset,
    *,
    reference_year: int,
    ocean_area_m2: float,
    sea_water_density: float,
    mapped: Callable[[Callable[[Any], Any], Sequence[Any]], Iterable[Any]] = map,
) -> dict[str, object]:
    """Summarise a posterior as plain numbers, ready for JSON.

    Parameters
    ----------
    posterior : Posterior
    site_phasors, fingerprints : xarray.Dataset
        What the posterior was drawn from.
    reference_year : int
        Year of the printed peak date.
    ocean_area_m2 : float
        m2, turns pressure into mass.
    sea_water_density : float
        kg m-3, of the sea-water height.
    mapped : callable, optional
        Applies a function to each of a sequence, in order.

    Returns
    -------
    dict
        `amplitude_hpa`, `peak_day`, `in_phase_hpa`, `quadrature_hpa`, `water_mm`,
        `sea_water_mm`, `mass_gt`, each with median, mean, sd, region50, region95
        (equal-tailed); `peak_date`, `variance_share`, `years`, `alternatives`, `convergence`,
        `sites`, `covariance_hpa2`, `warnings`. A site's `phasor_hpa` is as observed: the
        response to the air over land is not taken off.

    Raises
    ------
    InputError
        Every fault of the two Datasets.
    """
    observations, admittance = read_observations(site_phasors, fingerprints)
    choices = Choices(posterior.settings, posterior.priors, posterior.atmosphere_sd_hpa)
    model = network_model(observations, admittance, choices, mixed=posterior.mixed)
    single = network_model(observations, admittance, choices) if posterior.mixed else None
    checks = leave_one_out(model, posterior.second_route, single)
    names = [str(site) for site in site_phasors["site"].values]
    reduced_sd = dict(zip(names, site_phasors["reduced_sd"].values.astype(float).tolist(), strict=True))
    notes = [_site_warnings(observations, s, reduced_sd[site], checks[s]) for s, site in enumerate(observations.sites)]
    return {
        **_answer(posterior.draws, reference_year, ocean_area_m2, sea_water_density),
        "covariance_hpa2": (np.cov(posterior.draws.T) / PASCAL_PER_HPA**2).tolist(),
        "variance_share": variance_shares(variance_terms(model, posterior.second_route, mapped=mapped)),
        "years": yearly_cycles(posterior, observations),
        "alternatives": alternative_answers(
            observations,
            fingerprints,
            posterior.second_route,
            admittance=admittance,
            choices=choices,
            mixed=posterior.mixed,
            mapped=mapped,
        ),
        "convergence": {**asdict(posterior.convergence), "converged": posterior.converged},
        "sites": _sites(observations, site_phasors, admittance, checks, notes),
        "warnings": list(posterior.warnings),
    }


def _answer(
    draws: NDArray[np.float64], reference_year: int, ocean_area_m2: float, sea_water_density: float
) -> dict[str, object]:
    phasors = as_complex(draws)
    amplitude = np.abs(phasors)
    height_mm = 1000.0 * amplitude / STANDARD_GRAVITY  # times the density, which follows
    days = scalar_summary(unwrapped_peak_days(phasors))
    return {
        "amplitude_hpa": scalar_summary(amplitude / PASCAL_PER_HPA),
        "peak_day": days,
        "peak_date": peak_date(float(np.asarray(days["median"])), reference_year),
        "in_phase_hpa": scalar_summary(draws[:, 0] / PASCAL_PER_HPA),
        "quadrature_hpa": scalar_summary(draws[:, 1] / PASCAL_PER_HPA),
        "water_mm": scalar_summary(height_mm / FRESH_WATER_DENSITY),
        "sea_water_mm": scalar_summary(height_mm / sea_water_density),
        "mass_gt": scalar_summary(amplitude * ocean_area_m2 / STANDARD_GRAVITY / KG_PER_GT),
    }


def _sites(
    observations: Observations,
    site_phasors: xr.Dataset,
    admittance: NDArray[np.complex128],
    checks: list[SiteCheck],
    notes: list[list[str]],
) -> list[dict[str, object]]:
    given = [str(site) for site in site_phasors["site"].values]
    observed = np.einsum("sk,skmc->smc", site_phasors["weight"].values, site_phasors["phasor"].values)
    phasor = np.nanmean(observed, axis=1) / PASCAL_PER_HPA
    covariance = observations.covariance / PASCAL_PER_HPA**2
    factors = as_components(admittance.mean(axis=0))
    return [
        {
            "id": site,
            "phasor_hpa": phasor[place].tolist(),
            "phasor_covariance_hpa2": covariance[s].tolist(),
            "admittance": factors[s].tolist(),
            "standardised_residual": checks[s].standardised_residual,
            "outlier_probability": checks[s].outlier_probability,
            "warnings": notes[s],
        }
        for place, site in enumerate(given)
        for s in (observations.sites.index(site),)
    ]


def _site_warnings(observations: Observations, s: int, reduced_sd: float, check: SiteCheck) -> list[str]:
    present = [model for model, there in zip(observations.models, observations.present[s], strict=True) if there]
    own = [
        text
        for applies, text in (
            (
                check.outlier_probability > 0.5,
                f"Disagrees with the other sites: {check.standardised_residual:.1f} standard deviations, "
                f"probability {check.outlier_probability:.2f} of being wrong. Look at its record and its levels; where "
                "something is wrong with it, exclude it and say why.",
            ),
        )
        if applies
    ]
    return [*site_cautions(reduced_sd, [model for model in present if model != NO_MODEL]), *own]
