"""What the network says of Earth and rotation reaches the sea-level equation."""

from dataclasses import replace

import numpy as np

from massfit.earth.love import love_numbers
from massfit.earth.profile import homogeneous_sphere
from massfit.fingerprint.footprint import site_footprints
from massfit.fingerprint.ocean import OceanFunction
from massfit.network import Network
from massfit.phasor import as_complex
from massfit.pipeline.air import AirPressure
from massfit.pipeline.fingerprints import network_fingerprints, network_operator, network_rotation


def test_the_earth_of_the_network_is_solved_for(invented: Network) -> None:
    sphere = homogeneous_sphere(radius=6.371e6, density=5514.0, shear_modulus=1.5e11, bulk_modulus=4e11)
    ocean = OceanFunction.builtin()
    prem, own = (network_operator(replace(invented, earth=earth), ocean, max_degree=30) for earth in (None, sphere))
    assert "PREM" in prem.earth_model
    assert own.earth_model == "homogeneous sphere"
    sphere_factor, prem_factor = (
        1.0 + love.k - love.h for love in (love_numbers(sphere, max_degree=30), love_numbers(max_degree=30))
    )
    np.testing.assert_allclose(own.kernel[1:] / prem.kernel[1:], (sphere_factor / prem_factor)[1:], rtol=1e-12)


def test_rotation_is_fed_back_where_it_is_asked_for(invented: Network) -> None:
    settings = invented.settings
    turning = replace(
        settings,
        corrections=replace(settings.corrections, pole_tide="none"),
        fingerprint=replace(settings.fingerprint, rotational_feedback=True),
    )
    asked = replace(invented, settings=turning)
    operator = network_operator(invented, OceanFunction.builtin(), max_degree=30)
    assert network_rotation(invented, operator) is None
    assert network_rotation(asked, operator) is not None
    footprints = site_footprints(operator, invented.sites)
    still, turned = (
        network_fingerprints(network, operator, invented.sites, footprints, AirPressure(None, None, None))
        for network in (invented, asked)
    )
    assert turned.attrs["rotational_feedback"] == "annual"
    change = np.abs(as_complex(turned.admittance.to_numpy()) - as_complex(still.admittance.to_numpy()))
    # hundredths: millimetres at middle latitudes, less at the equator, of some eight
    assert 1e-3 < change.max() < 0.3
