"""The mean over the ocean as satellite gravity sees it: a coast kept away from, a highest degree, smoothing."""

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import KDTree
from scipy.special import ive

from massfit.constants import EARTH_RADIUS
from massfit.errors import Fault, InputError
from massfit.fingerprint.grid import regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.transforms import SphereGrid, as_cilm

_LAND_BELOW = 0.5
"""A cell with less ocean than this is coast to keep away from."""


@dataclass(frozen=True, eq=False)
class OceanKernel:
    """Weights that turn coefficients of surface mass into a mean over the ocean.

    Parameters
    ----------
    weights : (2, N + 1, N + 1) array
        Of 4-pi-normalised coefficients (kg m-2).
    area_m2 : float
        Area averaged over.
    buffer_km, smoothing_km : float
    """

    weights: NDArray[np.float64]
    area_m2: float
    buffer_km: float
    smoothing_km: float

    @property
    def max_degree(self) -> int:
        """Highest degree."""
        return int(self.weights.shape[1]) - 1

    def mean(self, mass: NDArray[Any]) -> NDArray[Any]:
        """Mean of surface mass over the kernel's ocean.

        Parameters
        ----------
        mass : (..., 2, M + 1, M + 1) array
            Coefficients, real or complex; degrees above the kernel's are left out, and M may be lower.

        Returns
        -------
        (...) array
            In the unit of the coefficients.
        """
        top = min(self.max_degree, mass.shape[-1] - 1) + 1
        return np.asarray(np.einsum("cnm,...cnm->...", self.weights[:, :top, :top], mass[..., :, :top, :top]))

    def without_degrees(self, *degrees: int) -> "OceanKernel":
        """Return the kernel that is blind to some degrees."""
        weights = self.weights.copy()
        weights[:, list(degrees)] = 0.0
        return OceanKernel(weights, self.area_m2, self.buffer_km, self.smoothing_km)


def ocean_kernel(
    ocean: OceanFunction, *, max_degree: int, buffer_km: float = 0.0, smoothing_km: float = 0.0
) -> OceanKernel:
    """Make the kernel of an ocean mean.

    Parameters
    ----------
    ocean : OceanFunction
    max_degree : int
        Highest degree of the coefficients.
    buffer_km : float
        Ocean nearer than this to the centre of a cell of land is left out; 0 keeps the whole ocean function.
    smoothing_km : float
        Distance at which a Gaussian smoothing (Jekeli 1981) falls to one half; 0 smooths nothing.

    Returns
    -------
    OceanKernel

    Raises
    ------
    InputError
        Nothing of the ocean is left.

    Examples
    --------
    A uniform layer has its own height as its mean:

    >>> kernel = ocean_kernel(OceanFunction.builtin(), max_degree=20, buffer_km=300.0)
    >>> layer = np.zeros((2, 21, 21))
    >>> layer[0, 0, 0] = 8.5
    >>> float(kernel.mean(layer))
    8.5
    """
    average, area = _average(ocean, max_degree, buffer_km)
    weights = average * gaussian_weights(max_degree, smoothing_km)[None, :, None]
    return OceanKernel(weights, area, buffer_km, smoothing_km)


@lru_cache(maxsize=16)  # a table of choices asks for the same few over and over
def _average(ocean: OceanFunction, max_degree: int, buffer_km: float) -> tuple[NDArray[np.float64], float]:
    """Weights of the plain average, and the area averaged over."""
    fraction = buffered(ocean, buffer_km)
    if not np.any(fraction > 0.0):
        problem = f"no ocean is {buffer_km:g} km from land"
        raise InputError(Fault("gravity", "buffer_km", problem, "Some ocean must be left", "Choose a smaller buffer"))
    grid = SphereGrid(max_degree)
    there = regrid(fraction, ocean.cells, grid.cells)
    coefficients = as_cilm(grid.analyse(there[None])[0], max_degree)
    return coefficients / coefficients[0, 0, 0], float(np.sum(fraction * ocean.cells.cell_area_m2))


def buffered(ocean: OceanFunction, distance_km: float) -> NDArray[np.float64]:
    """Leave out the ocean near land.

    Parameters
    ----------
    ocean : OceanFunction
    distance_km : float
        Between centres of cells, along the great circle.

    Returns
    -------
    (n_lat, n_lon) array
        The ocean function, 0 where land is nearer.
    """
    if distance_km <= 0.0:
        return ocean.fraction
    land = ocean.fraction < _LAND_BELOW
    # only land beside ocean can be the nearest
    inside = land & np.roll(land, 1, 1) & np.roll(land, -1, 1)
    inside[1:] &= land[:-1]
    inside[:-1] &= land[1:]
    coast = land & ~inside
    if not coast.any():
        return ocean.fraction
    points = _unit_vectors(ocean)
    wet = ocean.fraction > 0.0
    chord = 2.0 * np.sin(min(np.pi, distance_km * 1000.0 / EARTH_RADIUS) / 2.0)
    distance, _ = KDTree(points[coast]).query(points[wet], distance_upper_bound=chord)
    kept = ocean.fraction.copy()
    kept[wet] *= np.isinf(distance)
    kept[land] = 0.0
    return kept


def gaussian_weights(max_degree: int, distance_km: float) -> NDArray[np.float64]:
    """Degree weights of a Gaussian smoothing on the sphere.

    Parameters
    ----------
    max_degree : int
    distance_km : float
        Distance at which the weight of a point falls to one half.

    Returns
    -------
    (N + 1,) array
        Ratios of modified spherical Bessel functions, the exact integrals of exp(-b (1 - cos)) against the Legendre
        polynomials with b = ln 2 / (1 - cos(r / R)) (Jekeli 1981); they need no recursion, which is unstable.
    """
    if distance_km <= 0.0:
        return np.ones(max_degree + 1)
    b = np.log(2.0) / (1.0 - np.cos(distance_km * 1000.0 / EARTH_RADIUS))
    return np.asarray(ive(np.arange(max_degree + 1) + 0.5, b) / ive(0.5, b))


def _unit_vectors(ocean: OceanFunction) -> NDArray[np.float64]:
    """Centres of the cells, (n_lat, n_lon, 3)."""
    lat, lon = (
        np.radians(0.5 * (bounds[1:] + bounds[:-1]))
        for bounds in (ocean.cells.latitude_bounds_deg, ocean.cells.longitude_bounds_deg)
    )
    shape = ocean.cells.shape
    ring = np.cos(lat)[:, None]
    parts = ring * np.cos(lon), ring * np.sin(lon), np.broadcast_to(np.sin(lat)[:, None], shape)
    return np.stack(parts, axis=-1)
