import numpy as np
import pytest

from massfit.constants import EARTH_RADIUS
from massfit.errors import InputError
from massfit.fingerprint.grid import CellGrid
from massfit.fingerprint.ocean import OceanFunction

OCEAN = OceanFunction.builtin()


def test_area_of_a_known_ocean() -> None:
    # one of eight octants, closed form
    fraction = np.zeros((2, 4))
    fraction[1, 2] = 0.5
    cells = CellGrid(np.array([90.0, 0.0, -90.0]), np.linspace(-180.0, 180.0, 5))
    assert OceanFunction(cells, fraction).area_m2 == pytest.approx(0.5 * 4 * np.pi * EARTH_RADIUS**2 / 8, rel=1e-14)


def test_both_longitude_conventions_and_the_edges() -> None:
    latitude = np.array([-11.25, 47.0, 90.0, -90.0, 0.0])
    longitude = np.array([205.5, 359.9, 0.0, 0.0, 180.0])
    east = OCEAN.fraction_at(latitude, longitude)
    np.testing.assert_array_equal(east, OCEAN.fraction_at(latitude, longitude - 360.0))
    np.testing.assert_array_equal(east[2:4], [1.0, 0.0])


def test_the_outer_bounds_belong_to_cells(all_ocean: OceanFunction) -> None:
    np.testing.assert_array_equal(all_ocean.fraction_at([-90.0, 90.0, 0.0, 0.0], [0.0, 10.0, 0.0, 360.0]), 1.0)


def test_cell_lookup_agrees_with_the_array_in_either_direction(rng: np.random.Generator) -> None:
    fraction = rng.uniform(size=(6, 8))
    up = OceanFunction(CellGrid(np.linspace(-90, 90, 7), np.linspace(0, 360, 9)), fraction)
    down = OceanFunction(CellGrid(np.linspace(90, -90, 7), np.linspace(360, 0, 9)), fraction[::-1, ::-1].copy())
    for i, j in np.ndindex(6, 8):
        latitude, longitude = -75.0 + 30.0 * i, 22.5 + 45.0 * j - 360.0
        assert up.fraction_at(latitude, longitude) == down.fraction_at(latitude, longitude) == fraction[i, j]


def test_nearest_ocean_of_a_plain_case() -> None:
    # one ocean cell at the equator; seen from the pole it is a quarter turn away
    fraction = np.zeros((3, 4))
    fraction[1, 3] = 1.0
    ocean = OceanFunction(CellGrid(np.array([-90.0, -30.0, 30.0, 90.0]), np.linspace(0.0, 360.0, 5)), fraction)
    latitude, longitude, distance = ocean.nearest_ocean(90.0, 12.0)
    assert (latitude, longitude) == (0.0, 315.0)
    assert distance == pytest.approx(np.pi / 2 * 6371.0, rel=1e-12)


@pytest.mark.parametrize("place", [(24.0, 10.0), (-23.0, 134.0), (66.9, 179.9), (-88.0, 0.0)])
def test_nearest_ocean_is_the_nearest(place: tuple[float, float]) -> None:
    latitude, longitude, distance = OCEAN.nearest_ocean(*place)
    assert OCEAN.fraction_at(latitude, longitude) >= 0.5
    assert distance > 40.0
    # no ocean on rings closer by more than half the diagonal of a cell (20 km); direct geodesics on the sphere
    bearing = np.radians(np.arange(0.0, 360.0, 0.25))
    for arc in np.radians(np.arange(0.1, 1.0, 0.1) * (distance - 20.0) / 111.195):
        start = np.radians(place[0])
        ring = np.arcsin(np.sin(start) * np.cos(arc) + np.cos(start) * np.sin(arc) * np.cos(bearing))
        turn = np.arctan2(np.sin(bearing) * np.sin(arc) * np.cos(start), np.cos(arc) - np.sin(start) * np.sin(ring))
        assert np.max(OCEAN.fraction_at(np.degrees(ring), place[1] + np.degrees(turn))) < 0.5


def test_a_site_in_the_ocean_is_its_own_nearest() -> None:
    assert OCEAN.nearest_ocean(-11.25, 205.5)[2] < 20.0


@pytest.mark.parametrize("value", [-0.1, 1.1, np.nan, 0.0])
def test_impossible_fractions_are_refused(value: float) -> None:
    cells = CellGrid(np.array([-90.0, 90.0]), np.array([0.0, 360.0]))
    with pytest.raises(InputError, match="ocean function"):
        OceanFunction(cells, np.array([[value]]))


def test_the_builtin_cannot_be_changed() -> None:
    with pytest.raises(ValueError, match="read-only"):
        OCEAN.fraction[0, 0] = 0.5
