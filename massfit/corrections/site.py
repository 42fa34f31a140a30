"""All series that are subtracted from the record of one site."""

from collections.abc import Sequence

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.contracts import CORRECTIONS, require
from massfit.corrections.circulation import CirculationAtSites
from massfit.corrections.responses import long_period_tide_at, pole_tide_at
from massfit.corrections.series import daily_series_at, daily_values_at
from massfit.errors import Fault, InputError
from massfit.network import Series
from massfit.site import Site

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
        contracts.CORRECTIONS, Pa. `present` is 0 for a model that covers less than 95 % of the days; its
        values are NaN. The attribute `notes` holds one line for each thing noticed.

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
    result = xr.Dataset(
        {
            "long_period_tides": ("time", long_period_tide_at(responses, site.id, time), {"units": "Pa"}),
            "pole_tide": ("time", pole, {"units": "Pa"}),
            "ocean_mean_atmosphere": ("time", air, {"units": "Pa"}),
            "circulation": (("model", "time"), models, {"units": "Pa"}),
            "present": ("model", present, {"units": "1"}),
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
    present = np.zeros(len(circulation), dtype=np.int8)
    notes = []
    for index, model in enumerate(circulation):
        series = daily_values_at(model.time, model.at(site.id), time)
        covered = float(np.isfinite(series).mean()) if len(time) else 0.0
        if covered >= LEAST_COVERED:
            values[index], present[index] = series, 1
        else:
            notes.append(
                f"{model.name}: covers {100 * covered:.0f} % of the days of {site.id} and is left out there; to use "
                f"it, give the rest of it, or a window that it covers to {100 * LEAST_COVERED:.0f} %"
            )
    if circulation and not present.any():
        notes.append(f"no circulation model covers {site.id}: circulation is part of its noise; give one that does")
    return values, present, notes


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
