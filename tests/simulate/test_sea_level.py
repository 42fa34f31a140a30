import numpy as np
import pytest

from massfit.corrections.responses import equilibrium_responses
from massfit.fingerprint.admittance import site_fingerprints
from massfit.fingerprint.ocean import OceanFunction
from massfit.phasor import as_complex
from massfit.simulate.clock import make_clock
from massfit.simulate.dynamics import ocean_bumps
from massfit.simulate.options import SimulationOptions
from massfit.simulate.places import draw_sites
from massfit.simulate.sea_level import TRUTH_DEGREE, Responses, true_operator, true_responses
from massfit.simulate.world import World, draw_world
from massfit.site import Site

OCEAN = OceanFunction.builtin()
SITES = draw_sites(OCEAN, 5, np.random.default_rng(1))
LOW_DEGREE = 90


@pytest.fixture(scope="module")
def world() -> World:
    return draw_world(np.random.default_rng(2), OCEAN, make_clock(SimulationOptions(sites=5, sampling="daily")))


@pytest.fixture(scope="module")
def responses(world: World) -> Responses:
    return true_responses(SITES, world, ocean_bumps(OCEAN))


def test_the_adjoint_route_agrees(world: World, responses: Responses) -> None:
    # footprints at a lower degree, from the same load and air: the analyst's route given the truth
    prints = site_fingerprints(
        true_operator(LOW_DEGREE),
        SITES,
        (world.load,),
        water_vapour=world.water_vapour,
        air_load=world.air_pressure,
        ocean_mean_air=world.air_annual,
    )
    # what lies between degrees 90 and 256 is a few thousandths far from coasts
    assert as_complex(prints["admittance"].to_numpy()[0]) == pytest.approx(responses.admittance, abs=0.01)
    assert as_complex(prints["air_load_response"].to_numpy()) == pytest.approx(responses.air_load, abs=0.2)
    assert np.abs(responses.air_load).max() > 1.0  # Pa: it is not lost in the tolerance


def test_tides_agree_with_those_of_the_analysis(responses: Responses) -> None:
    # the analysis at a lower degree; both potentials are of degree 2, the ocean's answer a few per cent of them
    tides = equilibrium_responses(true_operator(LOW_DEGREE), SITES)
    assert tides["zonal"].to_numpy() == pytest.approx(responses.zonal_tide, abs=5.0)  # Pa per m, of about 5000
    scale = np.abs(responses.wobble).max()
    assert tides["wobble_m1"].to_numpy() == pytest.approx(responses.wobble.real, abs=2e-3 * scale)
    assert tides["wobble_m2"].to_numpy() == pytest.approx(responses.wobble.imag, abs=2e-3 * scale)


def test_the_truth_is_solved_beyond_the_analysis() -> None:
    assert TRUTH_DEGREE > 180


def test_another_load_gives_another_fingerprint(responses: Responses) -> None:
    other = draw_world(np.random.default_rng(3), OCEAN, make_clock(SimulationOptions(sites=5, sampling="daily")))
    differing = true_responses(SITES, other, ocean_bumps(OCEAN))
    assert 0.002 < np.abs(differing.admittance - responses.admittance).mean() < 0.2


def test_sites_in_the_open_pacific_see_more_than_the_mean(world: World) -> None:
    site = Site("P", -5.0, 215.0)
    assert abs(true_responses([site], world, ocean_bumps(OCEAN)).admittance[0]) > 1.03
