"""Error of a record, and of the answer with it, against the years of record."""

from collections.abc import Sequence

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.dataset import site_noise
from massfit.siting.candidate_gain import covariance_with
from massfit.siting.candidates import candidate_rows, widths
from massfit.siting.gain_map import Plan
from massfit.siting.planned_noise import PlannedNoise
from massfit.siting.record_length import YEARS, record_length_curve, years_needed

Floats = NDArray[np.float64]


def length_dataset(
    plan: Plan,
    noise: PlannedNoise,
    place: xr.Dataset,
    admittance: NDArray[np.complex128],
    phasors: xr.Dataset,
    *,
    target_sd: float | None = None,
    years: Sequence[float] = YEARS,
) -> xr.Dataset:
    """Errors against the years of record: of a planned recorder, of one more at each site, and of the answer.

    Parameters
    ----------
    plan : Plan
    noise : PlannedNoise
        Of the planned recorder.
    place : xarray.Dataset
        The one place, from :func:`massfit.siting.gain_map.places_dataset`, that the answer is followed for.
    admittance : (n_member, 1) array of complex
        There.
    phasors : xarray.Dataset
        contracts.SITE_PHASORS; knows the noise of the sites.
    target_sd : float, optional
        Pa.
    years : sequence of float

    Returns
    -------
    xarray.Dataset
        Over (record_years): `record_sd` of the planned recorder; `answer_sd`, `amplitude_sd` and `peak_day_sd` of the
        answer with it at the place. `site_record_sd` (site, record_years) of one recorder with the noise of each site,
        NaN where it is not known. With a target `years_to_target` and `site_years_to_target` (site), of one record
        alone, and `answer_years_to_target`; infinite where it is not reached in the last.
    """
    priors = plan.choices.priors
    record = record_length_curve(noise.model, priors, years=years)
    names = list(plan.observations.sites)
    own = {name: site_noise(phasors, name) for name in names}
    nothing = np.full(len(years), np.nan)
    of_sites = np.array(
        [nothing if model is None else record_length_curve(model, priors, years=years) for model in own.values()]
    )
    planned = float(record_length_curve(noise.model, priors, years=[plan.years])[0])
    scale = float(place["record_sd"].item()) / planned
    found = widths(plan.error.pooled_mean, _answers(plan, place, admittance, scale * record, years))
    by_length = {
        "record_sd": (record, "Pa", "error of a component of the phasor of the planned recorder alone"),
        "answer_sd": (found.component_sd, "Pa", "error of a component of the answer with it at the place"),
        "amplitude_sd": (found.amplitude_sd, "Pa", "error of the amplitude of the answer"),
        "peak_day_sd": (found.day_sd, "d", "error of the peak day of the answer"),
    }
    data = xr.Dataset(
        {
            name: ("record_years", values, {"units": u, "long_name": text})
            for name, (values, u, text) in by_length.items()
        },
        coords={"record_years": list(years), "site": names},
        attrs={**place.attrs, "place_latitude": place["latitude"].item(), "place_longitude": place["longitude"].item()},
    )
    text = "error of a component of the phasor of one recorder with the noise of the site"
    data["site_record_sd"] = (("site", "record_years"), of_sites, {"units": "Pa", "long_name": text})
    return data if target_sd is None else _with_target(data, target_sd)


def _answers(
    plan: Plan, place: xr.Dataset, admittance: NDArray[np.complex128], record_sd: Floats, years: Sequence[float]
) -> Floats:
    """Covariance (n, 2, 2) of the answer with a recorder at one place for each length of its record."""
    position = np.radians([[place["latitude"].item(), place["longitude"].item()]])
    found = []
    for sd, length in zip(record_sd, years, strict=True):
        rows = candidate_rows(
            plan.observations, plan.choices, position, admittance,
            record=sd**2 * np.eye(2), unrest=float(place["unrest"].item()), years=length,
        )  # fmt: skip
        found.append(covariance_with(plan.error, rows)[0])
    return np.array(found)


def _with_target(data: xr.Dataset, target_sd: float) -> xr.Dataset:
    years = [float(length) for length in data["record_years"].values]
    attrs = {"units": "yr", "long_name": f"years of record for an error of {target_sd / 100.0:g} hPa"}
    of_sites = [
        np.nan if np.isnan(sd).all() else years_needed(years, sd, target_sd) for sd in data["site_record_sd"].values
    ]
    return data.assign(
        years_to_target=((), years_needed(years, data["record_sd"].values, target_sd), attrs),
        site_years_to_target=("site", of_sites, attrs),
        answer_years_to_target=((), years_needed(years, data["answer_sd"].values, target_sd), attrs),
    ).assign_attrs(target_sd_pa=target_sd)
