"""Profiles from tables: the same Earth as the polynomials they were sampled from, and every refusal."""

import numpy as np
import pytest
from numpy.polynomial.polynomial import polyval
from numpy.typing import NDArray

from massfit.earth.love import love_numbers
from massfit.earth.profile import EarthProfile, Layer, homogeneous_sphere, prem
from massfit.earth.table import earth_faults, tabulated_profile
from massfit.errors import InputError


def sampled(profile: EarthProfile, step_km: float) -> NDArray[np.float64]:
    """Rows of radius, density, vp, vs, each layer cut evenly, boundaries twice."""
    blocks = []
    for layer in profile.layers:
        count = int(np.ceil((layer.top - layer.bottom) / step_km / 1e3))
        radius = np.linspace(layer.bottom, layer.top, count + 1)
        properties = (layer.density, layer.compressional_speed, layer.shear_speed)
        blocks.append(np.stack([radius, *(polyval(radius / profile.radius, c) + 0.0 * radius for c in properties)], 1))
    return np.concatenate(blocks)


def test_a_finer_table_tends_to_the_polynomials_with_the_square_of_its_step() -> None:
    exact = love_numbers(max_degree=60)
    errors = []
    for step in (200.0, 100.0, 50.0):
        love = love_numbers(tabulated_profile("table", *sampled(prem(), step).T), max_degree=60)
        errors.append([np.abs(a[2:] / b[2:] - 1.0).max() for a, b in ((love.h, exact.h), (love.k, exact.k))])
    # straight lines between rows err as the square of the step
    ratios = np.array(errors[:-1]) / np.array(errors[1:])
    assert np.all((ratios > 3.0) & (ratios < 5.0))
    assert np.max(errors[-1]) < 2e-5


def test_a_table_of_even_rock_is_the_homogeneous_sphere() -> None:
    sphere = homogeneous_sphere(radius=6.371e6, density=5514.0, shear_modulus=1.5e11, bulk_modulus=4e11)
    love = love_numbers(tabulated_profile("even", *sampled(sphere, 300.0).T), max_degree=40)
    np.testing.assert_allclose(love.h, love_numbers(sphere, max_degree=40).h, rtol=1e-7)


def rows_of_rock() -> NDArray[np.float64]:
    radius = np.linspace(0.0, 6371e3, 14)
    return np.stack([radius, *(np.full(14, value) for value in (5514.0, 1e4, 5e3))], axis=1)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (lambda rows: rows[1:], "lowest radius is 490.077 km. Must be 0"),
        (lambda rows: rows[[0, 2, 1, *range(3, 14)]], "radius 490.077 km follows 980.154 km"),
        (lambda rows: rows[[0, 1, 1, 1, *range(2, 14)]], "stands more than twice"),
        (lambda rows: rows[[0, *range(3, 14)]], "no row between 0 and 1470.23 km. Rows at most 600 km apart"),
        (lambda rows: np.where(np.arange(56).reshape(14, 4) == 7, 0.0, rows), "begins or ends between"),
        (lambda rows: rows[:1], "there are 1 rows"),
        (lambda rows: np.where(rows == 1e4, np.nan, rows), "not finite"),
    ],
    ids=["no centre", "unsorted", "three times", "gap", "no boundary", "one row", "nan"],
)
def test_each_fault_of_a_table_is_told(change, message: str) -> None:
    with pytest.raises(InputError, match=message):
        tabulated_profile("bad", *change(rows_of_rock()).T)


def test_columns_of_different_length_are_told() -> None:
    rows = rows_of_rock()
    with pytest.raises(InputError, match="shapes"):
        tabulated_profile("bad", rows[:, 0], rows[1:, 1], rows[:, 2], rows[:, 3])


def with_layer(index: int, **changes: tuple[float, ...]) -> EarthProfile:
    layers = list(prem().layers)
    old = layers[index]
    parts = {name: getattr(old, name) for name in ("density", "compressional_speed", "shear_speed")} | changes
    layers[index] = Layer(old.bottom, old.top, **parts)
    return EarthProfile("changed", "", tuple(layers))


@pytest.mark.parametrize(
    ("profile", "names"),
    [
        (prem(), []),
        (prem(with_ocean=True), ["surface"]),
        (with_layer(1, shear_speed=(1000.0,)), ["fluid core"]),
        (with_layer(8, shear_speed=(2000.0, -3000.0)), ["rigidity"]),
        (with_layer(8, compressional_speed=(4000.0,)), ["bulk modulus"]),
        (with_layer(10, density=(-100.0,)), ["density"]),
        (with_layer(2, density=(9000.0,)), ["density"]),
        (homogeneous_sphere(radius=6.371e9, density=5514.0, shear_modulus=1e11), ["radius", "fluid core"]),
    ],
    ids=["prem", "ocean", "solid core", "negative rigidity", "bulk modulus", "density", "mass", "radius"],
)
def test_what_is_not_the_earth_is_told(profile: EarthProfile, names: list[str]) -> None:
    assert [fault.name for fault in earth_faults(profile, "file.csv")] == names
