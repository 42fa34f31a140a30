"""The ocean mean as satellites see it, against quadrature and brute force."""

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import eval_legendre

from massfit.constants import EARTH_RADIUS
from massfit.errors import InputError
from massfit.fingerprint.grid import CellGrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.transforms import SphereGrid, as_cilm
from massfit.gravity.kernel import buffered, gaussian_weights, ocean_kernel


@pytest.fixture(scope="module")
def islands() -> OceanFunction:
    """An ocean planet of 4-degree cells with a few islands and a cap."""
    cells = CellGrid(np.linspace(90.0, -90.0, 46), np.linspace(0.0, 360.0, 91))
    fraction = np.ones(cells.shape)
    fraction[:3] = 0.0
    fraction[20:25, 0:6] = 0.0
    fraction[30, 88:] = 0.2
    return OceanFunction(cells, fraction)


@pytest.mark.parametrize("kilometres", [150.0, 300.0, 750.0])
def test_gaussian_weights_are_the_integrals_of_the_smoothing(kilometres: float) -> None:
    # definition of Jekeli (1981): W proportional to exp(-b (1 - cos angle)), one half at the stated distance
    b = np.log(2.0) / (1.0 - np.cos(kilometres * 1000.0 / EARTH_RADIUS))

    def integral(n: int) -> float:
        edge = 1.0 - 60.0 / b if b > 30.0 else -1.0
        return float(
            quad(lambda x: np.exp(-b * (1.0 - x)) * eval_legendre(n, x), edge, 1.0, epsabs=1e-14, limit=400)[0]
        )

    found = gaussian_weights(60, kilometres)
    for n in (1, 2, 10, 30, 60):
        assert found[n] == pytest.approx(integral(n) / integral(0), abs=1e-10)


def test_no_smoothing_changes_nothing() -> None:
    np.testing.assert_array_equal(gaussian_weights(5, 0.0), np.ones(6))


def test_weights_stay_sound_at_high_degree() -> None:
    # where the recursion that is often printed breaks down
    found = gaussian_weights(180, 500.0)
    assert np.all(np.diff(found) < 0.0)
    assert found[-1] >= 0.0


def test_a_buffer_is_a_distance_from_land(islands: OceanFunction) -> None:
    kilometres = 900.0
    kept = buffered(islands, kilometres)
    lat = np.radians(0.5 * (islands.cells.latitude_bounds_deg[1:] + islands.cells.latitude_bounds_deg[:-1]))
    lon = np.radians(0.5 * (islands.cells.longitude_bounds_deg[1:] + islands.cells.longitude_bounds_deg[:-1]))
    # spherical law of cosines, every cell against every cell of land
    row, column = np.nonzero(islands.fraction < 0.5)
    along = np.cos(lon[None, :, None] - lon[column])
    cosine = np.sin(lat)[:, None, None] * np.sin(lat[row]) + np.cos(lat)[:, None, None] * np.cos(lat[row]) * along
    nearest = np.arccos(np.clip(cosine, -1.0, 1.0)).min(axis=-1) * EARTH_RADIUS / 1000.0
    np.testing.assert_array_equal(kept, np.where(nearest >= kilometres, islands.fraction, 0.0))
    assert 0.0 < kept.sum() < islands.fraction.sum()


def test_the_kernel_is_the_mean_over_cells(islands: OceanFunction) -> None:
    # a smooth field, averaged by brute force over a fine grid of points in the cells that are kept
    top = 12
    rng = np.random.default_rng(2)
    grid = SphereGrid(top)
    alm = (rng.standard_normal(grid.degree.size) + 1j * rng.standard_normal(grid.degree.size)) / (1.0 + grid.degree)
    alm[: top + 1] = alm[: top + 1].real
    mass = as_cilm(alm, top)
    kept = buffered(islands, 900.0)
    fine = 8
    lat_bounds = np.linspace(90.0, -90.0, 45 * fine + 1)
    lat = 0.5 * (lat_bounds[1:] + lat_bounds[:-1])
    lon = (np.arange(90 * fine) + 0.5) * 4.0 / fine
    values = grid.synthesise_regular(alm[None], lat, lon)[0]
    # exact area of each row, half-way rule inside it
    area = -np.diff(np.sin(np.radians(lat_bounds)))[:, None] * np.repeat(np.repeat(kept, fine, 0), fine, 1)
    expected = np.sum(values * area) / np.sum(area)
    found = ocean_kernel(islands, max_degree=top, buffer_km=900.0).mean(mass)
    # the cells of the transform grid are not those of the mask, and share a cell that lies across them
    assert found == pytest.approx(expected, abs=0.02 * np.std(values))


def test_a_kernel_applied_to_a_known_pattern() -> None:
    # ocean on the northern hemisphere only; the mean of P_1(sin lat) there is 1/2
    cells = CellGrid(np.linspace(90.0, -90.0, 181), np.linspace(0.0, 360.0, 361))
    fraction = np.ones(cells.shape)
    fraction[90:] = 0.0
    mass = np.zeros((2, 41, 41))
    mass[0, 1, 0] = 1.0 / np.sqrt(3.0)  # 4-pi-normalised
    kernel = ocean_kernel(OceanFunction(cells, fraction), max_degree=40)
    assert kernel.mean(mass) == pytest.approx(0.5, abs=1e-4)
    assert kernel.without_degrees(1).mean(mass) == 0.0
    assert kernel.area_m2 == pytest.approx(2.0 * np.pi * EARTH_RADIUS**2, rel=1e-12)


def test_lower_degrees_may_be_given() -> None:
    kernel = ocean_kernel(OceanFunction.builtin(), max_degree=30)
    mass = np.zeros((3, 2, 11, 11), dtype=complex)
    mass[:, 0, 0, 0] = [1.0, 2.0j, 3.0]
    np.testing.assert_allclose(kernel.mean(mass), [1.0, 2.0j, 3.0])


def test_a_buffer_that_leaves_no_ocean_is_refused() -> None:
    with pytest.raises(InputError) as error:
        ocean_kernel(OceanFunction.builtin(), max_degree=10, buffer_km=9000.0)
    assert str(error.value) == (
        "gravity: buffer_km: no ocean is 9000 km from land. Some ocean must be left. Choose a smaller buffer."
    )
