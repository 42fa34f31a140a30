"""Regular grids of cells on the sphere, and regridding between them that conserves mass."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from massfit.constants import EARTH_RADIUS
from massfit.errors import Fault, InputError

_EVEN = 1e-3  # spacing may vary by this share of itself: coordinates stored as float32 do


@dataclass(frozen=True, eq=False)
class CellGrid:
    """Cells bounded by circles of latitude and by meridians.

    Parameters
    ----------
    latitude_bounds_deg : (n_lat + 1,) array
        Bounds of the rows, degrees north, ascending or descending.
    longitude_bounds_deg : (n_lon + 1,) array
        Bounds of the columns, degrees east, ascending or descending, at most once
        around.

    Raises
    ------
    InputError
        Bounds that are not monotonic, leave [-90, 90] or pass 360 degrees.
    """

    latitude_bounds_deg: NDArray[np.float64]
    longitude_bounds_deg: NDArray[np.float64]

    def __post_init__(self) -> None:
        faults = []
        if not _monotonic(self.latitude_bounds_deg) or np.max(np.abs(self.latitude_bounds_deg)) > 90.0:
            faults.append(Fault("grid", "latitude", "row bounds are out of order or beyond a pole", "[-90, 90]"))
        if not _monotonic(self.longitude_bounds_deg) or np.ptp(self.longitude_bounds_deg) > 360.0 + 1e-9:
            faults.append(Fault("grid", "longitude", "column bounds are out of order or overlap", "One turn at most"))
        if faults:
            raise InputError(faults)

    @classmethod
    def from_centres(cls, latitude_deg: NDArray[np.float64], longitude_deg: NDArray[np.float64]) -> "CellGrid":
        """Cells around equally spaced centres; rows on a pole are cut to half cells.

        Parameters
        ----------
        latitude_deg : (n_lat,) array
            Degrees north, ascending or descending.
        longitude_deg : (n_lon,) array
            Degrees east, ascending or descending, either convention.

        Raises
        ------
        InputError
            Centres that are not equally spaced.

        Examples
        --------
        >>> CellGrid.from_centres(np.array([-60.0, 0.0, 60.0]), np.array([0.0, 180.0])).latitude_bounds_deg
        array([-90., -30.,  30.,  90.])
        """
        latitude = np.clip(_bounds("latitude", latitude_deg), -90.0, 90.0)
        return cls(latitude, _bounds("longitude", longitude_deg))

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns."""
        return self.latitude_bounds_deg.size - 1, self.longitude_bounds_deg.size - 1

    @property
    def cell_area_m2(self) -> NDArray[np.float64]:
        """Area of the cells on the sphere, (n_lat, n_lon) m2."""
        height = np.abs(np.diff(np.sin(np.radians(self.latitude_bounds_deg))))
        width = np.abs(np.diff(np.radians(self.longitude_bounds_deg)))
        return EARTH_RADIUS**2 * np.outer(height, width)


def regrid(values: NDArray[Any], source: CellGrid, target: CellGrid) -> NDArray[Any]:
    """Average cell values over the cells of another grid.

    Each target value is the integral of the source over the target cell, divided
    by the area of that cell: integrals over the sphere are the same before and
    after. Where the source has no cells it counts as zero.

    Parameters
    ----------
    values : (..., n_lat, n_lon) array
        Mean over each source cell; real or complex, any unit per area.
    source, target : CellGrid

    Returns
    -------
    (..., m_lat, m_lon) array
        Mean over each target cell.

    Raises
    ------
    InputError
        `values` does not have the shape of the source.

    Examples
    --------
    >>> fine = CellGrid(np.array([-90.0, -30.0, 30.0, 90.0]), np.array([0.0, 120.0, 240.0, 360.0]))
    >>> coarse = CellGrid(np.array([90.0, 0.0, -90.0]), np.array([-180.0, 180.0]))
    >>> regrid(np.diag([1.0, 2.0, 3.0]), fine, coarse).round(4)
    array([[0.8333],
           [0.5   ]])
    """
    if values.shape[-2:] != source.shape:
        problem = f"values have the shape {values.shape[-2:]}"
        raise InputError(Fault("regrid", "values", problem, f"Must be {source.shape} as the source grid"))
    rows = _overlap(
        np.sin(np.radians(source.latitude_bounds_deg)), np.sin(np.radians(target.latitude_bounds_deg)), turn=None
    )
    columns = _overlap(source.longitude_bounds_deg, target.longitude_bounds_deg, turn=360.0)
    layers = values.reshape(-1, *source.shape)
    result = np.stack([(columns @ (rows @ layer).T).T for layer in layers])
    return result.reshape(*values.shape[:-2], *target.shape)


def _monotonic(bounds: NDArray[np.float64]) -> bool:
    steps = np.diff(bounds)
    return bounds.size > 1 and bool(np.all(steps > 0) or np.all(steps < 0))


def _bounds(name: str, centres: NDArray[np.float64]) -> NDArray[np.float64]:
    centres = np.asarray(centres, dtype=float)
    steps = np.diff(centres)
    if centres.size < 2 or np.ptp(steps) > _EVEN * abs(steps.mean()) or steps.mean() == 0.0:
        problem = "the cell centres are not equally spaced"
        raise InputError(Fault("grid", name, problem, "Must be a regular grid", "Interpolate onto a regular grid"))
    step = steps.mean()
    turn = 360.0 / centres.size
    if abs(abs(step) - turn) * centres.size < _EVEN * turn:  # all around: leave no gap and no overlap
        step = np.copysign(turn, step)
    bounds = centres.mean() + step * (np.arange(centres.size + 1) - centres.size / 2.0)
    return np.asarray(bounds, dtype=float)


def _overlap(source: NDArray[np.float64], target: NDArray[np.float64], turn: float | None) -> csr_array:
    """Share of each target interval (rows) covered by each source interval (columns)."""
    low, source_index = _intervals(source)
    edges, target_index = _intervals(target)
    if turn is not None:  # as many turns of the source as it takes to cover the target
        turns = np.arange(np.floor((edges[0] - low[-1]) / turn), np.ceil((edges[-1] - low[0]) / turn) + 1) * turn
        starts, ends = (np.add.outer(turns, bound).ravel() for bound in (low[:-1], low[1:]))
        source_index = np.tile(source_index, turns.size)
    else:
        starts, ends = low[:-1], low[1:]
    cuts = np.unique(np.concatenate([starts, ends, edges]))
    cuts = cuts[(cuts >= edges[0]) & (cuts <= edges[-1])]
    middle, width = 0.5 * (cuts[1:] + cuts[:-1]), np.diff(cuts)
    of_target = np.searchsorted(edges, middle) - 1
    of_source = np.searchsorted(starts, middle) - 1
    covered = (of_source >= 0) & (middle < ends[of_source])
    share = width / np.diff(edges)[of_target]
    places = target_index[of_target[covered]], source_index[of_source[covered]]
    return csr_array((share[covered], places), shape=(target.size - 1, source.size - 1))


def _intervals(bounds: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.intp]]:
    """Ascending bounds, and the original index of each interval."""
    index = np.arange(bounds.size - 1)
    return (bounds, index) if bounds[-1] > bounds[0] else (bounds[::-1], index[::-1])
