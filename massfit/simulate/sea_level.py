"""How the sea floor under each invented site feels the world: the true responses.

Solved at a higher degree than an analyst would, from patterns the analyst never sees.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from massfit.constants import STANDARD_GRAVITY
from massfit.corrections.long_period_tides import zonal_function
from massfit.corrections.pole_tide import pole_tide_height
from massfit.earth.love import LoveNumbers, love_numbers
from massfit.fingerprint.footprint import site_footprints
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator, prepare_operator
from massfit.fingerprint.pattern import LoadPattern
from massfit.fingerprint.sea_level import SeaLevel, solve_sea_level
from massfit.fingerprint.transforms import as_cilm
from massfit.simulate.dynamics import Bumps
from massfit.simulate.world import World
from massfit.site import Site

TRUTH_DEGREE = 256
"""Degree of the true solve; the default of the analysis is 180."""
_BROAD_DEGREE = 48  # the bumps of the circulation have nothing beyond


@dataclass(frozen=True, eq=False)
class Responses:
    """True responses of the sites.

    Parameters
    ----------
    admittance : (n_site,) array of complex
        F_s of the true load.
    air_load : (n_site,) array of complex
        G_s, self-attraction of the air, annual phasor, Pa.
    zonal_tide : (n_site,) array
        Pressure per height of the zonal tide, Pa per m.
    wobble : (n_site,) array of complex
        Pressure per wobble, Pa per rad: m1 as the real part, m2 as the imaginary part.
    bumps : (n_site, n_bump + 1) array
        Patterns of the circulation at the sites, self-attraction included.
    """

    admittance: NDArray[np.complex128]
    air_load: NDArray[np.complex128]
    zonal_tide: NDArray[np.float64]
    wobble: NDArray[np.complex128]
    bumps: NDArray[np.float64]


@lru_cache(maxsize=2)
def true_operator(max_degree: int) -> SeaLevelOperator:
    """Sea-level operator of the truth, prepared once a process."""
    return prepare_operator(OceanFunction.builtin(), love_numbers(max_degree=max_degree), max_degree=max_degree)


@lru_cache(maxsize=2)
def true_tides(max_degree: int) -> tuple[SeaLevel, SeaLevel]:
    """Sea level of the zonal tide and of the wobble (m1 real, m2 imaginary), solved once a process."""
    operator = true_operator(max_degree)
    latitude, longitude = np.meshgrid(operator.latitude_deg, operator.longitude_deg, indexing="ij")
    per_m1, per_m2 = pole_tide_height(latitude, longitude)
    zonal = solve_sea_level(operator, forcing=zonal_function(latitude))
    return zonal, solve_sea_level(operator, forcing=per_m1 + 1j * per_m2)


def true_responses(sites: Sequence[Site], world: World, bumps: Bumps) -> Responses:
    """Solve for everything the sites feel.

    Parameters
    ----------
    sites : sequence of Site
    world : World
    bumps : Bumps
    """
    latitude = np.array([site.latitude_deg for site in sites])
    longitude = np.array([site.longitude_deg for site in sites])
    operator = true_operator(TRUTH_DEGREE)
    pressure_per_metre = operator.sea_water_density * STANDARD_GRAVITY
    sea = solve_sea_level(operator, load=_on_grid(operator, world.load), water_vapour=world.water_vapour)
    zonal, wobble = true_tides(TRUTH_DEGREE)
    air = _air_load(operator, world.air_pressure, world.air_annual)
    return Responses(
        admittance=np.asarray(sea.at(latitude, longitude) / sea.ocean_mean),
        air_load=np.asarray(pressure_per_metre * solve_sea_level(operator, load=air).at(latitude, longitude)),
        zonal_tide=np.asarray(pressure_per_metre * zonal.at(latitude, longitude), dtype=float),
        wobble=np.asarray(pressure_per_metre * wobble.at(latitude, longitude)),
        bumps=bumps.at(latitude, longitude) + self_attraction(sites, bumps),
    )


def true_mass(world: World, max_degree: int) -> tuple[NDArray[np.complex128], LoveNumbers]:
    """Annual phasor of the water on land and in the ocean as coefficients of surface mass.

    Parameters
    ----------
    world : World
    max_degree : int
        Of the coefficients; the solve is that of the sites.

    Returns
    -------
    mass : (2, N + 1, N + 1) array of complex
        4-pi-normalised, kg m-2.
    love : LoveNumbers
    """
    operator = true_operator(TRUTH_DEGREE)
    load = _on_grid(operator, world.load)
    sea = solve_sea_level(operator, load=load, water_vapour=world.water_vapour)
    total = load + operator.sea_water_density * operator.ocean * sea.height
    parts = operator.grid.analyse(np.stack([total.real, total.imag]))
    real, imaginary = (as_cilm(part, TRUTH_DEGREE)[:, : max_degree + 1, : max_degree + 1] for part in parts)
    return np.asarray(real + 1j * imaginary), love_numbers(max_degree=max_degree)


def self_attraction(sites: Sequence[Site], bumps: Bumps) -> NDArray[np.float64]:
    """Pressure at the sites that the water of each pattern calls up elsewhere, (n_site, n_bump + 1)."""
    operator = true_operator(_BROAD_DEGREE)
    footprint = site_footprints(operator, sites)["footprint"].to_numpy()
    latitude, longitude = np.meshgrid(operator.latitude_deg, operator.longitude_deg, indexing="ij")
    weight = operator.ocean * operator.cell_area_m2
    # Pa of bottom pressure is a load of 1/g; the answer in metres is a pressure of rho g
    patterns = bumps.at(latitude.ravel(), longitude.ravel())
    patterns -= weight.ravel() @ patterns / weight.sum()
    return np.asarray(operator.sea_water_density * (footprint * weight).reshape(len(sites), -1) @ patterns)


def _on_grid(operator: SeaLevelOperator, pattern: LoadPattern) -> NDArray[np.complex128]:
    cells = CellGrid.from_centres(pattern.latitude_deg, pattern.longitude_deg)
    return np.asarray(regrid(pattern.values, cells, operator.cells))


def _air_load(operator: SeaLevelOperator, pressure: LoadPattern, ocean_mean: complex) -> NDArray[np.complex128]:
    """Mass of air per area without its global mean: it exchanges no water with the ocean."""
    ocean = OceanFunction.builtin()
    cells = CellGrid.from_centres(pressure.latitude_deg, pressure.longitude_deg)
    land = 1.0 - regrid(ocean.fraction, ocean.cells, cells)
    load = (land * pressure.values + (1.0 - land) * ocean_mean) / STANDARD_GRAVITY
    load = load - np.sum(load * cells.cell_area_m2) / np.sum(cells.cell_area_m2)
    return np.asarray(regrid(load, cells, operator.cells))
