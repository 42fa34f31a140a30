from itertools import pairwise

import numpy as np
import pytest

from massfit.records.record import Record
from massfit.simulate.clock import Clock, make_clock
from massfit.simulate.instrument import Deployment, _white, draw_deployments, exclusions, observe
from massfit.simulate.options import SimulationOptions

QUIET = SimulationOptions(noise=0.0, incidents=False)
BLANK = Record("A", "A/1", np.empty(0, dtype="datetime64[ns]"), np.empty(0), reference=4e7, source="records/a.nc")


def recorder(**changes: object) -> Deployment:
    values = {
        "first_day": 100, "last_day": 499, "offset": 200.0, "slope_per_year": 0.0, "exponential": 0.0,
        "time_constant_days": 30.0, "white_sd": 8.0,
    }  # fmt: skip
    return Deployment(**(values | changes))  # type: ignore[arg-type]


def observed(clock: Clock, deployment: Deployment, options: SimulationOptions = QUIET, level: float = 0.0) -> Record:
    sea = np.full(clock.n_days * clock.samples_per_day, level)
    return observe(np.random.default_rng(1), deployment, clock, sea, blank=BLANK, options=options)


@pytest.fixture(scope="module")
def hourly() -> Clock:
    return make_clock(SimulationOptions(years=2))


@pytest.mark.parametrize("role", ["plain", "overlap", "short", "step", "disturbed"])
@pytest.mark.parametrize("n_days", [365, 1461, 2922])
def test_recorders_stay_within_the_period(role: str, n_days: int) -> None:
    for seed in range(30):
        laid = draw_deployments(np.random.default_rng(seed), n_days, role)
        assert laid[0].first_day >= 0
        assert laid[-1].last_day < n_days
        assert all(each.last_day - each.first_day > 100 for each in laid)
        if role == "overlap":
            assert laid[1].first_day < laid[0].last_day - 30
        else:
            assert all(after.first_day > before.last_day for before, after in pairwise(laid))
        if role == "short" and n_days > 500:
            assert len(laid) == 1
            assert 400 <= laid[0].last_day - laid[0].first_day + 1 < 500
        assert (laid[0].step_day is not None) == (role == "step")
        assert (laid[0].disturbed is not None) == (role == "disturbed")


def test_drift_is_the_stated_formula(hourly: Clock) -> None:
    record = observed(hourly, recorder(slope_per_year=365.25, exponential=1000.0, time_constant_days=20.0))
    days = np.array([0.5 / 24.0, 20.0 + 0.5 / 24.0, 300.0 + 0.5 / 24.0])
    expected = 200.0 + days + 1000.0 * np.exp(-days / 20.0)
    assert record.pressure[[0, 480, 7200]] == pytest.approx(expected, abs=0.5)  # whole pascals
    assert record.time[0] == hourly.first_day + np.timedelta64(100 * 24 * 60 + 30, "m")


def test_a_step_begins_at_its_declared_instant(hourly: Clock) -> None:
    record = observed(hourly, recorder(step_day=300, step=400.0))
    (step,) = record.steps
    assert set(record.pressure[record.time < step]) == {200.0}
    assert set(record.pressure[record.time >= step]) == {600.0}


def test_a_disturbed_recorder_is_wrong_only_where_it_is_left_out(hourly: Clock) -> None:
    deployment = recorder(disturbed=(200, 211))
    record = observed(hourly, deployment)
    (interval,) = exclusions([deployment], hourly)
    inside = (record.time >= interval.start) & (record.time <= interval.end)
    assert np.count_nonzero(inside) == 12 * 24
    assert set(record.pressure[~inside]) == {200.0}
    assert record.pressure[inside].mean() < -5000.0


def test_incidents_spoil_a_part_of_a_record(hourly: Clock) -> None:
    record = observed(hourly, recorder(), SimulationOptions(noise=0.0))
    spikes = np.abs(record.pressure - 200.0) > 100.0
    assert 0 < np.count_nonzero(spikes) < 40
    assert 0 < np.count_nonzero(np.isnan(record.pressure)) < 40
    assert np.all(np.diff(record.time) > np.timedelta64(0))
    assert np.nanmedian(record.pressure) == 200.0


def test_white_noise_is_stated_for_a_daily_mean(hourly: Clock) -> None:
    record = observed(hourly, recorder(), SimulationOptions(incidents=False))
    daily = record.pressure.reshape(-1, 24).mean(axis=1)
    assert daily.std() == pytest.approx(8.0, rel=5 / np.sqrt(2 * daily.size))  # five standard errors


@pytest.mark.parametrize("per_day", [1, 24, 5760])
def test_noise_of_a_daily_mean_does_not_depend_on_the_sampling(per_day: int) -> None:
    days = 200
    noise = _white(np.random.default_rng(5), days * per_day, per_day)
    assert noise.reshape(days, per_day).mean(axis=1).std() == pytest.approx(1.0, abs=0.2)  # 5 % (1 sd)
    # from sample to sample it is far from what independent errors would need: 76 for 15 s
    assert np.diff(noise).std() < 9.0
