"""Coefficients and surface mass, against closed forms."""

import numpy as np
import pytest

from massfit.earth.love import LoveNumbers, love_numbers
from massfit.errors import InputError
from massfit.fingerprint.transforms import SphereGrid, as_cilm
from massfit.gravity.field import Conventions, GravityField
from massfit.gravity.mass import (
    PERMANENT_TIDE_C20,
    apparent_tide_system,
    cut,
    mass_per_coefficient,
    referred,
)


@pytest.fixture(scope="module")
def love() -> LoveNumbers:
    return love_numbers(max_degree=60)


def field(max_degree: int = 8, tide_system: str = "tide_free") -> GravityField:
    rng = np.random.default_rng(1)
    coefficients = 1e-6 * rng.standard_normal((2, max_degree + 1, max_degree + 1))
    coefficients = np.tril(coefficients)
    return GravityField("invented", coefficients, Conventions(3.986004415e14, 6378136.3, tide_system))  # type: ignore[arg-type]


def test_one_coefficient_is_a_layer_of_known_mass(love: LoveNumbers) -> None:
    # closed form of Wahr, Molenaar & Bryan (1998), eq. 14: sigma = a rho_e (2n + 1) / (3 (1 + k'_n)) C
    layer = mass_per_coefficient(love, 60, radius_m=6378136.3)
    for n in (1, 2, 30, 60):
        assert layer[n] == pytest.approx(6378136.3 * 5514.0 * (2 * n + 1) / (3.0 * (1.0 + love.k[n])), rel=1e-14)


def test_a_mass_attracts_as_newton_says() -> None:
    # a rigid layer sigma = s P_2(sin lat) on the sphere has the potential coefficient 4 pi a^2 s / (M 5) at degree 2,
    # unnormalised: an integral over the layer, with no kernel of ours in it
    radius, mass = 6378136.3, 5514.0 * 4.0 / 3.0 * np.pi * 6378136.3**3
    x, weight = np.polynomial.legendre.leggauss(20)
    p2 = 1.5 * x**2 - 0.5
    attraction = 2.0 * np.pi * radius**2 * np.sum(weight * p2 * p2) / mass
    love = LoveNumbersOfARigidEarth()
    per_coefficient = mass_per_coefficient(love, 2, radius_m=radius)  # type: ignore[arg-type]
    assert attraction * per_coefficient[2] == pytest.approx(1.0, rel=1e-12)


class LoveNumbersOfARigidEarth:
    h = np.zeros(3)
    k = np.zeros(3)


def test_the_potential_is_the_same_in_any_reference() -> None:
    first = field()
    other = Conventions(3.986004418e14, 6378137.0, "tide_free")
    second = referred(first, other)
    latitude, longitude, radius = 37.0, 211.0, 6_871_000.0

    def potential(each: GravityField) -> float:
        points = SphereGrid(8).harmonics_at([latitude], [longitude])
        values = 4.0 * np.pi * as_cilm(points[0], 8)
        attenuation = (each.conventions.radius_m / radius) ** np.arange(9)
        return float(each.conventions.gm / radius * np.sum(each.coefficients * values * attenuation[:, None]))

    assert potential(second) == pytest.approx(potential(first), rel=1e-12)
    assert second.coefficients[0, 8, 3] != first.coefficients[0, 8, 3]
    back = referred(second, first.conventions)
    np.testing.assert_allclose(back.coefficients, first.coefficients, rtol=1e-13, atol=1e-25)


def test_the_permanent_tide() -> None:
    # IERS Conventions (2010), eq. 6.14: -4.2e-9 with the anelastic k_20 of its table 6.3
    assert pytest.approx(-4.2007e-9, abs=1e-13) == PERMANENT_TIDE_C20
    zero = referred(field(), Conventions(3.986004415e14, 6378136.3, "zero_tide"))
    step = zero.coefficients - field().coefficients
    assert step[0, 2, 0] == pytest.approx(PERMANENT_TIDE_C20)
    assert np.count_nonzero(step) == 1


@pytest.mark.parametrize("system", ["unknown", "mean_tide"])
def test_tide_systems_are_never_mixed_silently(system: str) -> None:
    with pytest.raises(InputError, match="Only tide_free and zero_tide turn into one another"):
        referred(field(), Conventions(3.986004415e14, 6378136.3, system))  # type: ignore[arg-type]


def test_the_size_of_c20_tells_the_tide_system() -> None:
    assert apparent_tide_system(-4.84169417e-4 + 4e-10) == "zero_tide"
    assert apparent_tide_system(-4.84169417e-4 - PERMANENT_TIDE_C20 - 4e-10) == "tide_free"
    assert apparent_tide_system(-4.8417e-4 + 2.3e-9) == "unknown"


def test_cutting_keeps_the_low_degrees() -> None:
    np.testing.assert_array_equal(cut(field(), 4).coefficients, field().coefficients[:, :5, :5])
    assert cut(field(), 20).max_degree == 8
