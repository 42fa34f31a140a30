"""Transforms against another library, a plain sum of harmonics, and what a quadrature must do."""

import numpy as np
import pyshtools
import pytest
from numpy.typing import NDArray
from scipy.special import sph_harm_y

from massfit.fingerprint.transforms import SphereGrid, as_cilm

DEGREE = 25
GRID = SphereGrid(DEGREE)
LATITUDE = np.array([-89.3, -33.1, 0.0, 12.7, 61.9])
LONGITUDE = np.array([-170.0, 10.5, 359.0, 123.4, 205.5])


def random_coefficients(rng: np.random.Generator, grid: SphereGrid, fields: int = 3) -> NDArray[np.complex128]:
    shape = (fields, grid.degree.size)
    values = rng.normal(size=shape) + 1j * np.where(grid.multiplicity == 2.0, rng.normal(size=shape), 0.0)
    return np.asarray(values / (1.0 + grid.degree))


def plain_sum(grid: SphereGrid, coefficients: NDArray[np.complex128]) -> NDArray[np.float64]:
    """Slow twin: each harmonic from scipy, one by one, at the test points."""
    order = np.concatenate([np.full(grid.max_degree + 1 - m, m) for m in range(grid.max_degree + 1)])
    colatitude, longitude = np.radians(90.0 - LATITUDE), np.radians(LONGITUDE)
    return np.array(
        [
            sum(
                count * (value * sph_harm_y(n, m, colatitude, longitude)).real
                for n, m, count, value in zip(grid.degree, order, grid.multiplicity, row, strict=True)
            )
            for row in coefficients
        ]
    )


def test_points_agree_with_a_plain_sum_of_harmonics(rng: np.random.Generator) -> None:
    coefficients = random_coefficients(rng, GRID)
    values = GRID.synthesise_at(coefficients, LATITUDE, LONGITUDE)
    np.testing.assert_allclose(values, plain_sum(GRID, coefficients), rtol=0, atol=1e-11)


def test_points_and_grid_agree_with_pyshtools(rng: np.random.Generator) -> None:
    coefficients = random_coefficients(rng, GRID)
    fields = GRID.synthesise(coefficients)
    for row, field in zip(coefficients, fields, strict=True):
        other = pyshtools.SHCoeffs.from_array(as_cilm(row, DEGREE), normalization="4pi", csphase=1)
        expected = other.expand(lat=LATITUDE, lon=LONGITUDE)
        np.testing.assert_allclose(GRID.synthesise_at(row[None], LATITUDE, LONGITUDE)[0], expected, atol=1e-11)
        rows = np.repeat(GRID.latitude_deg[::7], 3)
        columns = np.tile(GRID.longitude_deg[[0, 40, 99]], rows.size // 3)
        expected = other.expand(lat=rows, lon=columns)
        np.testing.assert_allclose(field[::7][:, [0, 40, 99]].ravel(), expected, atol=1e-11)


def test_the_grid_agrees_with_matrices_of_legendre_functions(rng: np.random.Generator) -> None:
    # a third road: associated Legendre functions row by row and a plain Fourier matrix, both ways
    coefficients = random_coefficients(rng, GRID)
    colatitude = np.radians(90.0 - GRID.latitude_deg)
    longitude = np.radians(GRID.longitude_deg)
    rows = np.zeros((3, colatitude.size, DEGREE + 1), dtype=complex)
    back = np.zeros_like(coefficients)
    waves = np.exp(1j * np.outer(np.arange(DEGREE + 1), longitude))
    start = 0
    matrices = []
    for m in range(DEGREE + 1):
        degrees = np.arange(m, DEGREE + 1)
        legendre = np.stack([sph_harm_y(int(n), m, colatitude, 0.0).real for n in degrees])
        own = coefficients[:, start : start + degrees.size]
        rows[:, :, m] = (1.0 if m == 0 else 2.0) * own @ legendre
        matrices.append((start, legendre))
        start += degrees.size
    fields = (rows @ waves).real
    np.testing.assert_allclose(GRID.synthesise(coefficients), fields, rtol=0, atol=1e-11)
    weighted = fields * GRID.solid_angle[:, None] @ waves.conj().T
    for m, (first, legendre) in enumerate(matrices):
        back[:, first : first + len(legendre)] = weighted[:, :, m] @ legendre.T
    np.testing.assert_allclose(GRID.analyse(fields), back, rtol=0, atol=1e-11)
    np.testing.assert_allclose(back, coefficients, rtol=0, atol=1e-11)


def test_analysis_undoes_synthesis_at_full_degree(rng: np.random.Generator) -> None:
    grid = SphereGrid(180)
    coefficients = random_coefficients(rng, grid, 2)
    np.testing.assert_allclose(grid.analyse(grid.synthesise(coefficients)), coefficients, rtol=0, atol=1e-11)


def test_weights_are_the_areas_of_the_cells() -> None:
    area = GRID.cells.cell_area_m2
    np.testing.assert_allclose(area[:, 0] / area.sum() * 4 * np.pi, GRID.solid_angle, rtol=1e-10)
    assert np.sum(GRID.solid_angle) * GRID.longitude_deg.size == pytest.approx(4 * np.pi, rel=1e-14)
    bounds = GRID.cells.latitude_bounds_deg
    assert np.all((bounds[:-1] < GRID.latitude_deg) & (GRID.latitude_deg < bounds[1:]))


def test_harmonics_at_a_point_pick_its_value(rng: np.random.Generator) -> None:
    coefficients = random_coefficients(rng, GRID, 1)
    picked = GRID.harmonics_at(LATITUDE, LONGITUDE)
    product = GRID.multiplicity * (picked.real * coefficients.real + picked.imag * coefficients.imag)
    np.testing.assert_allclose(
        product.sum(axis=1), GRID.synthesise_at(coefficients, LATITUDE, LONGITUDE)[0], atol=1e-11
    )


@pytest.mark.parametrize(("sharp", "exact"), [(2 * DEGREE, True), (3 * DEGREE, False)])
def test_a_product_with_a_field_of_twice_the_degree_is_exact(sharp: int, exact: bool, rng: np.random.Generator) -> None:
    # the finer grid integrates the product without error; beyond twice the degree nothing is promised
    fine = SphereGrid(3 * DEGREE)
    ocean = random_coefficients(rng, fine, 1) * (fine.degree <= sharp)
    field = random_coefficients(rng, GRID, 1)
    padded = np.zeros((1, fine.degree.size), dtype=complex)
    inside = np.concatenate(
        [np.arange(m, fine.max_degree + 1) <= (DEGREE if m <= DEGREE else -1) for m in range(fine.max_degree + 1)]
    )
    padded[:, inside] = field
    expected = fine.analyse(fine.synthesise(ocean) * fine.synthesise(padded))[:, inside]
    longitude, latitude = np.meshgrid(GRID.longitude_deg, GRID.latitude_deg)
    on_grid = fine.synthesise_at(ocean, latitude.ravel(), longitude.ravel()).reshape(1, *GRID.cells.shape)
    product = GRID.analyse(on_grid * GRID.synthesise(field))
    assert (np.max(np.abs(product - expected)) < 1e-12) == exact


def test_threads_do_not_change_the_numbers(rng: np.random.Generator) -> None:
    coefficients = random_coefficients(rng, GRID)
    parallel = SphereGrid(DEGREE, threads=2)
    np.testing.assert_array_equal(GRID.synthesise(coefficients), parallel.synthesise(coefficients))
    fields = GRID.synthesise(coefficients)
    np.testing.assert_array_equal(GRID.analyse(fields), parallel.analyse(fields))
