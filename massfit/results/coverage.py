"""Which days of which months the answer rests on, site by site."""

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.results.daily_parts import deployments_by_site
from massfit.results.finished import FinishedRun


def monthly_coverage(run: FinishedRun) -> xr.Dataset:
    """Share of the days of every month that the fit of each site used.

    Parameters
    ----------
    run : FinishedRun

    Returns
    -------
    xarray.Dataset
        `share` (site, month), from 0 to 1; NaN where there is not even a daily value. `deployed` (deployment,), with
        the coordinate `site_of_deployment`: the first day of each recorder. `month` is the first day of the month;
        the months follow each other without a gap. Sites without records are not in it.
    """
    parts = deployments_by_site(run)
    times = [part["time"].values for deployments in parts.values() for part in deployments if part.sizes["obs"]]
    if not times:
        return coverage_table([], np.array([], "datetime64[M]"), np.zeros((0, 0)), [])
    months = _months(min(time.min() for time in times), max(time.max() for time in times))
    share = np.full((len(parts), months.size), np.nan)
    for row, deployments in zip(share, parts.values(), strict=True):
        for part in deployments:
            known = np.isin(months, part["time"].values.astype("datetime64[M]"))
            row[known] = np.nan_to_num(row[known])
        used = [part["time"].values[np.isfinite(part["reduced"].values)] for part in deployments]
        days = np.unique(np.concatenate(used).astype("datetime64[D]"))
        found, counts = np.unique(days.astype("datetime64[M]"), return_counts=True)
        row[np.searchsorted(months, found)] = counts / _lengths(found)
    starts = [(site, part["time"].values.min()) for site, own in parts.items() for part in own if part.sizes["obs"]]
    return coverage_table(list(parts), months, share, starts)


def coverage_table(
    sites: list[str],
    months: NDArray[np.datetime64],
    share: NDArray[np.float64],
    starts: list[tuple[str, np.datetime64]],
) -> xr.Dataset:
    """Put coverage under its names.

    Parameters
    ----------
    sites : list of str
    months : (n_month,) array of datetime64[M]
    share : (n_site, n_month) array
    starts : list of (str, datetime64)
        Site and first day of each recorder.

    Returns
    -------
    xarray.Dataset
        As :func:`monthly_coverage` gives it.
    """
    return xr.Dataset(
        {
            "share": (("site", "month"), share, {"units": "1", "long_name": "share of the days that were used"}),
            "deployed": (("deployment",), np.array([day for _, day in starts], "datetime64[ns]")),
        },
        coords={
            "site": (("site",), np.array(sites, dtype=object)),
            "month": (("month",), months.astype("datetime64[ns]")),
            "site_of_deployment": (("deployment",), np.array([site for site, _ in starts], dtype=object)),
        },
    )


def _months(first: np.datetime64, last: np.datetime64) -> NDArray[np.datetime64]:
    return np.arange(first.astype("datetime64[M]"), last.astype("datetime64[M]") + 1)


def _lengths(months: NDArray[np.datetime64]) -> NDArray[np.int64]:
    return np.asarray(((months + 1).astype("datetime64[D]") - months.astype("datetime64[D]")).astype(int))
