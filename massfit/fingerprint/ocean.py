"""The ocean function: what part of each cell of the Earth's surface is ocean."""

from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from massfit.constants import EARTH_RADIUS
from massfit.display import Described, Description
from massfit.errors import Fault, InputError
from massfit.fingerprint.grid import CellGrid
from massfit.tables.ocean_fraction import REFERENCE, read_ocean_fraction

_ROUNDING = 1e-12  # of averages that were made elsewhere


@dataclass(frozen=True, eq=False, repr=False)
class OceanFunction(Described):
    """Area fraction of ocean on a regular global grid of cells.

    Parameters
    ----------
    cells : CellGrid
        Cells that cover the sphere.
    fraction : (n_lat, n_lon) array
        0 on land to 1 on the ocean.
    reference : str
        Where the fractions come from.

    Raises
    ------
    InputError
        Fractions outside [0, 1], without any ocean, or of another shape.

    Examples
    --------
    An ocean planet with one polar cap of land:

    >>> cells = CellGrid(np.linspace(90.0, -90.0, 19), np.linspace(0.0, 360.0, 37))
    >>> fraction = np.ones(cells.shape)
    >>> fraction[0] = 0.0
    >>> OceanFunction(cells, fraction, reference="invented")
    Ocean function
      cells       18 x 36 (latitude, longitude)
      ocean area  5.0619e+14 m2, 99.2% of the sphere
      reference   invented
    """

    cells: CellGrid
    fraction: NDArray[np.float64]
    reference: str = ""

    def __post_init__(self) -> None:
        if self.fraction.shape != self.cells.shape:
            problem = f"fractions have the shape {self.fraction.shape}"
            raise InputError(Fault("ocean function", "fraction", problem, f"Must be {self.cells.shape}"))
        inside = np.all((self.fraction >= -_ROUNDING) & (self.fraction <= 1.0 + _ROUNDING))
        if not (inside and np.any(self.fraction > 0.0)):
            problem = f"fractions run from {np.min(self.fraction)} to {np.max(self.fraction)}"
            raise InputError(Fault("ocean function", "fraction", problem, "Must be within [0, 1], with some ocean"))

    @classmethod
    def builtin(cls) -> "OceanFunction":
        """Return the quarter-degree ocean function that ships with the package.

        Marginal ice shelves are ocean; lakes and the Caspian are land.

        Examples
        --------
        >>> f"{OceanFunction.builtin().area_m2:.4e}"
        '3.6263e+14'
        """
        return _builtin()

    def describe(self) -> Description:
        """Cells and area."""
        area = self.area_m2
        rows, columns = self.cells.shape
        return "Ocean function", {
            "cells": f"{rows} x {columns} (latitude, longitude)",
            "ocean area": f"{area:.4e} m2, {area / (4.0 * np.pi * EARTH_RADIUS**2):.1%} of the sphere",
            "reference": self.reference,
        }

    @property
    def area_m2(self) -> float:
        """Area of the ocean on the sphere of radius 6371 km, m2."""
        return float(np.sum(self.fraction * self.cells.cell_area_m2))

    def fraction_at(self, latitude_deg: ArrayLike, longitude_deg: ArrayLike) -> NDArray[np.float64]:
        """Fraction of ocean in the cells that hold the points.

        Parameters
        ----------
        latitude_deg, longitude_deg : array_like
            Degrees north and east, either convention.

        Returns
        -------
        array
            Of the shape the coordinates have together; 0 where there is no cell.

        Examples
        --------
        >>> OceanFunction.builtin().fraction_at([0.0, 24.0], [200.0, 10.0])
        array([1., 0.])
        """
        row = _index(self.cells.latitude_bounds_deg, np.asarray(latitude_deg, dtype=float))
        bounds = self.cells.longitude_bounds_deg
        column = _index(bounds, np.mod(np.asarray(longitude_deg, dtype=float) - bounds.min(), 360.0) + bounds.min())
        inside = (row >= 0) & (column >= 0)
        return np.where(inside, self.fraction[row, column], 0.0)

    def nearest_ocean(self, latitude_deg: float, longitude_deg: float) -> tuple[float, float, float]:
        """Centre of the nearest cell that is at least half ocean (or the wettest there is).

        Parameters
        ----------
        latitude_deg, longitude_deg : float
            Degrees north and east, either convention.

        Returns
        -------
        latitude_deg, longitude_deg, distance_km : float
            The centre (longitude as the grid counts it) and the distance to it.

        Examples
        --------
        >>> OceanFunction.builtin().nearest_ocean(24.0, 10.0)
        (31.375, 15.875, 1003.1...)
        """
        latitude = _middle(self.cells.latitude_bounds_deg)
        longitude = _middle(self.cells.longitude_bounds_deg)
        row, column = np.nonzero(self.fraction >= min(0.5, float(self.fraction.max())))
        # haversine: exact for neighbours and for antipodes
        half_lat = 0.5 * np.radians(latitude - latitude_deg)[row]
        half_lon = 0.5 * np.radians(longitude - longitude_deg)[column]
        shrink = np.cos(np.radians(latitude_deg)) * np.cos(np.radians(latitude))[row]
        chord = np.sin(half_lat) ** 2 + shrink * np.sin(half_lon) ** 2
        best = int(np.argmin(chord))
        distance = 2.0 * EARTH_RADIUS * np.arcsin(min(1.0, np.sqrt(chord[best])))
        return float(latitude[row[best]]), float(longitude[column[best]]), float(distance) / 1000.0


_NO_OCEAN = 0.005  # ocean fraction of a quarter-degree cell below which a site is on land


def land_fault(
    source: str, name: str, latitude_deg: float, longitude_deg: float, *, search: bool = True
) -> Fault | None:
    """Fault of a site on land by the built-in ocean function, with the nearest ocean and its distance.

    Parameters
    ----------
    source, name : str
        Of the fault.
    latitude_deg, longitude_deg : float
        Degrees north and east, either convention.
    search : bool
        Whether to look for the nearest ocean, which takes its time.

    Returns
    -------
    Fault or None

    Examples
    --------
    >>> print(land_fault("network", "A", 47.0, 8.0))
    network: A: the site at 47, 8 is on land. Must be in the ocean. The nearest ocean is at 44.375, 8.875,
        300 km away; check sign and order.
    """
    ocean = _builtin()
    if ocean.fraction_at(latitude_deg, longitude_deg) > _NO_OCEAN:
        return None
    action = "Check sign and order"
    if search:
        latitude, longitude, distance_km = ocean.nearest_ocean(latitude_deg, longitude_deg)
        longitude = longitude % 360.0 if longitude_deg > 180.0 else longitude
        place = f"{latitude:.3f}, {longitude:.3f}, {distance_km:.0f} km away"
        action = f"The nearest ocean is at {place}; check sign and order"
    problem = f"the site at {latitude_deg:g}, {longitude_deg:g} is on land"
    return Fault(source, name, problem, "Must be in the ocean", action)


@cache
def _builtin() -> OceanFunction:
    fraction = read_ocean_fraction()
    rows, columns = fraction.shape
    cells = CellGrid(np.linspace(90.0, -90.0, rows + 1), np.linspace(-180.0, 180.0, columns + 1))
    fraction.setflags(write=False)
    return OceanFunction(cells, fraction, REFERENCE)


def _middle(bounds: NDArray[np.float64]) -> NDArray[np.float64]:
    return 0.5 * (bounds[1:] + bounds[:-1])


def _index(bounds: NDArray[np.float64], value: NDArray[np.float64]) -> NDArray[np.intp]:
    """Cell that holds each value, -1 where none does; the last bound belongs to the last cell."""
    descending = bounds[0] > bounds[-1]
    ascending = bounds[::-1] if descending else bounds
    cells = bounds.size - 1
    index = np.searchsorted(ascending, value, side="right") - 1
    index = np.where(value == ascending[-1], cells - 1, index)
    index = np.where(index >= cells, -1, index)
    return np.where((index >= 0) & descending, cells - 1 - index, index)
