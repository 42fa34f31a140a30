"""The cells of the models: one grid for all, in one order, with land that is masked."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.corrections.grid_field import half_way
from massfit.errors import Fault, InputError
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.screening.field import BlockSource, ModelField
from massfit.screening.sums import Floats

MOST_LAND = 0.1
"""Share of the land in the grid that may have values: lakes, ice shelves and coarse coasts."""

_SAME = 1e-3  # of a cell: coordinates stored as float32 differ by so much


@dataclass(frozen=True, eq=False)
class ScreenGrid:
    """Centres of cells, and how to bring values from the order of a field into this one.

    Parameters
    ----------
    latitude_deg, longitude_deg : array
        Ascending; the first longitude is in [0, 360).
    row, column : array of int
        Place of each row and column in the field.
    """

    latitude_deg: Floats
    longitude_deg: Floats
    row: NDArray[np.intp]
    column: NDArray[np.intp]

    def ordered(self, values: Floats) -> Floats:
        """Bring values (..., n_cell) of a field into the order of the grid, (..., n_lat, n_lon)."""
        field = values.reshape(*values.shape[:-1], self.row.size, self.column.size)
        return np.ascontiguousarray(field[..., self.row[:, None], self.column])

    def close_to(self, other: "ScreenGrid") -> bool:
        """Whether both are the same cells."""
        pairs = ((self.latitude_deg, other.latitude_deg), (self.longitude_deg, other.longitude_deg))
        return all(a.size == b.size and np.abs(a - b).max() <= _SAME * np.diff(a).min() for a, b in pairs)

    def described(self) -> str:
        """Say what grid it is."""
        latitude, longitude = self.latitude_deg, self.longitude_deg
        return (
            f"{latitude.size} x {longitude.size} cells, {latitude[0]:g} to {latitude[-1]:g} north, "
            f"{longitude[0]:g} to {longitude[-1]:g} east"
        )


def screen_grid(source: BlockSource) -> ScreenGrid:
    """Order the rows and columns of a field.

    Parameters
    ----------
    source : BlockSource

    Returns
    -------
    ScreenGrid
    """
    row = np.argsort(source.latitude_deg)
    longitude = source.longitude_deg
    step = np.abs(np.diff(longitude)).min()
    if np.ptp(longitude) + 1.5 * step > 360.0:  # once around: begin at Greenwich
        longitude = np.mod(longitude, 360.0)
        longitude = np.where(longitude > 360.0 - _SAME * step, longitude - 360.0, longitude)
    else:
        longitude = longitude - 360.0 * np.floor(longitude.min() / 360.0)
    column = np.argsort(longitude)
    return ScreenGrid(source.latitude_deg[row], longitude[column], row, column)


def cell_weights(source: BlockSource, ocean: OceanFunction) -> Floats:
    """Area of each cell of a field and the part of it that is ocean, (n_lat * n_lon, 2) m2.

    Parameters
    ----------
    source : BlockSource
    ocean : OceanFunction

    Returns
    -------
    array
    """
    cells = field_cells(source)
    area = cells.cell_area_m2
    return np.stack([area, regrid(ocean.fraction, ocean.cells, cells) * area], axis=-1).reshape(-1, 2)


def field_cells(source: BlockSource) -> CellGrid:
    """Cells whose bounds lie half-way between the centres.

    Parameters
    ----------
    source : BlockSource

    Returns
    -------
    CellGrid
    """
    latitude, longitude = (half_way(centres) for centres in (source.latitude_deg, source.longitude_deg))
    return CellGrid(np.clip(latitude, -90.0, 90.0), longitude)


def same_grid(fields: Sequence[ModelField], grids: Sequence[ScreenGrid]) -> list[Fault]:
    """Faults of models that are not on the grid of the first.

    Parameters
    ----------
    fields : sequence of ModelField
    grids : sequence of ScreenGrid
        Theirs.

    Returns
    -------
    list of Fault
    """
    return [
        Fault(
            field.name,
            "lat, lon",
            f"the grid is {grid.described()}",
            f"Must be that of the first model, {fields[0].name}: {grids[0].described()}",
            "Interpolate the models to one grid, or screen them one by one",
        )
        for field, grid in zip(fields[1:], grids[1:], strict=True)
        if not grid.close_to(grids[0])
    ]


def require_land_mask(name: str, wet: NDArray[np.bool_], weights: Floats) -> None:
    """Refuse a field that has values on land.

    Parameters
    ----------
    name : str
        Of the model.
    wet : (n_cell,) array of bool
        Cells with values.
    weights : (n_cell, 2) array
        Of :func:`cell_weights`.

    Raises
    ------
    InputError
    """
    if not wet.any():
        raise InputError(Fault(name, "pressure", "the field holds no value at its first times", "Must hold pressure"))
    land = weights[:, 0] - weights[:, 1]
    dry = weights[:, 1] < 0.01 * weights[:, 0]
    share = float(land[dry & wet].sum() / max(land[dry].sum(), 1.0))
    if share > MOST_LAND:
        problem = f"{100 * share:.0f} % of the land has values: the land is not masked"
        allowed = "Land must be missing: NaN, or the _FillValue of the variable"
        raise InputError(Fault(name, "pressure", problem, allowed, "Mask the land: its cells would be the quietest"))
