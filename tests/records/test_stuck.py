import numpy as np
import pytest

from massfit.records.stuck import find_stuck

MINUTE = np.timedelta64(1, "m")


def stamps(count: int, minutes: int = 60) -> np.ndarray:
    return np.datetime64("2016-01-01", "ns") + np.arange(count) * minutes * MINUTE


def tide(time: np.ndarray, metres: float, counts_pa: float) -> np.ndarray:
    hours = (time - time[0]) / (60 * MINUTE)
    return counts_pa * np.round(1e4 * metres * np.cos(2 * np.pi * hours / 12.4206) / counts_pa)


def test_a_stalled_counter_is_found_whole() -> None:
    time = stamps(2000)
    pressure = tide(time, 0.3, 1.0)
    pressure[700:715] = pressure[700]
    assert np.flatnonzero(find_stuck(time, pressure)).tolist() == list(range(700, 715))


@pytest.mark.parametrize("minutes", [0.25, 1, 15, 60])
@pytest.mark.parametrize("counts_pa", [0.1, 4.9, 100.0])
def test_coarse_counts_around_high_water_are_not_stuck(minutes: float, counts_pa: float) -> None:
    seconds = np.arange(0, 20 * 86_400, int(60 * minutes)).astype("timedelta64[s]")
    time = np.datetime64("2016-01-01", "ns") + seconds
    assert not find_stuck(time, tide(time, 0.2, counts_pa)).any()


def test_a_day_of_one_value_stands_out_of_coarse_counts() -> None:
    time = stamps(96 * 60, 15)
    pressure = tide(time, 0.2, 100.0)
    pressure[960:1056] = 300.0
    assert find_stuck(time, pressure)[960:1056].all()


def test_a_few_equal_hours_are_chance() -> None:
    time = stamps(400)
    pressure = tide(time, 0.3, 1.0)
    pressure[100:105] = pressure[100]
    assert not find_stuck(time, pressure).any()


@pytest.mark.parametrize("count", [0, 1, 5, 6, 100])
def test_a_record_of_one_value_is_left_to_the_checks_of_the_reader(count: int) -> None:
    assert not find_stuck(stamps(count), np.zeros(count)).any()
