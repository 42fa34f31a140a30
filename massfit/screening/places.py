"""Where places stand on a quietness map: their own numbers, and how much of the ocean is quieter."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import EARTH_RADIUS
from massfit.corrections.grid_field import NEAREST_WITHIN_KM, half_way
from massfit.fingerprint.grid import CellGrid
from massfit.site import Site


@dataclass(frozen=True)
class PlaceOnMap:
    """One place on a quietness map, Pa.

    Parameters
    ----------
    site : str
    latitude_deg, longitude_deg : float
    distance_km : float
        From the place to the centre of the cell whose numbers it has.
    sd, annual_mean_sd : float
        NaN where the models have too few values.
    annual_sd, expected_annual_sd : tuple of float
        Of one component, for each length of record.
    disagreement : float
        NaN for a single model.
    quieter_share : float
        Share of the area of the map that is quieter by `sd`, 0 to 1.
    quieter_share_annual : float
        The same by the standard deviation at the annual line.
    """

    site: str
    latitude_deg: float
    longitude_deg: float
    distance_km: float
    sd: float
    annual_mean_sd: float
    annual_sd: tuple[float, ...]
    expected_annual_sd: tuple[float, ...]
    disagreement: float
    quieter_share: float
    quieter_share_annual: float


def places_on_map(dataset: xr.Dataset, sites: Sequence[Site]) -> tuple[list[PlaceOnMap], list[Site]]:
    """Find the places on a map, each in the nearest cell that has numbers.

    Parameters
    ----------
    dataset : xarray.Dataset
        contracts.QUIETNESS_MAP.
    sites : sequence of Site

    Returns
    -------
    found : list of PlaceOnMap
        In the order of the sites.
    beyond : list of Site
        With no such cell within 300 km, or within their own cell where cells are larger.
    """
    area = map_areas(dataset)
    latitude, longitude = np.meshgrid(dataset["lat"].values, dataset["lon"].values, indexing="ij")
    known = np.isfinite(dataset["sd"].values)
    # a place is never farther from the centre of its own cell than half the diagonal
    step = max(np.diff(dataset[axis].values).max() for axis in ("lat", "lon"))
    farthest = max(NEAREST_WITHIN_KM, np.radians(step) * EARTH_RADIUS / 1e3 / np.sqrt(2.0))
    found, beyond = [], []
    for site in sites:
        distance = np.where(known, _distance_km(latitude, longitude, site), np.inf)
        cell = np.unravel_index(np.argmin(distance), distance.shape)
        if distance[cell] > farthest:
            beyond.append(site)
            continue
        own = dataset.isel(lat=int(cell[0]), lon=int(cell[1]))
        annual = dataset["annual_sd"].values[-1]
        found.append(
            PlaceOnMap(
                site.id,
                site.latitude_deg,
                site.longitude_deg,
                float(distance[cell]),
                float(own["sd"]),
                float(own["annual_mean_sd"]),
                tuple(float(value) for value in own["annual_sd"].values),
                tuple(float(value) for value in own["expected_annual_sd"].values),
                float(own["disagreement"]) if "disagreement" in own else float("nan"),
                _share_below(dataset["sd"].values, area, float(own["sd"])),
                _share_below(annual, area, float(annual[cell])),
            )
        )
    return found, beyond


def map_areas(dataset: xr.Dataset) -> NDArray[np.float64]:
    """Areas of the cells of a map.

    Parameters
    ----------
    dataset : xarray.Dataset
        With `lat` and `lon`, degrees.

    Returns
    -------
    (n_lat, n_lon) array
        m2.
    """
    latitude, longitude = (half_way(dataset[axis].values) for axis in ("lat", "lon"))
    return CellGrid(np.clip(latitude, -90.0, 90.0), longitude).cell_area_m2


def area_quantiles(
    values: NDArray[np.float64], area: NDArray[np.float64], shares: Sequence[float]
) -> NDArray[np.float64]:
    """Give values below which the stated shares of the area lie.

    Parameters
    ----------
    values, area : array
        Of one shape; cells without a value do not count.
    shares : sequence of float
        0 to 1.

    Returns
    -------
    (n_share,) array
        NaN where no cell has a value.

    Examples
    --------
    >>> area_quantiles(np.array([1.0, 3.0, np.nan, 2.0]), np.array([1.0, 1.0, 9.0, 2.0]), [0.5]).tolist()
    [2.0]
    """
    known = np.isfinite(values)
    if not known.any():
        return np.full(len(shares), np.nan)
    order = np.argsort(values[known], kind="stable")
    ascending, summed = values[known][order], np.cumsum(area[known][order])
    place = np.searchsorted(summed, np.asarray(shares) * summed[-1] * (1.0 - 1e-12))
    return np.asarray(ascending[np.minimum(place, ascending.size - 1)])


def _share_below(values: NDArray[np.float64], area: NDArray[np.float64], value: float) -> float:
    known = np.isfinite(values)
    if not np.isfinite(value):
        return float("nan")
    return float(area[known & (values < value)].sum() / area[known].sum())


def _distance_km(latitude: NDArray[np.float64], longitude: NDArray[np.float64], site: Site) -> NDArray[np.float64]:
    own = np.radians(site.latitude_deg)
    rows, columns = np.radians(latitude), np.radians(longitude - site.longitude_deg)
    chord = np.sin(0.5 * (rows - own)) ** 2 + np.cos(rows) * np.cos(own) * np.sin(0.5 * columns) ** 2
    return np.asarray(2e-3 * EARTH_RADIUS * np.arcsin(np.sqrt(np.clip(chord, 0.0, 1.0))))
