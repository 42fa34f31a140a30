"""What each correction did at a site, how full its record is, and how its fingerprint varies, as plain numbers."""

from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA, TROPICAL_YEAR_DAYS
from massfit.phasor import annual_basis, as_complex, as_components, days_since, delay_days

_SERIES = ("long_period_tides", "pole_tide", "ocean_mean_atmosphere")


def subtracted_phasors(
    corrections: xr.Dataset, used: NDArray[np.bool_], *, reference_year: int
) -> list[dict[str, Any]]:
    """Annual phasor of every series that was subtracted at a site.

    Parameters
    ----------
    corrections : xarray.Dataset
        contracts.CORRECTIONS.
    used : (n_day,) array of bool
        Days that the fit used.
    reference_year : int

    Returns
    -------
    list of dict
        `series`, `model` (None but for a circulation model; "mean" for the mean of those present) and `phasor_hpa`,
        [in phase, quadrature]. Series that are zero throughout are left out.

    Notes
    -----
    Ordinary least squares of a level, a slope, the annual and the semi-annual cycle on the days used: what the
    series itself holds at the annual line. The fit of the site weighs its days otherwise, so that the
    phasor of a site does not move by exactly this when a series is left on.
    """
    days = days_since(corrections["time"].values[used], reference_year)
    rows: list[tuple[str, str | None, NDArray[np.float64]]] = [
        (name, None, corrections[name].values[used]) for name in _SERIES
    ]
    present = corrections["present"].values == 1
    models = corrections["circulation"].values[present][:, used]
    names = [str(name) for name in corrections["model"].values[present]]
    if len(models):
        rows.append(("circulation", "mean", models.mean(axis=0)))
    if len(models) > 1:
        rows += [("circulation", name, series) for name, series in zip(names, models, strict=True)]
    return [
        {"series": name, "model": model, "phasor_hpa": (annual_phasor(days, series) / PASCAL_PER_HPA).tolist()}
        for name, model, series in rows
        if np.any(series)
    ]


def annual_phasor(days: NDArray[np.float64], series: NDArray[np.float64]) -> NDArray[np.float64]:
    """In phase and quadrature of a series, by least squares beside a level, a slope and the semi-annual cycle.

    Parameters
    ----------
    days : (n,) array
        Days from the phase origin.
    series : (n,) array

    Returns
    -------
    (2,) array
        In the unit of the series.

    Examples
    --------
    >>> days = np.arange(730.0)
    >>> annual_phasor(days, 3.0 + 0.1 * days + 2.0 * annual_basis(days)[:, 1]).round(6)
    array([0., 2.])
    """
    years = (days - days.mean()) / TROPICAL_YEAR_DAYS
    design = np.column_stack([annual_basis(days), annual_basis(days, 2), np.ones_like(years), years])
    return np.asarray(np.linalg.lstsq(design, series, rcond=None)[0][:2])


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
