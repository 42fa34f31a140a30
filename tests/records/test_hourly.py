import numpy as np
import pytest

from massfit.records.hourly import EPOCH, days_from_epoch, hourly_means


def test_each_hour_counts_once_whatever_its_sampling() -> None:
    # 15 s, then one minute, then 15 minutes
    steps = np.concatenate([np.full(240, 15), np.full(60, 60), np.full(8, 900)])
    time = EPOCH + (np.cumsum(steps) - steps[0]).astype("timedelta64[s]")
    hours = hourly_means(time, np.repeat([1.0, 2.0, 3.0, 4.0], [240, 60, 4, 4]))
    assert hours.hour.tolist() == [0, 1, 2, 3]
    assert hours.pressure.tolist() == [1.0, 2.0, 3.0, 4.0]
    assert hours.days[0] * 24 == pytest.approx((240 - 1) * 15 / 2 / 3600)


def test_spread_is_the_variance_of_the_sample_times(rng: np.random.Generator) -> None:
    seconds = np.sort(rng.integers(0, 3600, 50))
    hours = hourly_means(EPOCH + 7 * np.timedelta64(1, "h") + seconds.astype("timedelta64[s]"), np.zeros(50))
    assert hours.spread[0] == pytest.approx(np.var(seconds / 86400.0), rel=1e-9)
    assert hours.days[0] == pytest.approx(np.mean(7 / 24 + seconds / 86400.0), rel=1e-12)


def test_stamps_a_little_before_the_full_hour_belong_to_it() -> None:
    # days with seven decimals round to 3 ms before or after the hour
    time = EPOCH + np.arange(48) * np.timedelta64(1, "h") + np.tile([0, 3, -3, 0], 12).astype("timedelta64[ms]")
    assert hourly_means(time, np.zeros(48)).hour.tolist() == list(range(48))


def test_hours_before_the_epoch() -> None:
    hours = hourly_means(np.array(["1999-12-31T22:15", "1999-12-31T23:59"], "datetime64[ns]"), np.array([1.0, 2.0]))
    assert hours.hour.tolist() == [-2, -1]
    assert hours.days[0] == pytest.approx(float(days_from_epoch(np.datetime64("1999-12-31T22:15", "ns"))))


def test_hours_do_not_depend_on_the_stretches(rng: np.random.Generator, monkeypatch: pytest.MonkeyPatch) -> None:
    # irregular sampling with gaps, hours of many samples among them
    seconds = np.sort(rng.integers(0, 300 * 3600, 4000)[rng.random(4000) < 0.7])
    seconds = seconds[(seconds < 50 * 3600) | (seconds > 90 * 3600)]
    time, pressure = EPOCH + seconds.astype("timedelta64[s]"), rng.normal(size=seconds.size)
    at_once = hourly_means(time, pressure)
    for stretch in (1, 10, 997):
        monkeypatch.setattr("massfit.records.stretches.AT_ONCE", stretch)
        for whole, parted in zip(vars(at_once).values(), vars(hourly_means(time, pressure)).values(), strict=True):
            np.testing.assert_array_equal(parted, whole)
