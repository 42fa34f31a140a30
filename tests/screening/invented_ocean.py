"""An eddying ocean with quiet patches, and the slow way to its quietness: one least-squares fit a cell."""

import numpy as np
import xarray as xr
from numpy.typing import NDArray
from scipy.signal import lfilter

from massfit.constants import ANNUAL_RATE
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.phasor import days_since

Floats = NDArray[np.float64]

LIVELY_PA, QUIET_PA = 300.0, 40.0
PATCHES = ((-12.0, 210.0, 20.0), (18.0, 160.0, 15.0), (-30.0, 340.0, 12.0))
"""Latitude, longitude and half width of the quiet patches, degrees."""


def daily(first: str, last: str, step: int = 5) -> NDArray[np.datetime64]:
    """Middles of intervals of so many days."""
    starts = np.arange(first, last, step, dtype="datetime64[D]").astype("datetime64[ns]")
    return np.asarray(starts + np.timedelta64(12 * step, "h"))


def land_mask(latitude: Floats, longitude: Floats) -> NDArray[np.bool_]:
    """Cells that are mostly land."""
    ocean = OceanFunction.builtin()
    return np.asarray(regrid(ocean.fraction, ocean.cells, CellGrid.from_centres(latitude, longitude)) < 0.5)


def is_quiet(latitude: Floats, longitude: Floats) -> NDArray[np.bool_]:
    """Cells within a quiet patch."""
    quiet = np.zeros((latitude.size, longitude.size), dtype=bool)
    for lat, lon, half in PATCHES:
        away = np.abs((longitude - lon + 180.0) % 360.0 - 180.0)
        quiet |= (np.abs(latitude - lat) <= half)[:, None] & (away <= half)[None]
    return quiet


def eddying_ocean(
    seed: int = 1,
    *,
    time: NDArray[np.datetime64] | None = None,
    spacing: float = 10.0,
    mean_removed: bool = False,
    offset: float = 0.0,
) -> xr.DataArray:
    """Bottom pressure, Pa: red eddies, a season and a trend of each cell, and a cycle of the whole ocean."""
    rng = np.random.default_rng(seed)
    time = daily("2011-01-01", "2016-01-01") if time is None else time
    latitude = np.arange(-90.0 + spacing / 2, 90.0, spacing)
    longitude = np.arange(spacing / 2, 360.0, spacing)
    shape = (time.size, latitude.size, longitude.size)
    days = days_since(time, 2011)[:, None, None]
    size = np.where(is_quiet(latitude, longitude), QUIET_PA, LIVELY_PA)
    keep = np.exp(-(time[1] - time[0]) / np.timedelta64(20, "D"))
    eddies = lfilter([np.sqrt(1.0 - keep**2)], [1.0, -keep], rng.normal(size=(80, *shape[1:])), axis=0)[-1:]
    noise = rng.normal(size=shape)
    noise[0] = 0.0
    noise, _ = lfilter([np.sqrt(1.0 - keep**2)], [1.0, -keep], noise, axis=0, zi=keep * eddies)
    in_phase, quadrature, trend = rng.normal(size=(3, *shape[1:])) * np.array([40.0, 40.0, 0.01])[:, None, None]
    season = in_phase * np.cos(ANNUAL_RATE * days) + quadrature * np.sin(ANNUAL_RATE * days)
    whole = 90.0 * np.sin(ANNUAL_RATE * days - 1.0) + 0.05 * days + rng.normal(0.0, 20.0, (time.size, 1, 1))
    values = size * noise + season + trend * days + whole + offset
    values[:, land_mask(latitude, longitude)] = np.nan
    if mean_removed:
        values -= ocean_mean(values, latitude, longitude)[:, None, None]
    coords = {"time": time, "lat": latitude, "lon": longitude}
    return xr.DataArray(values, dims=("time", "lat", "lon"), coords=coords, attrs={"units": "Pa"})


def ocean_mean(values: Floats, latitude: Floats, longitude: Floats) -> Floats:
    """Mean over the cells that have a value, weighted with area, (n_time,)."""
    area = np.where(np.isfinite(values), CellGrid.from_centres(latitude, longitude).cell_area_m2, 0.0)
    total = area.sum(axis=(1, 2))
    return np.asarray(np.nansum(values * area, axis=(1, 2)) / np.where(total > 0.0, total, np.nan))


def direct(pressure: xr.DataArray, *, reference_year: int, subtract: bool) -> dict[str, Floats]:
    """Standard deviations and phasor of every cell by a least-squares fit of its own."""
    values = pressure.values.copy()
    time = pressure["time"].values
    if subtract:
        values -= ocean_mean(values, pressure["lat"].values, pressure["lon"].values)[:, None, None]
    days = days_since(time, reference_year)
    design = np.column_stack(
        [np.ones_like(days), days / 1000.0]
        + [f(k * ANNUAL_RATE * days) for k in (1, 2) for f in (np.cos, np.sin)]
    )  # fmt: skip
    year = time.astype("datetime64[Y]")
    years, counts = np.unique(year, return_counts=True)
    whole = years[counts >= 0.95 * counts.max()]
    some = np.isfinite(values).any(axis=(1, 2))
    found = {name: np.full(values.shape[1:], np.nan) for name in ("sd", "annual_mean_sd", "in_phase", "quadrature")}
    for row, column in np.argwhere(np.isfinite(values).any(axis=0)):
        series = values[:, row, column]
        known = np.isfinite(series)
        if known.sum() < 0.5 * some.sum():
            continue
        solved = np.linalg.lstsq(design[known], series[known], rcond=None)[0]
        left = np.where(known, series - design @ solved, np.nan)
        found["sd"][row, column] = np.sqrt(np.nansum(left**2) / (known.sum() - 6))
        found["in_phase"][row, column], found["quadrature"][row, column] = solved[2:4]
        means = [left[some & (year == y)].mean() for y in whole]
        means = np.array([mean for mean in means if np.isfinite(mean)])
        if means.size >= 3:
            found["annual_mean_sd"][row, column] = np.sqrt((means**2).sum() / (means.size - 2))
    return found
