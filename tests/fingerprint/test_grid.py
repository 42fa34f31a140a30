"""Regridding: integrals are kept, and a slow twin agrees."""

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.fingerprint.grid import CellGrid, regrid

GRIDS = {
    "one degree": CellGrid.from_centres(np.arange(-89.5, 90.0), np.arange(-179.5, 180.0)),
    "descending": CellGrid.from_centres(np.arange(88.0, -90.0, -4.0), np.arange(2.5, 360.0, 5.0)),
    "rows on the poles": CellGrid.from_centres(np.linspace(-90.0, 90.0, 73), np.arange(0.0, 360.0, 2.5)),
    "odd": CellGrid(np.degrees(np.arcsin(np.linspace(-1.0, 1.0, 38))), np.linspace(-17.3, 342.7, 54)),
    "westward": CellGrid(np.linspace(-90.0, 90.0, 46), np.linspace(190.0, -170.0, 61)),
}


@pytest.mark.parametrize("source", GRIDS)
@pytest.mark.parametrize("target", GRIDS)
def test_integral_is_kept(source: str, target: str, rng: np.random.Generator) -> None:
    old, new = GRIDS[source], GRIDS[target]
    values = rng.normal(size=old.shape) + 1j * rng.normal(size=old.shape) + 0.3
    before = np.sum(values * old.cell_area_m2)
    after = np.sum(regrid(values, old, new) * new.cell_area_m2)
    assert abs(after - before) <= 1e-12 * np.sum(np.abs(values) * old.cell_area_m2)


@pytest.mark.parametrize("target", GRIDS)
def test_a_constant_stays(target: str) -> None:
    ones = regrid(np.ones(GRIDS["odd"].shape), GRIDS["odd"], GRIDS[target])
    np.testing.assert_allclose(ones, 1.0, rtol=0, atol=1e-12)


def overlap_by_hand(a: CellGrid, i: int, j: int, b: CellGrid, k: int, m: int) -> float:
    """Unit-sphere area that cell (i, j) of a and (k, m) of b share, from the corners."""
    south, north = (np.sort([g.latitude_bounds_deg[q], g.latitude_bounds_deg[q + 1]]) for g, q in ((a, i), (b, k)))
    low, high = max(south[0], north[0]), min(south[1], north[1])
    height = max(0.0, np.sin(np.radians(high)) - np.sin(np.radians(low)))
    first = np.sort(a.longitude_bounds_deg[[j, j + 1]])
    second = np.sort(b.longitude_bounds_deg[[m, m + 1]])
    width = sum(
        max(0.0, min(first[1] + t, second[1]) - max(first[0] + t, second[0])) for t in (-720, -360, 0, 360, 720)
    )
    return height * np.radians(width)


@pytest.mark.parametrize("first_longitude", [0.0, -180.0, 350.0])
def test_slow_twin_agrees(first_longitude: float, rng: np.random.Generator) -> None:
    old = CellGrid(np.array([90.0, 40.0, 10.0, -90.0]), np.linspace(0.0, 360.0, 6))
    new = CellGrid(np.linspace(-90.0, 90.0, 5), first_longitude + np.linspace(0.0, 360.0, 5))
    values = rng.normal(size=old.shape)
    expected = np.zeros(new.shape)
    for k, m in np.ndindex(new.shape):
        shares = [overlap_by_hand(old, i, j, new, k, m) for i, j in np.ndindex(old.shape)]
        expected[k, m] = np.dot(shares, values.ravel()) / overlap_by_hand(new, k, m, new, k, m)
    np.testing.assert_allclose(regrid(values, old, new), expected, rtol=0, atol=1e-13)


def test_missing_cells_count_as_zero() -> None:
    south = CellGrid(np.array([-90.0, 0.0]), np.array([0.0, 360.0]))
    whole = CellGrid(np.array([-90.0, 90.0]), np.array([0.0, 360.0]))
    np.testing.assert_allclose(regrid(np.array([[4.0]]), south, whole), 2.0, rtol=1e-15)


def test_a_regional_target_averages_its_own_cells() -> None:
    globe = GRIDS["one degree"]
    field = np.broadcast_to(np.cos(np.radians(np.arange(-179.5, 180.0))), globe.shape)
    box = CellGrid(np.array([0.0, 10.0]), np.array([350.0, 370.0]))
    centres = np.cos(np.radians(np.arange(-9.5, 10.0)))
    np.testing.assert_allclose(regrid(field, globe, box), centres.mean(), rtol=1e-13)


def test_leading_axes_are_kept(rng: np.random.Generator) -> None:
    values = rng.normal(size=(2, 3, *GRIDS["descending"].shape))
    together = regrid(values, GRIDS["descending"], GRIDS["odd"])
    assert together.shape == (2, 3, *GRIDS["odd"].shape)
    np.testing.assert_array_equal(together[1, 2], regrid(values[1, 2], GRIDS["descending"], GRIDS["odd"]))


@pytest.mark.parametrize("step", [0.25, 1 / 3, 0.1])
def test_single_precision_coordinates_are_regular_and_close_the_circle(step: float) -> None:
    centres = (np.arange(round(360 / step)) + 0.5) * step
    cells = CellGrid.from_centres(np.arange(-88.0, 90.0, 4.0), centres.astype(np.float32))
    assert np.ptp(cells.longitude_bounds_deg) == pytest.approx(360.0, abs=1e-10)
    np.testing.assert_allclose(regrid(np.ones(cells.shape), cells, GRIDS["odd"]), 1.0, rtol=0, atol=1e-12)


@pytest.mark.parametrize(
    ("latitude", "longitude", "name"),
    [
        ([0.0, 1.0, 3.0], [0.0, 180.0], "latitude"),
        ([0.0, 1.0, 2.0], [0.0, 10.0, 30.0], "longitude"),
        ([0.0, 1.0, 2.0], [0.0, 90.0, 180.0, 270.0, 360.0], "longitude"),
        ([0.0], [0.0, 180.0], "latitude"),
    ],
)
def test_irregular_grids_are_refused(latitude: list[float], longitude: list[float], name: str) -> None:
    with pytest.raises(InputError) as caught:
        CellGrid.from_centres(np.array(latitude), np.array(longitude))
    assert [fault.name for fault in caught.value.faults] == [name]


def test_values_of_another_shape_are_refused() -> None:
    with pytest.raises(InputError, match="shape"):
        regrid(np.zeros((3, 4)), GRIDS["odd"], GRIDS["westward"])
