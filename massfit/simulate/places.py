"""Where the invented sites lie: open ocean, far from coasts."""

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import minimum_filter

from massfit.errors import Fault, InputError
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.simulate.names import site_names
from massfit.site import Site

_CELL_DEG = 1.0
_CLEARANCE_DEG = 4.0  # nothing but ocean this far to every side
_HIGHEST_LATITUDE_DEG = 38.0  # beyond, fronts and storms: nobody looks for quiet there
_TROPICAL_LATITUDE_DEG = 15.0
_TROPICAL_SHARE = 0.35  # of the sites in the tropical Pacific, where quiet floor is plentiful
_APART = 0.35  # least distance, as a share of the spacing that even spreading would give


def draw_sites(ocean: OceanFunction, count: int, rng: np.random.Generator) -> tuple[Site, ...]:
    """Sites on open ocean, about a third of them in the tropical Pacific.

    Parameters
    ----------
    ocean : OceanFunction
    count : int
    rng : numpy.random.Generator

    Returns
    -------
    tuple of Site
        Names and depths are invented; the group is the basin.

    Raises
    ------
    InputError
        The open ocean is too small for so many sites.
    """
    latitude, longitude = open_ocean(ocean)
    tropical = (np.abs(latitude) <= _TROPICAL_LATITUDE_DEG) & (longitude > 170.0) & (longitude < 262.0)
    weight = np.cos(np.deg2rad(latitude))
    chosen: list[int] = []
    apart = _APART * np.sqrt(4.0 * np.pi / (2.0 * count))
    points = unit_vectors(latitude, longitude)
    free = np.ones(latitude.size, dtype=bool)
    for number in range(count):
        pool = free & tropical if number < round(_TROPICAL_SHARE * count) else free & ~tropical
        if not pool.any():
            problem = f"{count} sites do not fit on the open ocean at the distance asked for"
            raise InputError(Fault("simulation", "sites", problem, action="Ask for fewer sites"))
        chosen.append(int(rng.choice(latitude.size, p=pool * weight / np.sum(pool * weight))))
        free &= points @ points[chosen[-1]] < np.cos(apart)
    shift = rng.uniform(-0.4, 0.4, (2, count)) * _CELL_DEG
    depth = rng.uniform(3900.0, 5700.0, count)
    return tuple(
        Site(
            id=name,
            latitude_deg=round(float(latitude[k] + shift[0, i]), 2),
            longitude_deg=round(float(longitude[k] + shift[1, i]), 2),
            depth_m=float(round(depth[i])),
            group=basin(float(latitude[k]), float(longitude[k])),
        )
        for i, (name, k) in enumerate(zip(site_names(count), rng.permutation(chosen), strict=True))
    )


def open_ocean(ocean: OceanFunction) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Centres of one-degree cells with nothing but ocean for four degrees around.

    Returns
    -------
    latitude_deg, longitude_deg : (n,) arrays
    """
    cells = CellGrid(np.arange(-90.0, 90.5, _CELL_DEG), np.arange(0.0, 360.5, _CELL_DEG))
    fraction = regrid(ocean.fraction, ocean.cells, cells)
    reach = 2 * round(_CLEARANCE_DEG / _CELL_DEG) + 1
    clear = minimum_filter(fraction, size=reach, mode=("nearest", "wrap")) > 1.0 - 1e-9
    latitude, longitude = np.meshgrid(np.arange(-89.5, 90.0), np.arange(0.5, 360.0), indexing="ij")
    keep = clear & (np.abs(latitude) <= _HIGHEST_LATITUDE_DEG)
    return latitude[keep], longitude[keep]


def basin(latitude_deg: float, longitude_deg: float) -> str:
    """Basin of an open-ocean point equatorward of 40 degrees.

    Examples
    --------
    >>> basin(0.0, 200.0), basin(-20.0, 80.0), basin(30.0, 320.0)
    ('tropical Pacific', 'Indian Ocean', 'Atlantic')
    """
    longitude = longitude_deg % 360.0
    # the American coast runs from Mexico (255 E) to Chile (290 E)
    coast = np.interp(latitude_deg, [-40.0, -5.0, 8.0, 20.0, 40.0], [290.0, 279.0, 277.0, 262.0, 240.0])
    if longitude > coast or longitude < 20.0:
        return "Atlantic"
    if longitude < (147.0 if latitude_deg < -10.0 else 100.0):
        return "Indian Ocean"
    if abs(latitude_deg) <= _TROPICAL_LATITUDE_DEG:
        return "tropical Pacific"
    return "North Pacific" if latitude_deg > 0.0 else "South Pacific"


def unit_vectors(latitude_deg: NDArray[np.float64], longitude_deg: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return unit vectors of points on the sphere, (n, 3).

    Examples
    --------
    >>> unit_vectors(np.array([0.0, 90.0]), np.array([0.0, 0.0])).round(3)
    array([[1., 0., 0.],
           [0., 0., 1.]])
    """
    lat, lon = np.deg2rad(latitude_deg), np.deg2rad(longitude_deg)
    return np.column_stack([np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)])
