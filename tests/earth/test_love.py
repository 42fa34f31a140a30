import csv
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from massfit.constants import GRAVITATIONAL_CONSTANT
from massfit.earth.love import FRAMES, LoveNumbers, half_space_limits, love_numbers
from massfit.earth.profile import EarthProfile, Layer, homogeneous_sphere, prem
from massfit.earth.propagate import load_response, surface_space
from massfit.errors import ConvergenceError, InputError

REFERENCE = Path(__file__).parents[1] / "reference"


def published(name: str) -> list[dict[str, str]]:
    lines = (REFERENCE / name).read_text().splitlines()
    return list(csv.DictReader(line for line in lines if not line.startswith("#")))


@pytest.fixture(scope="module")
def earth() -> LoveNumbers:
    return love_numbers(max_degree=400)


@pytest.fixture(scope="module")
def high() -> LoveNumbers:
    return love_numbers(max_degree=10_000, integrate_to=10_000)


# published tables


@pytest.mark.parametrize("row", published("load_love_k_wahr_1998.csv"), ids=lambda row: row["degree"])
def test_k_of_wahr_and_others(earth: LoveNumbers, row: dict[str, str]) -> None:
    # 0.003 covers the three decimals and what the table does not say of its Earth (period, surface layer)
    assert earth.k[int(row["degree"])] == pytest.approx(float(row["k"]), abs=3e-3)


@pytest.mark.parametrize("row", published("load_love_k_iers_2010.csv"), ids=lambda row: row["degree"])
def test_k_of_the_iers_conventions(earth: LoveNumbers, row: dict[str, str]) -> None:
    # another computation, its Earth not stated in detail; the largest difference, 0.0020, is at degree 2
    assert earth.k[int(row["degree"])] == pytest.approx(float(row["k"]), abs=2.5e-3)


@pytest.mark.parametrize("row", published("degree_one_blewitt_2003.csv"), ids=lambda row: row["frame"])
def test_degree_one_of_blewitt(earth: LoveNumbers, row: dict[str, str]) -> None:
    # another Earth model; a wrong frame is off by 0.02 or more in k'
    moved = earth.in_frame(row["frame"])  # type: ignore[arg-type]
    found = (moved.h[1], moved.l[1], moved.k[1])
    np.testing.assert_allclose(found, [float(row[name]) for name in "hlk"], atol=1e-2)


@pytest.mark.parametrize("target", FRAMES)
@pytest.mark.parametrize("start", FRAMES)
def test_frame_shift_of_blewitt(start: str, target: str) -> None:
    # the published numbers themselves, moved between the published frames
    rows = {row["frame"]: [float(row[name]) for name in "hlk"] for row in published("degree_one_blewitt_2003.csv")}
    first = [np.array([0.0, number]) for number in rows[start]]
    love = LoveNumbers(*first, frame=start, profile="", reference="", integrated_to=1)  # type: ignore[arg-type]
    moved = love.in_frame(target)  # type: ignore[arg-type]
    # three decimals on both sides
    np.testing.assert_allclose([moved.h[1], moved.l[1], moved.k[1]], rows[target], atol=1.5e-3)


# closed forms


def kelvin(n: NDArray[np.float64], sphere: EarthProfile, rigidity: float) -> tuple[NDArray[np.float64], ...]:
    # Kelvin's incompressible sphere (Thomson 1863; Munk & MacDonald 1960, section 5.6), with the load
    # relations k' = k - h and, in a body that cannot be compressed, l'/h' = l/h = 3 / (n (2n + 1))
    resistance = (2.0 * n**2 + 4.0 * n + 3.0) / n * rigidity
    share = 1.0 / (1.0 + resistance / (sphere.mean_density * sphere.surface_gravity * sphere.radius))
    return -(2.0 * n + 1.0) / 3.0 * share, -share / n, -share


def test_incompressible_homogeneous_sphere() -> None:
    sphere = homogeneous_sphere(radius=6.371e6, density=5514.0, shear_modulus=1e11)
    love = love_numbers(sphere, max_degree=400)
    for found, exact in zip((love.h, love.l, love.k), kelvin(np.arange(2.0, 401.0), sphere, 1e11), strict=True):
        # the Magnus steps of degree 2 leave 1e-8
        np.testing.assert_allclose(found[2:], exact, rtol=3e-8)


def test_nearly_incompressible_sphere_tends_to_the_closed_form() -> None:
    shear = 1e11
    errors = []
    for bulk in (1e15, 1e16):
        sphere = homogeneous_sphere(radius=6.371e6, density=5514.0, shear_modulus=shear, bulk_modulus=bulk)
        exact = kelvin(np.array([2.0, 10.0]), sphere, shear)
        love = love_numbers(sphere, max_degree=10)
        errors.append(np.abs(love.k[[2, 10]] / exact[2] - 1.0))
    np.testing.assert_allclose(errors[0] / errors[1], 10.0, rtol=0.01)


def test_a_rigid_sphere_does_not_yield() -> None:
    stiff = love_numbers(homogeneous_sphere(radius=6e6, density=5e3, shear_modulus=1e20), max_degree=20)
    assert max(np.abs(numbers[2:]).max() for numbers in (stiff.h, stiff.l, stiff.k)) < 1e-7


def test_a_sphere_that_cannot_bear_itself_is_refused() -> None:
    with pytest.raises(ConvergenceError, match="Earth layer"):
        love_numbers(homogeneous_sphere(radius=6e6, density=5e3, shear_modulus=1e3), max_degree=20)


def test_half_space_limit(high: LoveNumbers) -> None:
    # h', n l', n k' reach Boussinesq's half-space as 1/n; two degrees take the 1/n term out
    for numbers, limit in zip(
        (high.h, np.arange(10_001) * high.l, np.arange(10_001) * high.k), half_space_limits(prem()), strict=True
    ):
        assert numbers[10_000] == pytest.approx(limit, rel=5e-4)
        assert 2.0 * numbers[10_000] - numbers[5_000] == pytest.approx(limit, rel=2e-6)


def test_half_space_sinks_as_boussinesq_says() -> None:
    # Boussinesq: pressure p cos(x / d) on a half-space sinks it by p d (1 - nu) / mu and moves it sideways by
    # p d (1 - 2 nu) / (2 mu); here p = g sigma, d = a / n, and the load's potential is 2 pi G sigma d
    sphere = homogeneous_sphere(radius=6e6, density=3e3, shear_modulus=3e10, bulk_modulus=5e10)
    poisson = (3 * 5e10 - 2 * 3e10) / (2 * (3 * 5e10 + 3e10))
    per_load = sphere.surface_gravity**2 / (2.0 * np.pi * GRAVITATIONAL_CONSTANT)
    h, degree_times_l, _ = half_space_limits(sphere)
    assert h == pytest.approx(-per_load * (1.0 - poisson) / 3e10, rel=1e-12)
    assert degree_times_l == pytest.approx(per_load * (1.0 - 2.0 * poisson) / (2.0 * 3e10), rel=1e-12)


# invariants


def test_sea_level_factor_is_the_same_in_every_frame(earth: LoveNumbers) -> None:
    factors = [1.0 + love.k - love.h for love in map(earth.in_frame, FRAMES)]
    np.testing.assert_allclose(factors[1:], [factors[0], factors[0]], rtol=1e-14)
    # while a mixture of frames is not: the error the rule is for
    mixed = 1.0 + earth.in_frame("CM").k[1] - earth.in_frame("CF").h[1]
    assert abs(mixed / factors[0][1] - 1.0) > 0.5


def test_frames_mean_what_they_say(earth: LoveNumbers) -> None:
    assert earth.in_frame("CE").k[1] == 0.0
    assert earth.in_frame("CM").k[1] == -1.0
    figure = earth.in_frame("CF")
    assert figure.h[1] + 2.0 * figure.l[1] == pytest.approx(0.0, abs=1e-15)
    there_and_back = earth.in_frame("CM").in_frame("CE").in_frame("CF")
    np.testing.assert_allclose(there_and_back.h, earth.h, rtol=1e-14)
    np.testing.assert_array_equal(earth.in_frame("CM").k[2:], earth.k[2:])


def test_degree_one_conditions_depend_on_each_other() -> None:
    # no net force (Farrell 1972): y2 + 2 y4 + g y6 / (4 pi G) = 0 for every degree-one solution
    profile = prem()
    space = surface_space(profile, np.array([1.0]), step=0.5)[0]
    unit_of_stress = profile.typical_rigidity
    force = (
        np.sqrt(2.0) * unit_of_stress * space[1]
        + 2.0 * unit_of_stress * space[3]
        + profile.surface_gravity**2 / (4.0 * np.pi * GRAVITATIONAL_CONSTANT) * np.sqrt(2.0) * space[5]
    )
    assert np.abs(force).max() < 1e-7 * unit_of_stress
    # degree 2 does feel a net traction
    other = surface_space(profile, np.array([2.0]), step=0.5)[0]
    assert np.abs(other[1]).max() > 1e-2


def test_moving_the_whole_earth_is_a_degree_one_solution() -> None:
    # y1 = y3 = 1, y5 = g, no traction, no flux: it must lie in the computed space
    space = surface_space(prem(), np.array([1.0]), step=0.5)[0]
    shift = np.array([1.0, 0.0, np.sqrt(2.0), 0.0, 1.0, 0.0])
    missed = shift - space @ (space.T @ shift)
    assert np.abs(missed).max() < 1e-7


def test_a_layer_cut_in_two_changes_nothing() -> None:
    profile = prem()
    cut = []
    for layer in profile.layers:
        middle = 0.5 * (layer.bottom + layer.top)
        rest = (layer.density, layer.compressional_speed, layer.shear_speed)
        cut += [Layer(layer.bottom, middle, *rest), Layer(middle, layer.top, *rest)]
    whole = love_numbers(profile, max_degree=60)
    halves = love_numbers(EarthProfile("cut", "", tuple(cut)), max_degree=60)
    np.testing.assert_allclose(halves.h, whole.h, rtol=1e-8)
    np.testing.assert_allclose(halves.l, whole.l, rtol=1e-7)


# numbers and their convergence


def test_halving_the_step() -> None:
    degrees = np.concatenate([np.arange(1.0, 40.0), [60.0, 100.0, 200.0, 400.0, 1000.0]])
    runs = [load_response(prem(), degrees, step=step) for step in (1.0, 0.5, 0.25)]
    changes = [
        max(np.abs(one / other - 1.0).max() for one, other in zip(coarse[:2], fine[:2], strict=True))
        for coarse, fine in pairwise(runs)
    ]
    assert changes[1] < 3e-8
    # the sixth order of the method: 64 in the limit
    assert changes[0] / changes[1] > 20.0


def test_degrees_do_not_depend_on_their_company(high: LoveNumbers, earth: LoveNumbers) -> None:
    # more degrees bring more steps, hence not the last digits
    np.testing.assert_allclose(high.h[1:401], earth.h[1:], rtol=3e-8)
    np.testing.assert_allclose(high.k[2:401], earth.k[2:], rtol=1e-7)


def test_limit_above_the_integrated_degrees(high: LoveNumbers) -> None:
    love = love_numbers(max_degree=10_000)
    assert (love.integrated_to, love.max_degree) == (5000, 10_000)
    degrees = np.arange(5001, 10_001)
    np.testing.assert_allclose(love.h[5001:], love.h[5000], rtol=1e-15)
    np.testing.assert_allclose(degrees * love.k[5001:], 5000 * love.k[5000], rtol=1e-14)
    # half of the 1/n term that is left at degree 5000
    np.testing.assert_allclose(love.h, high.h, rtol=2e-4)
    np.testing.assert_allclose(love.k, high.k, rtol=4e-4)
    np.testing.assert_allclose(love.l, high.l, rtol=1e-4)


def test_index_is_the_degree_and_the_arrays_are_fixed(earth: LoveNumbers) -> None:
    assert earth.h.shape == earth.l.shape == earth.k.shape == (401,)
    assert earth.h[0] == earth.l[0] == earth.k[0] == 0.0
    assert earth.frame == "CF"
    assert earth.profile == prem().name
    with pytest.raises(ValueError, match="read-only"):
        earth.h[2] = 0.0
    assert love_numbers(max_degree=1).max_degree == 1


# refusals


def test_every_bad_argument_is_named() -> None:
    with pytest.raises(InputError) as caught:
        love_numbers(prem(with_ocean=True), max_degree=0, frame="XY", integrate_to=2.5)  # type: ignore[arg-type]
    assert [fault.name for fault in caught.value.faults] == ["max_degree", "integrate_to", "frame", "profile"]


def test_unknown_frame_is_refused(earth: LoveNumbers) -> None:
    with pytest.raises(InputError, match="'CE', 'CM' or 'CF'"):
        earth.in_frame("ce")  # type: ignore[arg-type]
