"""A field over (time, lat, lon) that may be too large to be read at once."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import EARTH_RADIUS
from massfit.errors import Fault, InputError
from massfit.fingerprint.grid import CellGrid
from massfit.site import Site

DIMENSIONS = ("time", "lat", "lon")

NEAREST_WITHIN_KM = 300.0
"""A site whose own four cells are all dry takes the nearest wet cell within this distance."""

_BLOCK_VALUES = 4_000_000  # 32 MB of float64 at a time


@dataclass(frozen=True, eq=False)
class GridField:
    """A field on a latitude-longitude grid, read in blocks of time.

    Parameters
    ----------
    data : xarray.DataArray
        (time, lat, lon), lazy or in memory; NaN where there is no value.
    time : (n_time,) array of datetime64[ns]
        UTC.
    latitude_deg : (n_lat,) array
        Cell centres, monotonic.
    longitude_deg : (n_lon,) array
        Cell centres, monotonic, unwrapped.
    """

    data: xr.DataArray
    time: NDArray[np.datetime64]
    latitude_deg: NDArray[np.float64]
    longitude_deg: NDArray[np.float64]

    @property
    def cells(self) -> CellGrid:
        """Cells whose bounds lie half-way between the centres."""
        latitude = np.clip(half_way(self.latitude_deg), -90.0, 90.0)
        return CellGrid(latitude, half_way(self.longitude_deg))

    def blocks(self) -> Iterator[tuple[slice, NDArray[np.float64]]]:
        """Yield the times of a block and its values, (k, n_lat * n_lon)."""
        n_cell = self.latitude_deg.size * self.longitude_deg.size
        length = max(1, _BLOCK_VALUES // n_cell)
        for start in range(0, self.time.size, length):
            when = slice(start, min(start + length, self.time.size))
            block = np.asarray(self.data[when].values, dtype=np.float64)
            yield when, block.reshape(block.shape[0], n_cell)

    def first_finite(self) -> NDArray[np.bool_]:
        """Cells with a value at the first time that has any, (n_lat * n_lon,)."""
        for _, block in self.blocks():
            finite = np.isfinite(block)
            if finite.any():
                return np.asarray(finite[np.argmax(finite.any(axis=1))])
        return np.zeros(self.latitude_deg.size * self.longitude_deg.size, dtype=bool)


def grid_field(name: str, data: xr.DataArray) -> GridField:
    """Check a field and bring it into order.

    Parameters
    ----------
    name : str
        What the field is called in messages.
    data : xarray.DataArray
        Over time, lat and lon in any order; degrees north, degrees east in either convention, UTC.

    Returns
    -------
    GridField

    Raises
    ------
    InputError
        Other dimensions, or coordinates that are missing, out of order or too few.

    Examples
    --------
    >>> data = xr.DataArray(
    ...     np.zeros((2, 3, 2)), dims=("lon", "time", "lat"), coords={"lon": [170, -170], "lat": [5, -5],
    ...     "time": np.array(["2016-01-01", "2016-01-02", "2016-01-03"], dtype="datetime64[ns]")})
    >>> grid_field("model", data).longitude_deg
    array([170., 190.])
    """
    if set(data.dims) != set(DIMENSIONS) or any(dim not in data.coords for dim in DIMENSIONS):
        problem = f"dimensions {tuple(data.dims)} with coordinates {tuple(data.coords)}"
        raise InputError(Fault(name, "field", problem, "Must be time, lat and lon with their coordinates"))
    ordered = data.transpose(*DIMENSIONS)
    time = np.asarray(ordered["time"].values, dtype="datetime64[ns]")
    latitude = np.asarray(ordered["lat"].values, dtype=float)
    longitude = np.unwrap(np.asarray(ordered["lon"].values, dtype=float), period=360.0)
    faults = [
        Fault(name, axis, "the values are out of order or fewer than two", "Must be monotonic", "Sort the field")
        for axis, values in {"time": time.astype(np.int64), "lat": latitude, "lon": longitude}.items()
        if not _monotonic(values, increasing=axis == "time")
    ]
    if not faults and np.ptp(longitude) >= 360.0:
        faults.append(Fault(name, "lon", f"the columns span {np.ptp(longitude)} degrees", "Must be once around"))
    if faults:
        raise InputError(faults)
    return GridField(ordered, time, latitude, longitude)


@dataclass(frozen=True, eq=False)
class Stencil:
    """Which cells of a grid give the value at each site.

    Parameters
    ----------
    cell : (n_site, 4) array of int
        Flat indices; all four are the nearest cell where the site's own cells are dry.
    weight : (n_site, 4) array of float
        Their weights, with sum 1; NaN where no cell is near enough.
    distance_km : (n_site,) array of float
        0 where the site's own cells are used, else the distance to the nearest wet cell.
    """

    cell: NDArray[np.intp]
    weight: NDArray[np.float64]
    distance_km: NDArray[np.float64]

    def apply(self, block: NDArray[np.float64]) -> NDArray[np.float64]:
        """Values at the sites, (k, n_site), of a block (k, n_cell); NaN where a cell in use is missing."""
        # cells of weight zero may be dry
        corners = np.where(self.weight == 0.0, 0.0, block[:, self.cell])
        return np.asarray(np.sum(corners * self.weight, axis=-1))


def stencil(field: GridField, wet: NDArray[np.bool_], sites: Sequence[Site]) -> Stencil:
    """Bilinear weights over the wet cells around each site, the nearest wet cell otherwise.

    Parameters
    ----------
    field : GridField
    wet : (n_lat * n_lon,) array of bool
    sites : sequence of Site

    Returns
    -------
    Stencil
    """
    around = [_around(field, wet, site) or _nearest(field, wet, site) for site in sites]
    cell = np.array([entry[0] for entry in around], dtype=np.intp).reshape(-1, 4)
    weight = np.array([entry[1] for entry in around], dtype=float).reshape(-1, 4)
    return Stencil(cell, weight, np.array([entry[2] for entry in around], dtype=float))


_Entry = tuple[NDArray[np.intp], NDArray[np.float64], float]


def _around(field: GridField, wet: NDArray[np.bool_], site: Site) -> _Entry | None:
    row = _bracket(field.latitude_deg, site.latitude_deg, turn=None)
    column = _bracket(field.longitude_deg, site.longitude_deg, turn=360.0)
    if row is None or column is None:
        return None
    n_lon = field.longitude_deg.size
    cell = np.array([i * n_lon + j for i in row[:2] for j in column[:2]], dtype=np.intp)
    weight = np.outer([1.0 - row[2], row[2]], [1.0 - column[2], column[2]]).ravel() * wet[cell]
    if weight.sum() <= 0.0:
        return None
    return cell, weight / weight.sum(), 0.0


def _nearest(field: GridField, wet: NDArray[np.bool_], site: Site) -> _Entry:
    latitude, longitude = np.radians(field.latitude_deg)[:, None], np.radians(field.longitude_deg - site.longitude_deg)
    site_latitude = np.radians(site.latitude_deg)
    chord = np.sin(0.5 * (latitude - site_latitude)) ** 2
    chord = chord + np.cos(latitude) * np.cos(site_latitude) * np.sin(0.5 * longitude) ** 2
    chord = np.where(wet, chord.ravel(), np.inf)
    best = int(np.argmin(chord))
    distance = 2e-3 * EARTH_RADIUS * float(np.arcsin(np.sqrt(min(chord[best], 1.0)))) if wet.any() else np.inf
    weight = np.array([1.0, 0.0, 0.0, 0.0]) if distance <= NEAREST_WITHIN_KM else np.full(4, np.nan)
    return np.full(4, best, dtype=np.intp), weight, distance


def _bracket(centres: NDArray[np.float64], value: float, turn: float | None) -> tuple[int, int, float] | None:
    """Two neighbouring centres and the weight of the second; None where the value is outside every cell."""
    order = np.argsort(centres)
    ascending = centres[order]
    margin = 0.5 * float(np.median(np.diff(ascending)))
    if turn is not None:
        value = ascending[0] + (value - ascending[0]) % turn
        if ascending[-1] - ascending[0] + 3.0 * margin > turn:  # once around: the first column follows the last
            order, ascending = np.append(order, order[0]), np.append(ascending, ascending[0] + turn)
        elif value > ascending[-1] + margin:  # may be in the outer half of the first cell
            value -= turn
    if not ascending[0] - margin <= value <= ascending[-1] + margin:
        return None
    value = float(np.clip(value, ascending[0], ascending[-1]))
    left = int(np.clip(np.searchsorted(ascending, value, side="right") - 1, 0, len(ascending) - 2))
    weight = float((value - ascending[left]) / (ascending[left + 1] - ascending[left]))
    return int(order[left]), int(order[left + 1]), weight


def half_way(centres: NDArray[np.float64]) -> NDArray[np.float64]:
    """Bounds of cells half-way between their centres, (n + 1,); the outer ones as far out as the next are in."""
    middle = 0.5 * (centres[1:] + centres[:-1])
    first, last = 2.0 * centres[0] - middle[0], 2.0 * centres[-1] - middle[-1]
    return np.concatenate([[first], middle, [last]])


def _monotonic(values: NDArray[np.generic], *, increasing: bool) -> bool:
    steps = np.diff(values.astype(float))
    return values.size > 1 and bool(np.all(steps > 0) or (not increasing and np.all(steps < 0)))
