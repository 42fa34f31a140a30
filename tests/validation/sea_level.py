"""The sea-level equation, footprints and maps."""

from dataclasses import dataclass
from functools import cache

import numpy as np
import pyshtools
from numpy.typing import NDArray
from scipy.special import sph_harm_y

from massfit.constants import EARTH_DENSITY, EARTH_RADIUS
from massfit.earth.love import love_numbers
from massfit.fingerprint.admittance import site_fingerprints
from massfit.fingerprint.footprint import site_footprints
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.loads import builtin_loads
from massfit.fingerprint.maps import MAP_LATITUDE_DEG, MAP_LONGITUDE_DEG, admittance_maps
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator, prepare_operator
from massfit.fingerprint.sea_level import solve_sea_level
from massfit.fingerprint.transforms import SphereGrid, as_cilm
from massfit.phasor import as_complex
from massfit.site import Site
from validation.registry import Group, Row, vanishing

AREA = "Sea level, footprints and maps"

SITES = [Site("P", -11.5, 205.5), Site("A", 2.5, 331.5), Site("N", 88.5, 12.5)]
RNG = 20_240_117


@dataclass(frozen=True)
class Rigid:
    h: NDArray[np.float64]
    k: NDArray[np.float64]
    profile: str = "rigid"


@cache
def rigid() -> Rigid:
    return Rigid(np.zeros(1025), np.zeros(1025))


@cache
def operator(max_degree: int = 60) -> SeaLevelOperator:
    return prepare_operator(OceanFunction.builtin(), love_numbers(max_degree=max_degree), max_degree=max_degree)


def ocean_planet() -> list[Row]:
    cells = CellGrid(np.linspace(-90.0, 90.0, 19), np.linspace(0.0, 360.0, 37))
    planet = prepare_operator(OceanFunction(cells, np.ones(cells.shape)), rigid(), max_degree=20)
    latitude, longitude = np.radians(planet.latitude_deg)[:, None], np.radians(planet.longitude_deg)
    rows = []
    for n, factor in ((1, 1.228336), (2, 1.125536), (3, 1.086564)):
        forcing = np.cos(latitude) ** (n - 1) * np.sin(latitude) * np.cos((n - 1) * longitude)
        height = solve_sea_level(planet, forcing=forcing).height
        gain = float(np.sum(height * forcing * planet.cell_area_m2) / np.sum(forcing**2 * planet.cell_area_m2))
        rows.append(Row(f"response to a tide of degree {n}", factor, gain, 1e-6, ".6f"))
    return rows


def cap() -> list[Row]:
    sharp = prepare_operator(OceanFunction.builtin(), rigid(), max_degree=1024)
    load = regrid(np.array([[1000.0]]), CellGrid(np.array([80.0, 90.0]), np.array([0.0, 360.0])), sharp.cells)
    level = sharp.kernel[sharp.grid.degree] * sharp.grid.analyse(load[None])
    centre, antipode = sharp.grid.synthesise_at(level, [90.0, -90.0], [0.0, 0.0])[0]
    half = np.radians(5.0)
    exact = 3e3 / EARTH_DENSITY * (np.sin(half) - (1.0 - np.cos(2.0 * half)) / 2.0)
    return [
        Row("centre / m", float(exact), float(centre), 1.6e-5, ".6f"),
        Row("antipode / m", -0.0020625, float(antipode), 1e-6, ".7f"),
    ]


def dense_matrix() -> list[Row]:
    coarse = operator(12)
    longitude, latitude = np.meshgrid(np.radians(coarse.longitude_deg), np.radians(coarse.latitude_deg))
    harmonics, degrees = [], []
    for n in range(13):
        for m in range(n + 1):
            value = sph_harm_y(n, m, np.pi / 2 - latitude, longitude) * (np.sqrt(2.0) if m else 1.0)
            harmonics += [part.ravel() for part in ([value.real, value.imag] if m else [value.real])]
            degrees += [n] * (2 if m else 1)
    basis, degree = np.array(harmonics), np.array(degrees)
    weight = np.repeat(coarse.grid.solid_angle, coarse.longitude_deg.size)
    product = (basis * weight * coarse.ocean.ravel()) @ basis.T
    love = love_numbers(max_degree=12)
    kernel = np.where(degree > 0, 3.0 * (1.0 + love.k - love.h)[degree] / (EARTH_DENSITY * (2 * degree + 1)), 0.0)
    one = np.where(np.arange(degree.size) == 0, np.sqrt(4.0 * np.pi), 0.0)
    load = np.random.default_rng(RNG).normal(size=coarse.cells.shape)
    w, density, vapour = basis @ (weight * load.ravel()), coarse.sea_water_density, 3e14
    top = np.hstack([np.eye(degree.size) - density * kernel[:, None] * product, -one[:, None]])
    matrix = np.vstack([top, np.append(density * one @ product, 0.0)])
    solved = np.linalg.solve(matrix, np.append(kernel * w, -vapour / EARTH_RADIUS**2 - one @ w))[:-1]
    expected = basis.T @ solved
    found = solve_sea_level(coarse, load=load, water_vapour=vapour).height.ravel()
    return [vanishing("largest difference / largest height", _relative(found, expected), 1e-10)]


def invariants() -> list[Row]:
    sea_of, rng = operator(), np.random.default_rng(RNG)
    first, second = rng.normal(loc=0.3, size=(2, *sea_of.cells.shape))
    levels = [solve_sea_level(sea_of, load=load).height for load in (first, second)]
    area = sea_of.cell_area_m2
    work = [float(np.sum(w * s * area)) for w, s in ((first, levels[1]), (second, levels[0]), (first, levels[0]))]
    land, vapour = (1.0 - sea_of.ocean) * 37.0, 6.5e14
    sea = solve_sea_level(sea_of, load=land, water_vapour=vapour)
    tide = solve_sea_level(sea_of, forcing=np.repeat(np.sin(np.radians(sea_of.latitude_deg))[:, None] ** 2,
                                                     sea_of.longitude_deg.size, axis=1))  # fmt: skip
    return [
        vanishing("reciprocity: work of either load in the level of the other", abs(work[0] / work[1] - 1.0), 1e-10),
        vanishing("mass left over / mass of the load", sea.mass_closure / float(np.sum(land * area)), 1e-10),
        vanishing("ocean mean of a tide / m", abs(float(np.sum(sea_of.ocean * tide.height * area)))
                  / sea_of.ocean_area_m2, 1e-10),
    ]  # fmt: skip


def adjoint() -> list[Row]:
    rng, rows = np.random.default_rng(RNG), []
    for max_degree in (30, 60):
        both = operator(max_degree)
        load = rng.normal(size=both.cells.shape) + 1j * rng.normal(size=both.cells.shape)
        vapour, prints = -5e14 + 4e14j, site_footprints(both, SITES)
        backward = np.tensordot(prints["footprint"].values, load * both.cell_area_m2, 2)
        backward = backward + prints["constant"].values * vapour
        forward = solve_sea_level(both, load=load, water_vapour=vapour).at(
            [site.latitude_deg for site in SITES], [site.longitude_deg for site in SITES]
        )
        rows.append(vanishing(f"adjoint less forward, degree {max_degree}", _relative(backward, forward), 1e-10))
    return rows


def maps() -> list[Row]:
    loads = builtin_loads(("nominal",))
    field = as_complex(admittance_maps(operator(), loads)["map_admittance"].values)[0]
    sites = as_complex(site_fingerprints(operator(), SITES, loads)["admittance"].values)[0]
    place = [
        field[int(np.argmin(abs(MAP_LATITUDE_DEG - site.latitude_deg))),
              int(np.argmin(abs(MAP_LONGITUDE_DEG - site.longitude_deg)))]
        for site in SITES
    ]  # fmt: skip
    return [vanishing("map by a forward solve less site by an adjoint one", _relative(np.array(place), sites), 1e-10)]


def transforms() -> list[Row]:
    grid, rng = SphereGrid(25), np.random.default_rng(RNG)
    values = rng.normal(size=grid.degree.size) + 1j * np.where(grid.multiplicity == 2.0, 1.0, 0.0)
    latitude, longitude = np.array([-89.3, -33.1, 0.0, 61.9]), np.array([-170.0, 10.5, 359.0, 123.4])
    other = pyshtools.SHCoeffs.from_array(as_cilm(values, 25), normalization="4pi", csphase=1)
    expected = other.expand(lat=latitude, lon=longitude)
    found = grid.synthesise_at(values[None], latitude, longitude)[0]
    return [vanishing("synthesis at points less that of pyshtools", _relative(found, expected), 1e-11)]


def convergence() -> list[Row]:
    loads = builtin_loads(("nominal",))
    deep = [Site("P", -11.25, 205.5), Site("S", -35.0, 250.0), Site("L", 10.0, 180.0)]
    rough, fine = (
        as_complex(site_fingerprints(operator(degree), deep, loads)["admittance"].values)[0] for degree in (180, 300)
    )
    return [vanishing("admittance at deep sites, degree 180 less 300", float(np.abs(rough - fine).max()), 1e-3)]


def _relative(found: NDArray, expected: NDArray) -> float:
    return float(np.abs(found - expected).max() / np.abs(expected).max())


GROUPS = (
    Group("Ocean planet", "closed form", "1 / (1 - 3 rho_w / (rho_e (2n + 1))), rigid Earth, 1025 and 5514 kg m⁻³",
          "six digits are written", ocean_planet),
    Group("Cap of 10 degrees and 1000 kg m⁻²", "closed form",
          "potential of a spherical cap; rigid Earth, no ocean's answer, degree 0 left out",
          "the sum to degree 1024: its terms fall as n^-1.5 at the centre, and alternate at the antipode", cap),
    Group("Dense matrix of low degree", "slow twin",
          "bordered system with harmonics from another library, solved at once",
          "the tolerance asked of the iteration", dense_matrix),
    Group("Invariants", "invariant", "Betti's reciprocity; conservation of mass", "rounding and the iteration",
          invariants),
    Group("Footprints", "invariant", "the operator is its own adjoint: load and place change sides",
          "rounding and the iteration; complex loads on land and ocean, and water vapour", adjoint),
    Group("Maps", "invariant", "a place on a map is a site", "rounding and the iteration", maps),
    Group("Transforms", "other library",
          "pyshtools (Wieczorek & Meschede 2018, Geochem. Geophys. Geosyst. 19, 2574-2592)",
          "rounding of a sum of some 700 terms", transforms),
    Group("Degree of the solve", "convergence", "the same at a higher degree",
          "far below what load patterns differ by, 1 % at the best sites", convergence),
)  # fmt: skip
