"""The spectral sea level against sums of Green's functions over the globe: no harmonics of the load at all."""

import numpy as np
import pytest
from numpy.polynomial.legendre import legval
from numpy.typing import NDArray

from massfit.constants import EARTH_DENSITY, EARTH_RADIUS
from massfit.earth.love import LoveNumbers, love_numbers
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator, prepare_operator
from massfit.fingerprint.sea_level import solve_sea_level

DEGREE = 60


@pytest.fixture(scope="module")
def high() -> LoveNumbers:
    return love_numbers(max_degree=2000)


@pytest.fixture(scope="module")
def operator(high: LoveNumbers) -> SeaLevelOperator:
    return prepare_operator(OceanFunction.builtin(), high, max_degree=DEGREE)


def cosine_between(operator: SeaLevelOperator, latitude: float, longitude: float) -> NDArray[np.float64]:
    y, x = np.radians(operator.latitude_deg)[:, None], np.radians(operator.longitude_deg)
    north, east = np.radians(latitude), np.radians(longitude)
    return np.sin(y) * np.sin(north) + np.cos(y) * np.cos(north) * np.cos(x - east)


def green(love: LoveNumbers, cosine: NDArray[np.float64]) -> NDArray[np.float64]:
    """Height of geoid less ground per kilogram: 3 / (4 pi a^2 rho_e) sum (1 + k'_n - h'_n) P_n, degree 0 left out.

    The limits of the numbers are summed in closed form (Farrell 1972, equations 39 and 40), the rest falls as 1/n^2.
    """
    n = np.arange(1, love.max_degree + 1)
    last, middle = love.max_degree, love.max_degree // 2
    h_limit = 2.0 * love.h[last] - love.h[middle]
    falling = last * (love.k[last] - (love.h[last] - h_limit))  # n (k'_n - h'_n + h'_limit) for great n
    half = np.sqrt(0.5 * (1.0 - cosine))
    closed = (1.0 - h_limit) * (0.5 / half - 1.0) - falling * np.log(half * (1.0 + half))
    rest = love.k[1:] - (love.h[1:] - h_limit) - falling / n
    series = legval(cosine, np.concatenate([[0.0], rest]))
    return 3.0 / (4.0 * np.pi * EARTH_RADIUS**2 * EARTH_DENSITY) * (closed + series)


def test_green_functions_know_a_rigid_earth() -> None:
    # the potential of a point mass over gravity, less its mean: (3 / (4 pi a^2 rho_e)) (1 / (2 sin(gamma/2)) - 1)
    zeros = np.zeros(50)
    rigid = LoveNumbers(zeros, zeros, zeros, "CE", "rigid", "", 49)
    gamma = np.radians([5.0, 60.0, 180.0])
    expected = 3.0 / (4.0 * np.pi * EARTH_RADIUS**2 * EARTH_DENSITY) * (0.5 / np.sin(gamma / 2.0) - 1.0)
    np.testing.assert_allclose(green(rigid, np.cos(gamma)), expected, rtol=1e-12)


@pytest.mark.parametrize("place", [(40.0, 200.0), (-5.0, 119.0), (-60.0, 20.0)])
def test_a_smooth_load_far_away(operator: SeaLevelOperator, high: LoveNumbers, place: tuple[float, float]) -> None:
    # a bell of 8 degrees, whose harmonics end before degree 60; the sum over the grid sees no singularity
    bell = 100.0 * np.exp((cosine_between(operator, -10.0, 300.0) - 1.0) / np.radians(8.0) ** 2)
    by_sum = np.sum(bell * green(high, cosine_between(operator, *place)) * operator.cell_area_m2)
    level = operator.kernel[operator.grid.degree] * operator.grid.analyse(bell[None])
    spectral = operator.grid.synthesise_at(level, *([each] for each in place))[0, 0]
    # both know PREM to degree 2000; the tail of the sum beyond it is what is left
    assert by_sum == pytest.approx(spectral, rel=2e-6)
    # control: numbers of another frame at degree 1 alone are seen
    wrong = high.in_frame("CM")
    mixed = LoveNumbers(wrong.h, high.l, high.k, "CF", "mixed", "", high.integrated_to)
    other = np.sum(bell * green(mixed, cosine_between(operator, *place)) * operator.cell_area_m2)
    assert abs(other / spectral - 1.0) > 0.01


@pytest.mark.parametrize("place", [(46.0, 85.0), (-11.25, 205.5), (3.0, 332.0)])
def test_the_whole_sea_level_through_a_bell(
    operator: SeaLevelOperator, high: LoveNumbers, place: tuple[float, float]
) -> None:
    # S - c, averaged over a bell of 6 degrees about the place, is the sum over load and ocean of a Green's function
    # averaged likewise: nothing is left of its singularity, nor of degrees above 60, wherever the place lies
    bell = 100.0 * np.exp((cosine_between(operator, -10.0, 300.0) - 1.0) / np.radians(8.0) ** 2)
    sea = solve_sea_level(operator, load=bell, water_vapour=3e14)
    whole = bell + operator.sea_water_density * operator.ocean * sea.height
    n = np.arange(2001)
    smoothing = np.exp(-0.5 * n * (n + 1) * np.radians(6.0) ** 2)
    series = np.where(n > 0, (1.0 + high.k - high.h) * smoothing, 0.0)
    kernel = legval(cosine_between(operator, *place), series) * 3.0 / (4.0 * np.pi * EARTH_RADIUS**2 * EARTH_DENSITY)
    by_sum = np.sum(whole * kernel * operator.cell_area_m2)
    smoothed = sea.coefficients * smoothing[operator.grid.degree]
    spectral = operator.grid.synthesise_at(smoothed, *([each] for each in place))[0, 0] - sea.constant
    assert by_sum == pytest.approx(spectral, rel=1e-7)
