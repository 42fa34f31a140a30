"""The operator against a dense matrix, under rotation, and its refusals."""

import ducc0
import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.special import sph_harm_y

from massfit.constants import EARTH_DENSITY, EARTH_RADIUS
from massfit.earth.love import LoveNumbers, love_numbers
from massfit.errors import ConvergenceError, InputError
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator, prepare_operator
from massfit.fingerprint.sea_level import solve_sea_level
from massfit.fingerprint.transforms import SphereGrid


def real_harmonics(degree: int, latitude_deg: NDArray[np.float64], longitude_deg: NDArray[np.float64]):
    """Orthonormal real harmonics (n_harmonic, n_lat * n_lon) from scipy, and their degrees."""
    longitude, latitude = np.meshgrid(np.radians(longitude_deg), np.radians(latitude_deg))
    rows, degrees = [], []
    for n in range(degree + 1):
        for m in range(n + 1):
            value = sph_harm_y(n, m, np.pi / 2 - latitude, longitude) * (np.sqrt(2.0) if m else 1.0)
            parts = [value.real, value.imag] if m else [value.real]
            rows += [part.ravel() for part in parts]
            degrees += [n] * len(parts)
    return np.array(rows), np.array(degrees)


def test_dense_matrix_gives_the_same_sea_level(love: LoveNumbers, rng: np.random.Generator) -> None:
    # slow twin: the bordered system for all coefficients and c at once, no symmetrising, no iteration
    operator = prepare_operator(OceanFunction.builtin(), love, max_degree=12)
    harmonics, degrees = real_harmonics(12, operator.latitude_deg, operator.longitude_deg)
    weight = np.repeat(operator.grid.solid_angle, operator.longitude_deg.size)
    product = (harmonics * weight * operator.ocean.ravel()) @ harmonics.T
    response = 1.0 + love.k[degrees] - love.h[degrees]
    kernel = np.where(degrees > 0, 3.0 * response / (EARTH_DENSITY * (2 * degrees + 1)), 0.0)
    one = np.zeros(degrees.size)
    one[0] = np.sqrt(4.0 * np.pi)
    load = rng.normal(size=operator.cells.shape)
    forcing = rng.normal(size=operator.cells.shape) / 1000.0
    vapour = 3.0e14
    w, phi = (harmonics @ (weight * field.ravel()) for field in (load, forcing))
    density = operator.sea_water_density
    matrix = np.block(
        [
            [np.eye(degrees.size) - density * kernel[:, None] * product, -one[:, None]],
            [density * (one @ product)[None], np.zeros((1, 1))],
        ]
    )
    right = np.append(kernel * w + phi, -vapour / EARTH_RADIUS**2 - one @ w)
    expected = harmonics.T @ np.linalg.solve(matrix, right)[:-1]
    found = solve_sea_level(operator, load=load, forcing=forcing, water_vapour=vapour)
    np.testing.assert_allclose(found.height.ravel(), expected, rtol=0, atol=1e-10 * np.abs(expected).max())


def test_rotating_everything_rotates_the_sea(rng: np.random.Generator) -> None:
    # an ocean function of limited degree, so that its rotation is exact; the axis is no symmetry of the grid
    grid = SphereGrid(20)
    kernel = prepare_operator(OceanFunction.builtin(), love_numbers(max_degree=20), max_degree=20).kernel
    ocean, load = rng.normal(size=(2, grid.degree.size)) / (2.0 + grid.degree) ** 1.5 + 0j
    ocean[0] = 0.7 * np.sqrt(4.0 * np.pi)

    def turned(coefficients: NDArray[np.complex128]) -> NDArray[np.complex128]:
        return np.asarray(ducc0.sht.rotate_alm(coefficients, 20, 0.3, 1.1, -2.0))

    def solved(o: NDArray[np.complex128], w: NDArray[np.complex128]) -> NDArray[np.complex128]:
        operator = SeaLevelOperator(grid, grid.synthesise(o[None])[0], kernel, 1025.0, "test")
        return solve_sea_level(operator, load=grid.synthesise(w[None])[0]).coefficients[0]

    still, moved = turned(solved(ocean, load)), solved(turned(ocean), turned(load))
    np.testing.assert_allclose(moved, still, rtol=0, atol=1e-10 * np.abs(still).max())
    # control: turning only the load is something else
    assert np.abs(solved(ocean, turned(load)) - still).max() > 1e-2 * np.abs(still).max()


def test_ocean_area_survives_the_regridding(operator: SeaLevelOperator) -> None:
    assert operator.ocean_area_m2 == pytest.approx(OceanFunction.builtin().area_m2, rel=1e-12)


def test_no_frame_of_degree_one_is_preferred_but_mixing_them_shows(love: LoveNumbers) -> None:
    kernels = [
        prepare_operator(OceanFunction.builtin(), love.in_frame(frame), max_degree=20).kernel
        for frame in ("CE", "CM", "CF")
    ]
    np.testing.assert_allclose(kernels[1:], [kernels[0]] * 2, rtol=1e-12)
    mixed = LoveNumbers(
        love.in_frame("CM").h, love.l, love.in_frame("CF").k, "CF", love.profile, "mixed", love.integrated_to
    )
    wrong = prepare_operator(OceanFunction.builtin(), mixed, max_degree=20).kernel
    assert abs(wrong[1] / kernels[0][1] - 1.0) > 0.3


def test_an_unreachable_tolerance_is_reported(coarse: SeaLevelOperator) -> None:
    with pytest.raises(ConvergenceError, match="Sea-level equation"):
        solve_sea_level(coarse, load=1.0 - coarse.ocean, tolerance=0.0)


def test_every_fault_is_named(love: LoveNumbers) -> None:
    with pytest.raises(InputError) as caught:
        prepare_operator(OceanFunction.builtin(), love, max_degree=257, sea_water_density=-1.0)
    assert [fault.name for fault in caught.value.faults] == ["max_degree", "sea_water_density"]
