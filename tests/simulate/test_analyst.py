import numpy as np
import pytest

from massfit.fingerprint.grid import CellGrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.simulate.analyst import air_as_given, members, settings
from massfit.simulate.clock import make_clock
from massfit.simulate.loads import coarsened, integral
from massfit.simulate.options import SimulationOptions
from massfit.simulate.world import draw_world

OCEAN = OceanFunction.builtin()
OPTIONS = SimulationOptions(years=1, first_year=2015)
CLOCK = make_clock(OPTIONS)
WORLD = draw_world(np.random.default_rng(1), OCEAN, CLOCK)


def test_settings_state_the_period_and_leave_tides_to_the_analysis() -> None:
    stated = settings(OPTIONS, CLOCK)
    assert (str(stated.frame.start), str(stated.frame.end)) == ("2015-01-01", "2015-12-31")
    assert stated.corrections.tides == "remove"


def test_air_error_has_the_size_that_the_network_states() -> None:
    rng = np.random.default_rng(2)
    errors = np.array([air_as_given(rng, WORLD, CLOCK)[1] for _ in range(300)])
    stated = 100.0 * settings(OPTIONS, CLOCK).corrections.ocean_mean_atmosphere_sd_hpa
    parts = np.concatenate([errors.real, errors.imag])
    assert np.sqrt(np.mean(parts**2)) == pytest.approx(stated, rel=5 / np.sqrt(2 * parts.size))  # five standard errors


def test_given_air_is_the_true_daily_mean_and_its_error() -> None:
    given, error = air_as_given(np.random.default_rng(3), WORLD, CLOCK)
    true = CLOCK.daily(WORLD.air_series)
    angle = 2.0 * np.pi * CLOCK.by_day.days / 365.2422
    left = given.pressure - true - error.real * np.cos(angle) - error.imag * np.sin(angle)
    assert 1.5 < left.std() < 4.5  # Pa: the centre's weather error of 3
    assert np.abs(given.pressure - true).std() < 0.3 * true.std()


def test_members_are_plausible_and_unlike() -> None:
    patterns = members(np.random.default_rng(4), OCEAN, 4)
    totals = np.array([integral(pattern) for pattern in patterns])
    assert np.all((np.abs(totals) > 1.0e15) & (np.abs(totals) < 6.0e15))  # kg; land water swings by 2 to 4e15
    for first in range(4):
        for second in range(first):
            one, two = patterns[first].values.ravel(), patterns[second].values.ravel()
            likeness = abs(np.vdot(one, two)) / np.linalg.norm(one) / np.linalg.norm(two)
            assert 0.6 < likeness < 0.98


def test_coarsening_keeps_the_total() -> None:
    coarse = coarsened(WORLD.load, 5.0)
    assert integral(coarse) == pytest.approx(integral(WORLD.load), rel=1e-10)
    assert CellGrid.from_centres(coarse.latitude_deg, coarse.longitude_deg).shape == (36, 72)
