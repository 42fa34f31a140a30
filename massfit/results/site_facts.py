"""How full the record of a site is, and how its fingerprint varies, as plain numbers."""

from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.phasor import as_complex, as_components, delay_days


def coverage(time: NDArray[np.datetime64], used: NDArray[np.bool_]) -> dict[str, Any]:
    """First and last day that was used at a site, and the share of the days between them that was.

    Parameters
    ----------
    time : (n_day,) array of datetime64
        Middle of the days of the site.
    used : (n_day,) array of bool

    Returns
    -------
    dict
        `first_day`, `last_day` (ISO) and `coverage`.

    Examples
    --------
    >>> time = np.array(["2015-01-01T12", "2015-01-02T12", "2015-01-05T12"], dtype="datetime64[ns]")
    >>> coverage(time, np.array([True, False, True]))
    {'first_day': '2015-01-01', 'last_day': '2015-01-05', 'coverage': 0.4}
    """
    days = time[used].astype("datetime64[D]")
    span = int((days[-1] - days[0]).astype(int)) + 1
    return {"first_day": str(days[0]), "last_day": str(days[-1]), "coverage": len(days) / span}


def member_table(fingerprints: xr.Dataset, sites: list[str]) -> list[dict[str, Any]]:
    """How the fingerprint of each site varies over the load members.

    Parameters
    ----------
    fingerprints : xarray.Dataset
        contracts.FINGERPRINTS.
    sites : list of str

    Returns
    -------
    list of dict
        `id`; `ratio` and `delay_days` of the mean admittance; `ratio_range` and `delay_range_days`, least and
        largest over the members; `spread`, the standard deviation of the complex admittance (None for one member).
    """
    admittance = as_complex(fingerprints["admittance"].sel(site=sites).values)
    table = []
    for site, members in zip(sites, admittance.T, strict=True):
        ratio, delay = np.abs(members), delay_days(members)
        components = as_components(members)
        spread = float(np.sqrt(components.var(axis=0, ddof=1).sum())) if len(members) > 1 else None
        table.append(
            {
                "id": site,
                "ratio": float(np.abs(members.mean())),
                "delay_days": float(delay_days(members.mean())),
                "ratio_range": [float(ratio.min()), float(ratio.max())],
                "delay_range_days": [float(delay.min()), float(delay.max())],
                "spread": spread,
            }
        )
    return table
