"""The daily records of a run, site by site, and the series that were taken off them."""

from collections.abc import Sequence

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.results.finished import FinishedRun

Floats = NDArray[np.float64]

SERIES = {
    "long-period tides": "long_period_tides",
    "circulation (model mean)": "circulation",
    "ocean-mean air pressure": "ocean_mean_atmosphere",
    "pole tide": "pole_tide",
}
"""Series that were subtracted: in words, and by name."""


def deployments_by_site(run: FinishedRun) -> dict[str, list[xr.Dataset]]:
    """Part the daily records of a run into those of each site, one Dataset a deployment."""
    if "reduced_records.nc" not in run.datasets:  # there are none where every site was reduced elsewhere
        return {}
    records = run.datasets["reduced_records.nc"]
    ends = np.cumsum(records["row_size"].values)
    parts: dict[str, list[xr.Dataset]] = {}
    for index, (end, size) in enumerate(zip(ends, records["row_size"].values, strict=True)):
        part = records.isel(deployment=index, obs=slice(end - size, end))
        parts.setdefault(str(part["site"].values), []).append(part)
    return parts


def subtracted_series(deployments: Sequence[xr.Dataset]) -> dict[str, Floats]:
    """Give the series that were taken off a site about their means, its deployments end to end, hPa.

    Those that are zero throughout are left out.
    """
    present = deployments[0]["model_present"].values == 1
    series: dict[str, Floats] = {}
    for words, name in SERIES.items():
        values = np.concatenate([part[name].values for part in deployments], axis=-1)
        if name == "circulation":
            if not present.any():
                continue
            values = values[present].mean(axis=0)
        if np.any(values):
            series[words] = about_zero(values)
    return series


def about_zero(series: Floats) -> Floats:
    """Take the mean off a series and turn Pa into hPa."""
    return np.asarray((series - np.nanmean(series)) / PASCAL_PER_HPA)
