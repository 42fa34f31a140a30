import numpy as np
import pytest

from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.sea_level import solve_sea_level
from massfit.simulate.clock import make_clock
from massfit.simulate.dynamics import daily_means, draw_circulation, imitate, ocean_bumps
from massfit.simulate.options import SimulationOptions
from massfit.simulate.places import draw_sites
from massfit.simulate.sea_level import _BROAD_DEGREE, self_attraction, true_operator

OCEAN = OceanFunction.builtin()
BUMPS = ocean_bumps(OCEAN)


def test_no_pattern_holds_ocean_mass() -> None:
    # mean over the ocean on a grid of its own: random points, evenly spread
    rng = np.random.default_rng(1)
    latitude, longitude = np.rad2deg(np.arcsin(rng.uniform(-1, 1, 40_000))), rng.uniform(0, 360, 40_000)
    weight = OCEAN.fraction_at(latitude, longitude)
    patterns = BUMPS.at(latitude, longitude)
    mean = weight @ patterns / weight.sum()
    scatter = np.sqrt(weight @ patterns**2) / weight.sum()
    assert np.abs(mean / scatter).max() < 4.5  # standard errors, the largest of about 115 patterns


def test_exchange_pattern_is_one_where_sites_are() -> None:
    sites = draw_sites(OCEAN, 30, np.random.default_rng(2))
    at_sites = BUMPS.at(np.array([s.latitude_deg for s in sites]), np.array([s.longitude_deg for s in sites]))
    assert np.allclose(at_sites[:, -1], 1.0)


def test_weather_is_that_of_quiet_deep_places() -> None:
    clock = make_clock(SimulationOptions(sampling="daily", years=4))
    circulation = draw_circulation(np.random.default_rng(3), BUMPS, clock)
    latitude, longitude = np.array([0.0, -10.0, 55.0]), np.array([200.0, 220.0, 325.0])
    sd = (BUMPS.at(latitude, longitude) @ circulation.weather).std(axis=1)
    assert np.all((sd[:2] > 70.0) & (sd[:2] < 180.0))  # Pa
    assert sd[2] > 180.0


def test_models_catch_most_of_the_weather_and_share_an_error() -> None:
    clock = make_clock(SimulationOptions(sampling="daily", years=4))
    rng = np.random.default_rng(4)
    truth = daily_means(draw_circulation(rng, BUMPS, clock), clock)
    model = imitate(rng, truth, common_error=10.0 + 5.0j, error=1.0)
    left = (truth.weather - model.weather)[:-1].var() / truth.weather[:-1].var()
    assert 0.1 < left < 0.35
    assert model.annual[-1] - truth.annual[-1] == 10.0 + 5.0j
    perfect = imitate(rng, truth, common_error=0.0, error=0.0)
    assert np.array_equal(perfect.annual, truth.annual)


def test_self_attraction_is_that_of_a_forward_solve() -> None:
    # footprints against the sea-level equation itself with the water of a pattern as its load
    sites = draw_sites(OCEAN, 4, np.random.default_rng(5))
    operator = true_operator(_BROAD_DEGREE)
    latitude, longitude = np.meshgrid(operator.latitude_deg, operator.longitude_deg, indexing="ij")
    patterns = BUMPS.at(latitude.ravel(), longitude.ravel())
    by_footprint = self_attraction(sites, BUMPS)
    weight = operator.ocean * operator.cell_area_m2
    for k in (10, patterns.shape[1] - 1):
        field = patterns[:, k].reshape(latitude.shape)
        field = field - np.sum(weight * field) / np.sum(weight)
        sea = solve_sea_level(operator, load=operator.ocean * field)
        at_sites = sea.at([s.latitude_deg for s in sites], [s.longitude_deg for s in sites])
        # load p/g gives height S, pressure rho g S: g cancels
        expected = operator.sea_water_density * at_sites
        assert by_footprint[:, k] == pytest.approx(expected, abs=1e-7 * np.abs(field).max())


def test_self_attraction_is_small() -> None:
    # the attraction of a circulation of 1 hPa is some hundredths of it: 0.1 to 0.5 mm (common practice)
    sites = draw_sites(OCEAN, 10, np.random.default_rng(6))
    own = BUMPS.at(np.array([s.latitude_deg for s in sites]), np.array([s.longitude_deg for s in sites]))
    share = np.linalg.norm(self_attraction(sites, BUMPS)[:, :-1]) / np.linalg.norm(own[:, :-1])
    assert 0.03 < share < 0.3
