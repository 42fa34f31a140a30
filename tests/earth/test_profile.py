import numpy as np
import pytest
from scipy.integrate import quad

from massfit.constants import GRAVITATIONAL_CONSTANT
from massfit.earth.profile import EarthProfile, Layer, homogeneous_sphere, prem
from massfit.errors import InputError


def test_mass_and_inertia_with_the_ocean() -> None:
    # Dziewonski & Anderson 1981: PREM is built to the mass 5.974e24 kg and I / M R^2 = 0.3308
    assert prem(with_ocean=True).mass == pytest.approx(5.974e24, rel=2e-4)
    assert prem(with_ocean=True).inertia_factor == pytest.approx(0.3308, abs=5e-5)


def test_inertia_without_the_ocean() -> None:
    # crust is denser than water: more mass far out raises the factor in the fourth digit
    assert prem().inertia_factor == pytest.approx(0.3309, abs=5e-5)
    assert prem().mass > prem(with_ocean=True).mass


def test_mean_density_is_that_of_the_sea_level_kernel() -> None:
    assert prem(with_ocean=True).mean_density == pytest.approx(5514.0, rel=1e-4)


def test_mass_and_inertia_by_quadrature() -> None:
    # independent route: adaptive quadrature of the density itself
    profile = prem(with_ocean=True)

    def integral(power: int) -> float:
        return sum(
            quad(lambda r: float(profile.density(r)) * r**power, layer.bottom, layer.top, epsrel=1e-12)[0]
            for layer in profile.layers
        )

    assert profile.mass == pytest.approx(4.0 * np.pi * integral(2), rel=1e-10)
    assert profile.moment_of_inertia == pytest.approx(8.0 * np.pi / 3.0 * integral(4), rel=1e-10)


@pytest.mark.parametrize("radius", [1.0e5, 1.2215e6, 2.0e6, 3.48e6, 5.0e6, 6.37e6])
def test_gravity_obeys_poisson(radius: float) -> None:
    # dg/dr = 4 pi G rho - 2 g / r, taken from below where the density jumps
    profile, step = prem(), 1.0e3
    below, lower = profile.gravity(np.array([radius - step, radius - 2.0 * step]))
    here = float(profile.gravity(radius))
    slope = (3.0 * here - 4.0 * below + lower) / (2.0 * step)
    expected = 4.0 * np.pi * GRAVITATIONAL_CONSTANT * float(profile.density(radius)) - 2.0 * here / radius
    assert slope == pytest.approx(expected, abs=1e-6 * here / radius * radius / step)


def test_gravity_is_continuous_and_ends_in_newton() -> None:
    profile = prem()
    inner = np.array([layer.top for layer in profile.layers[:-1]])
    np.testing.assert_allclose(profile.gravity(inner), profile.gravity(np.nextafter(inner, np.inf)), rtol=1e-12)
    assert float(profile.gravity(profile.radius)) == pytest.approx(profile.surface_gravity, rel=1e-13)


def test_homogeneous_sphere_has_linear_gravity() -> None:
    sphere = homogeneous_sphere(radius=6.0e6, density=5000.0, shear_modulus=1e11, bulk_modulus=2e11)
    radii = np.linspace(1e3, 6e6, 7)
    np.testing.assert_allclose(sphere.gravity(radii), sphere.surface_gravity * radii / 6.0e6, rtol=1e-13)
    np.testing.assert_allclose(sphere.shear_modulus(radii), 1e11, rtol=1e-13)
    np.testing.assert_allclose(sphere.lame_first(radii), 2e11 - 2.0 / 3.0 * 1e11, rtol=1e-13)


def test_a_boundary_belongs_to_the_layer_beneath() -> None:
    # table I of Dziewonski & Anderson: core side of the core-mantle boundary by its own polynomial
    x = 3480.0 / 6371.0
    core = 1e3 * (12.5815 - 1.2638 * x - 3.6426 * x**2 - 5.5281 * x**3)
    assert float(prem().density(3.48e6)) == pytest.approx(core, rel=1e-12)
    assert float(prem().shear_modulus(3.48e6)) == 0.0


def test_layers_that_do_not_fill_the_sphere_are_refused_together() -> None:
    rock = ((3000.0,), (8000.0,), (4500.0,))
    with pytest.raises(InputError) as caught:
        EarthProfile("holed", "", (Layer(1.0, 10.0, *rock), Layer(20.0, 15.0, *rock)))
    assert [fault.name for fault in caught.value.faults] == ["layers[0]", "layers[1]"]
    with pytest.raises(InputError):
        EarthProfile("empty", "", ())
