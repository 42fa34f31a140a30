"""Invented annual loads: water and snow on land, and the air above it.

The regions and their seasons are common practice; the numbers are our own and
no product's. Truth and ensemble members are separate draws around the table.
"""

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import gaussian_filter

from massfit.constants import STANDARD_GRAVITY
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.pattern import LoadPattern
from massfit.phasor import phasor_from_peak

_REFERENCE = "drawn for this invented network"

# latitude, longitude, radius north-south and east-west (degrees), amplitude (kg m-2), peak (day of year)
_WATER = np.array(
    [
        (-6.0, -61.0, 7.0, 9.0, 205.0, 101.0),  # Amazon
        (6.0, -67.0, 4.0, 5.0, 110.0, 240.0),  # Orinoco
        (-21.0, -56.0, 6.0, 5.0, 55.0, 95.0),  # La Plata
        (-8.0, 22.0, 5.0, 8.0, 90.0, 98.0),  # southern Congo
        (-14.0, 30.0, 5.0, 7.0, 100.0, 86.0),  # Zambezi
        (11.0, 2.0, 4.0, 13.0, 70.0, 262.0),  # Sahel, Niger
        (9.0, 33.0, 4.0, 6.0, 65.0, 258.0),  # upper Nile
        (25.0, 84.0, 4.0, 8.0, 110.0, 254.0),  # Ganges and Brahmaputra
        (17.0, 100.0, 6.0, 5.0, 110.0, 263.0),  # Indochina
        (18.0, 78.0, 5.0, 3.0, 85.0, 262.0),  # peninsular India
        (27.0, 112.0, 4.0, 6.0, 40.0, 190.0),  # southern China
        (-15.0, 133.0, 4.0, 8.0, 90.0, 82.0),  # northern Australia
        (0.0, 113.0, 5.0, 6.0, 60.0, 60.0),  # Borneo
        (62.0, 72.0, 6.0, 13.0, 120.0, 79.0),  # Ob
        (64.0, 105.0, 6.0, 14.0, 85.0, 87.0),  # Yenisei and Lena
        (63.0, 150.0, 6.0, 12.0, 85.0, 91.0),  # far north-east Asia
        (60.0, 42.0, 6.0, 12.0, 125.0, 73.0),  # northern Russia, Finland
        (63.0, 14.0, 5.0, 6.0, 125.0, 71.0),  # Scandinavia
        (48.0, 18.0, 5.0, 14.0, 75.0, 57.0),  # Europe
        (40.0, 42.0, 4.0, 8.0, 80.0, 79.0),  # Anatolia, Caucasus
        (61.0, -147.0, 4.0, 8.0, 275.0, 99.0),  # southern Alaska
        (54.0, -123.0, 6.0, 6.0, 160.0, 85.0),  # British Columbia, Mackenzie
        (54.0, -72.0, 6.0, 9.0, 145.0, 83.0),  # Quebec, Labrador
        (44.0, -88.0, 6.0, 9.0, 65.0, 82.0),  # Great Lakes, upper Mississippi
        (43.0, -117.0, 5.0, 6.0, 85.0, 75.0),  # north-west America
        (16.0, -91.0, 3.0, 5.0, 70.0, 272.0),  # Central America
        (72.0, -42.0, 7.0, 12.0, 45.0, 120.0),  # Greenland
        (-75.0, 110.0, 6.0, 60.0, 12.0, 255.0),  # Antarctica
    ]
)
# the same columns for air pressure, Pa: cold air over the winter continents
_AIR = np.array(
    [
        (50.0, 95.0, 16.0, 32.0, 950.0, 8.0),
        (30.0, 75.0, 9.0, 22.0, 600.0, 5.0),
        (44.0, -105.0, 13.0, 18.0, 300.0, 12.0),
        (24.0, 12.0, 9.0, 25.0, 280.0, 10.0),
        (-25.0, 134.0, 9.0, 14.0, 420.0, 192.0),
        (-22.0, 25.0, 10.0, 12.0, 300.0, 196.0),
        (-18.0, -55.0, 11.0, 10.0, 260.0, 195.0),
        (72.0, -42.0, 8.0, 14.0, 350.0, 150.0),
    ]
)


def draw_water_load(
    ocean: OceanFunction, rng: np.random.Generator, *, name: str, cell_deg: float, texture: float = 0.0
) -> LoadPattern:
    """One plausible annual pattern of water and snow on land.

    Parameters
    ----------
    ocean : OceanFunction
    rng : numpy.random.Generator
    name : str
    cell_deg : float
        Size of the cells, degrees.
    texture : float
        Relative standard deviation of detail of about two degrees, which no region holds.

    Returns
    -------
    LoadPattern
        kg m-2 of whole-cell area, zero where a cell is all ocean.
    """
    regions = _WATER.copy()
    count = len(regions)
    regions[:, :2] += rng.normal(0.0, 1.5, (count, 2))
    regions[:, 2:4] *= np.exp(rng.normal(0.0, 0.15, (count, 2)))
    regions[:, 4] *= np.exp(rng.normal(0.0, 0.25, count))
    regions[:, 5] += rng.normal(0.0, 10.0, count)
    cells = _cells(cell_deg)
    values = _sum_of_regions(regions, cells) * (1.0 - regrid(ocean.fraction, ocean.cells, cells))
    if texture > 0.0:
        values *= 1.0 + texture * _smooth_field(rng, cells.shape, 1.0 / cell_deg)
    return _pattern(name, cells, values, _REFERENCE)


def with_total(pattern: LoadPattern, total_kg: complex) -> LoadPattern:
    """Turn and stretch a pattern so that its integral is a given mass.

    Parameters
    ----------
    pattern : LoadPattern
    total_kg : complex
        Annual phasor of the integral over the sphere, kg.
    """
    factor = total_kg / integral(pattern)
    return LoadPattern(
        pattern.name, pattern.latitude_deg, pattern.longitude_deg, pattern.values * factor, pattern.reference
    )


def integral(pattern: LoadPattern) -> complex:
    """Integral of a pattern over the sphere (kg for a load in kg m-2)."""
    cells = CellGrid.from_centres(pattern.latitude_deg, pattern.longitude_deg)
    return complex(np.sum(pattern.values * cells.cell_area_m2))


def draw_air_pressure(
    ocean: OceanFunction, rng: np.random.Generator, *, ocean_mean: complex, water_vapour: complex, cell_deg: float
) -> LoadPattern:
    """Annual phasor of air pressure on land that conserves dry air.

    Parameters
    ----------
    ocean : OceanFunction
    rng : numpy.random.Generator
    ocean_mean : complex
        Annual phasor of the ocean-mean air pressure, Pa.
    water_vapour : complex
        Annual phasor of the mass of water vapour, kg: the only mass the air gains.
    cell_deg : float

    Returns
    -------
    LoadPattern
        Pa; smooth across the coasts, to be used over land only.
    """
    regions = _AIR.copy()
    regions[:, 4] *= np.exp(rng.normal(0.0, 0.1, len(regions)))
    regions[:, 5] += rng.normal(0.0, 4.0, len(regions))
    cells = _cells(cell_deg)
    land = 1.0 - regrid(ocean.fraction, ocean.cells, cells)
    area = cells.cell_area_m2
    highs = _sum_of_regions(regions, cells)
    missing = STANDARD_GRAVITY * water_vapour - ocean_mean * ocean.area_m2 - np.sum(highs * land * area)
    return _pattern("air pressure", cells, highs + missing / np.sum(land * area), _REFERENCE)


def coarsened(pattern: LoadPattern, cell_deg: float) -> LoadPattern:
    """Cell averages of a pattern on larger cells."""
    source = CellGrid.from_centres(pattern.latitude_deg, pattern.longitude_deg)
    target = _cells(cell_deg)
    return _pattern(pattern.name, target, regrid(pattern.values, source, target), pattern.reference)


def _cells(cell_deg: float) -> CellGrid:
    rows, columns = round(180.0 / cell_deg), round(360.0 / cell_deg)
    return CellGrid(np.linspace(-90.0, 90.0, rows + 1), np.linspace(-180.0, 180.0, columns + 1))


def _centres(cells: CellGrid) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    lat, lon = cells.latitude_bounds_deg, cells.longitude_bounds_deg
    return 0.5 * (lat[1:] + lat[:-1]), 0.5 * (lon[1:] + lon[:-1])


def _pattern(name: str, cells: CellGrid, values: NDArray[np.complex128], reference: str) -> LoadPattern:
    return LoadPattern(name, *_centres(cells), np.asarray(values, dtype=complex), reference)


def _sum_of_regions(regions: NDArray[np.float64], cells: CellGrid) -> NDArray[np.complex128]:
    """Sum of Gaussian regions; each factors into a row and a column profile."""
    latitude, longitude = _centres(cells)
    north = np.exp(-0.5 * ((latitude[:, None] - regions[:, 0]) / regions[:, 2]) ** 2)
    around = (longitude[:, None] - regions[:, 1] + 180.0) % 360.0 - 180.0
    east = np.exp(-0.5 * (around / regions[:, 3]) ** 2)
    phasors = np.array([phasor_from_peak(amplitude, day) for amplitude, day in regions[:, 4:]])
    return np.asarray((north * phasors) @ east.T)


def _smooth_field(rng: np.random.Generator, shape: tuple[int, int], cells_wide: float) -> NDArray[np.float64]:
    field = gaussian_filter(rng.standard_normal(shape), cells_wide, mode=("nearest", "wrap"))
    return np.asarray(field / field.std())
