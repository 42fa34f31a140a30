import numpy as np
import pytest

from massfit.records import interval
from massfit.records.interval import distinct_stamps, usual_interval_ns


def test_the_usual_interval_of_a_long_record_is_that_of_stretches_of_it(monkeypatch) -> None:
    # bursts of four samples every minute: a sample at every fourth place would only see the pauses
    rng = np.random.default_rng(3)
    steps = np.tile([5.0, 5.0, 5.0, 45.0], 5000)
    steps[rng.integers(0, steps.size, 300)] = 3600.0
    time = np.datetime64("2016-01-01", "ns") + np.append(0, np.cumsum(steps)).astype("timedelta64[s]")
    whole = usual_interval_ns(time)
    assert whole == 5e9
    monkeypatch.setattr(interval, "_RUNS", 20)
    monkeypatch.setattr(interval, "_RUN", 100)
    assert usual_interval_ns(time) == whole
    assert usual_interval_ns(time[::-1]) == -whole


@pytest.mark.parametrize("order", ["rising", "falling", "shuffled"])
def test_distinct_stamps_are_those_of_a_general_routine(order: str, rng: np.random.Generator) -> None:
    hours = np.repeat(np.arange(300), rng.integers(0, 3, 300))
    time = np.datetime64("2016-01-01", "ns") + hours * np.timedelta64(1, "h")
    time[rng.integers(0, time.size, 5)] = np.datetime64("NaT")
    time = {"rising": time, "falling": time[::-1], "shuffled": rng.permutation(time)}[order]
    given = time.copy()
    np.testing.assert_array_equal(distinct_stamps(time), np.unique(time[~np.isnat(time)]))
    np.testing.assert_array_equal(time, given)
