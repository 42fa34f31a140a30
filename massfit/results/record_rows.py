"""What the figure of the records shows: one row a site."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.cautions import QUIET_SD
from massfit.constants import PASCAL_PER_HPA
from massfit.phasor import annual_basis, days_since
from massfit.results.daily_parts import about_zero, deployments_by_site, subtracted_series
from massfit.results.finished import FinishedRun


@dataclass(frozen=True)
class RecordRow:
    """What one row of the figure shows.

    Parameters
    ----------
    site : str
    deployments : sequence of (time, pressure, drift)
        Daily pressure and fitted drift with steps, each about its own mean, hPa; one entry a deployment.
    correction_time : (n,) array of datetime64
    corrections : mapping of str to (n,) array
        Series that were subtracted, hPa, by the words of `daily_parts.SERIES`.
    reduced_time : (m,) array of datetime64
    reduced : (m,) array
        Record less corrections, drift and steps, hPa.
    annual : (m,) array
        Fitted annual cycle on `reduced_time`, hPa.
    note : str
        Printed beside the name when the site carries a warning.
    """

    site: str
    deployments: Sequence[tuple[NDArray[np.datetime64], NDArray[np.float64], NDArray[np.float64]]]
    correction_time: NDArray[np.datetime64]
    corrections: Mapping[str, NDArray[np.float64]]
    reduced_time: NDArray[np.datetime64]
    reduced: NDArray[np.float64]
    annual: NDArray[np.float64]
    note: str = ""


def record_rows(run: FinishedRun) -> list[RecordRow]:
    """Prepare the row of every site that has records.

    Parameters
    ----------
    run : FinishedRun

    Returns
    -------
    list of RecordRow
        In the order of the sites.
    """
    parts, year = deployments_by_site(run), run.summary["reference_year"]
    return [_row(site, parts[site["id"]], year) for site in run.summary["sites"] if site["id"] in parts]


def _row(site: Mapping[str, Any], deployments: Sequence[xr.Dataset], reference_year: int) -> RecordRow:
    used = [part.isel(obs=np.isfinite(part["reduced"].values)) for part in deployments]
    time = np.concatenate([part["time"].values for part in used])
    order = np.argsort(time, kind="stable")
    annual = annual_basis(days_since(time, reference_year)) @ np.array(site["phasor_hpa"])
    reduced = np.concatenate([part["reduced"].values for part in used])
    days, first = np.unique(np.concatenate([part["time"].values for part in deployments]), return_index=True)
    return RecordRow(
        site=site["id"],
        deployments=[
            (part["time"].values, about_zero(part["pressure"].values), about_zero(part["drift"].values))
            for part in used
            if part.sizes["obs"]
        ],
        correction_time=days,
        corrections={words: series[first] for words, series in subtracted_series(deployments).items()},
        reduced_time=time[order],
        reduced=reduced[order] / PASCAL_PER_HPA,
        annual=annual[order],
        note="not quiet" if site["reduced_sd_hpa"] * PASCAL_PER_HPA > QUIET_SD else "",
    )
