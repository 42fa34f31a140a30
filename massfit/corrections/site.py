"""All series that are subtracted from the record of one site."""

from collections.abc import Sequence

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.contracts import CORRECTIONS, require
from massfit.corrections.circulation import PARTS, CirculationAtSites
from massfit.corrections.grid_field import NEAREST_WITHIN_KM
from massfit.corrections.responses import long_period_tide_at, pole_tide_at
from massfit.corrections.series import daily_series_at, daily_values_at
from massfit.errors import Fault, InputError
from massfit.network import Series
from massfit.site import LEAST_SITE_DAYS, Site

LEAST_COVERED = 0.95
"""A model that covers less than this share of a site's days is missing at that site."""


def site_corrections(
    site: Site,
    time: NDArray[np.datetime64],
    *,
    responses: xr.Dataset,
    atmosphere: Series | None,
    circulation: Sequence[CirculationAtSites],
) -> xr.Dataset:
    """Series to be subtracted from the daily record of a site.

    Parameters
    ----------
    site : Site
    time : (n,) array of datetime64
        Middle of each day, UTC, strictly increasing.
    responses : xarray.Dataset
        contracts.EQUILIBRIUM_RESPONSES; they carry the choice of tides.
    atmosphere : massfit.network.Series or None
        Ocean-mean air pressure; None where it is already removed from the records. Air above the ocean
        presses on the sea floor, so it is subtracted like the rest.
    circulation : sequence of CirculationAtSites

    Returns
    -------
    xarray.Dataset
        contracts.CORRECTIONS, Pa. `present` is 0 for a model that is left out; its values are NaN. Such is a model
        that covers less than 95 % of the days, unless the record is to be cut to the days it covers
        (``partial = "cut"``) and these, together with the other models, are 90 or more. The attribute `notes` holds
        one line for each thing noticed.

    Raises
    ------
    InputError
        Every series that does not cover the record: the atmosphere, or polar motion.
    """
    faults: list[Fault] = []
    pole, predicted = np.full(len(time), np.nan), 0
    try:
        pole, predicted = pole_tide_at(responses, site.id, time)
    except InputError as error:
        faults += error.faults
    air = np.zeros(len(time)) if atmosphere is None else daily_series_at(atmosphere, time)
    if atmosphere is not None and not np.isfinite(air).all():
        faults.append(_uncovered(site, atmosphere, time, air))
    if faults:
        raise InputError(faults)
    models, present, notes = _circulation(site, time, circulation)
    if predicted:
        notes.append(
            f"pole tide: polar motion is predicted, not observed, on {predicted} days; update astropy-iers-data later"
        )
    parts = {name: _part(site, time, circulation, present, name) for name in PARTS}
    result = xr.Dataset(
        {
            "long_period_tides": ("time", long_period_tide_at(responses, site.id, time), {"units": "Pa"}),
            "pole_tide": ("time", pole, {"units": "Pa"}),
            "ocean_mean_atmosphere": ("time", air, {"units": "Pa"}),
            "circulation": (("model", "time"), models, {"units": "Pa"}),
            "present": ("model", present, {"units": "1"}),
            "distance": ("model", _distances(site, circulation), {"units": "m"}),
            **{name: (("model", "time"), p, {"units": "Pa"}) for name, p in parts.items() if np.isfinite(p).any()},
        },
        coords={"time": time, "model": np.array([model.name for model in circulation], dtype=object)},
        attrs={"site": site.id, "notes": "\n".join(notes)},
    )
    require(result, CORRECTIONS)
    return result


def _circulation(
    site: Site, time: NDArray[np.datetime64], circulation: Sequence[CirculationAtSites]
) -> tuple[NDArray[np.float64], NDArray[np.int8], list[str]]:
    values = np.full((len(circulation), len(time)), np.nan)
    for index, model in enumerate(circulation):
        values[index] = daily_values_at(model.time, model.at(site.id), time)
    known, distances = np.isfinite(values), _distances(site, circulation)
    covered = known.mean(axis=1) if len(time) else np.zeros(len(circulation))
    present = np.asarray(covered >= LEAST_COVERED, dtype=np.int8)
    notes = _cut(site, known, covered, present, circulation)
    for index, model in enumerate(circulation):
        if not present[index]:
            values[index] = np.nan
            notes.append(f"{model.name}: {_why_missing(site, distances[index], covered[index])}")
    notes += [
        f"{model.name}: uses the nearest wet cell, {distance / 1000.0:.0f} km from {site.id}"
        for model, there, distance in zip(circulation, present, distances, strict=True)
        if there and distance > 0.0
    ]
    if circulation and not present.any():
        notes.append(f"no circulation model covers {site.id}: circulation is part of its noise; give one that does")
    return values, present, notes


def _cut(
    site: Site,
    known: NDArray[np.bool_],
    covered: NDArray[np.float64],
    present: NDArray[np.int8],
    circulation: Sequence[CirculationAtSites],
) -> list[str]:
    """Take the models to whose days the record is to be cut, the fullest first; `present` is completed in place."""
    notes = []
    for index in sorted(range(len(circulation)), key=lambda index: (-covered[index], circulation[index].name)):
        model = circulation[index]
        if present[index] or model.partial != "cut":
            continue
        shared = int((known[present == 1].all(axis=0) & known[index]).sum())
        if shared >= LEAST_SITE_DAYS:
            present[index] = 1
            notes.append(
                f"{model.name}: covers {100 * covered[index]:.0f} % of the days of {site.id}; the record is cut to "
                f"{shared} of {known.shape[1]} days, as asked"
            )
        else:
            notes.append(
                f"{model.name}: the record of {site.id} is not cut for it, since {shared} days would be left and "
                f"{LEAST_SITE_DAYS} are needed"
            )
    return notes


def _why_missing(site: Site, distance: float, covered: float) -> str:
    if np.isnan(distance):
        return f"has no series for {site.id} and is left out there; give one to use it"
    if distance > 1000.0 * NEAREST_WITHIN_KM:
        nearest = f"the nearest is {distance / 1000.0:.0f} km away" if np.isfinite(distance) else "there is none at all"
        return f"has no wet cell within {NEAREST_WITHIN_KM:.0f} km of {site.id} ({nearest}) and is left out there"
    return (
        f"covers {100 * covered:.0f} % of the days of {site.id} and is left out there; to use it, give the rest of it, "
        f"or a window that it covers to {100 * LEAST_COVERED:.0f} %"
    )


def _part(
    site: Site,
    time: NDArray[np.datetime64],
    circulation: Sequence[CirculationAtSites],
    present: NDArray[np.int8],
    name: str,
) -> NDArray[np.float64]:
    """Find a part of each model's pressure on the days, (n_model, n) Pa; NaN where a model lacks it or is left out."""
    values = np.full((len(circulation), len(time)), np.nan)
    for index, model in enumerate(circulation):
        if present[index] and name in model.parts:
            part = model.parts[name][:, model.sites.index(site.id)]
            values[index] = daily_values_at(model.time, part, time)
    return values


def _distances(site: Site, circulation: Sequence[CirculationAtSites]) -> NDArray[np.float64]:
    distances = [model.distance_km[model.sites.index(site.id)] for model in circulation]
    return 1000.0 * np.array(distances, dtype=float)


def _uncovered(site: Site, atmosphere: Series, time: NDArray[np.datetime64], air: NDArray[np.float64]) -> Fault:
    missing = time[~np.isfinite(air)]
    return Fault(
        atmosphere.name,
        "ocean_mean_atmosphere",
        f"the series does not cover {missing.size} days of the record of {site.id}, "
        f"first {str(missing[0])[:10]}, last {str(missing[-1])[:10]}",
        f"It runs from {str(atmosphere.time[0])[:16]} to {str(atmosphere.time[-1])[:16]}, middle of its intervals",
        "Give a series that covers the record without gaps, or shorten the window",
    )
