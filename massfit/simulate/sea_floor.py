"""Invented fields of ocean models: eddies that are lively in the south and the west, and quiet in the tropics."""

import numpy as np
import xarray as xr
from numpy.typing import NDArray
from scipy.ndimage import gaussian_filter

from massfit.constants import ANNUAL_RATE
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.phasor import days_since

MODELS = ("north", "south")
"""Names of the invented models."""

_STEP_DAYS = 5
_MEMORY_DAYS = 20.0
_EDDY_CELLS = 1.5  # standard deviation of an eddy's shape
_AROUND = ("nearest", "nearest", "wrap")  # of what has rows and columns behind another axis
_SHELF_PA, _SOUTH_PA, _QUIET_PA = 200.0, 250.0, 40.0


def invented_sea_floor(
    seed: int, *, first_year: int = 2008, years: int = 6, spacing_deg: float = 5.0
) -> dict[str, xr.DataArray]:
    """Invent the bottom pressure of two ocean models that share their season in part and no eddy.

    Parameters
    ----------
    seed : int
    first_year : int
    years : int
    spacing_deg : float
        Of the cells.

    Returns
    -------
    dict of str to xarray.DataArray
        By name: Pa, over (time, lat, lon), means over five days; NaN on land. A cycle of the whole ocean is in it.

    Examples
    --------
    >>> field = invented_sea_floor(1, years=3, spacing_deg=30.0)["north"]
    >>> field.sizes["time"], round(float(field.std()) / 100.0, 1) > 0.5
    (219, True)
    """
    rng = np.random.default_rng(seed)
    latitude = np.arange(-90.0 + spacing_deg / 2, 90.0, spacing_deg)
    longitude = np.arange(spacing_deg / 2, 360.0, spacing_deg)
    begin = np.datetime64(f"{first_year}-01-01T00:00", "ns")
    count = int(years * 365.25 / _STEP_DAYS)
    time = begin + (np.arange(count) * 2 + 1) * np.timedelta64(12 * _STEP_DAYS, "h")
    ocean = OceanFunction.builtin()
    land = regrid(ocean.fraction, ocean.cells, CellGrid.from_centres(latitude, longitude)) < 0.5
    size = liveliness(land, latitude)
    coords = {"time": time, "lat": latitude, "lon": longitude}
    shared = _season(rng, size)
    fields = {}
    for name in MODELS:
        values = size * _eddies(rng, (count, *land.shape)) + _whole_ocean(rng, time)[:, None, None]
        phase = ANNUAL_RATE * days_since(time, first_year)[:, None, None]
        season = shared + 0.5 * _season(rng, size)
        values += season.real * np.cos(phase) + season.imag * np.sin(phase)
        values[:, land] = np.nan
        attributes = {"units": "Pa", "long_name": "bottom pressure", "cell_methods": "time: mean"}
        fields[name] = xr.DataArray(values, coords, ("time", "lat", "lon"), "bottom_pressure", attributes)
    return fields


def liveliness(land: NDArray[np.bool_], latitude_deg: NDArray[np.float64]) -> NDArray[np.float64]:
    """Give the standard deviation of the invented eddies: more near land and in the far south, little in the tropics.

    Parameters
    ----------
    land : (n_lat, n_lon) array of bool
    latitude_deg : (n_lat,) array

    Returns
    -------
    (n_lat, n_lon) array
        Pa.
    """
    near = gaussian_filter(land.astype(float), 1.5, mode=("nearest", "wrap"))
    south = np.exp(-(((latitude_deg + 55.0) / 12.0) ** 2))[:, None]
    return np.asarray(_QUIET_PA + _SHELF_PA * np.sqrt(near) + _SOUTH_PA * south)


def _eddies(rng: np.random.Generator, shape: tuple[int, int, int]) -> NDArray[np.float64]:
    """Smooth shapes of unit variance that forget themselves within weeks."""
    keep = float(np.exp(-_STEP_DAYS / _MEMORY_DAYS))
    smooth = gaussian_filter(rng.normal(size=shape), (0.0, _EDDY_CELLS, _EDDY_CELLS), mode=_AROUND)
    smooth /= smooth.std(axis=0)
    for later in range(1, shape[0]):
        smooth[later] = keep * smooth[later - 1] + np.sqrt(1.0 - keep**2) * smooth[later]
    return np.asarray(smooth)


def _season(rng: np.random.Generator, size: NDArray[np.float64]) -> NDArray[np.complex128]:
    """Smooth annual phasor, a third of the eddies in size."""
    parts = gaussian_filter(rng.normal(size=(2, *size.shape)), (0.0, 4.0, 4.0), mode=_AROUND)
    parts *= size / (3.0 * parts.std())
    return np.asarray(parts[0] + 1j * parts[1])


def _whole_ocean(rng: np.random.Generator, time: NDArray[np.datetime64]) -> NDArray[np.float64]:
    """Move the whole ocean: a cycle of about 0.9 hPa, a drift and weather."""
    days = days_since(time, int(str(time[0])[:4]))
    return np.asarray(90.0 * np.cos(ANNUAL_RATE * (days - 275.0)) + 0.01 * days + rng.normal(0.0, 20.0, time.size))
