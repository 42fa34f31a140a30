import numpy as np
import pytest

from massfit.records.hourly import Hourly
from massfit.records.means import daily_means

NONE = np.empty(0)


def hours(hour: np.ndarray, pressure: np.ndarray) -> Hourly:
    return Hourly(hour, (hour + 0.5) / 24, np.zeros(hour.size), pressure)


def test_sampling_that_changes_within_a_day_is_weighted_by_time() -> None:
    # half a day of hours at 0 Pa, then six two-hourly values at 24 Pa
    hour = np.concatenate([np.arange(48), 48 + np.arange(12), 60 + np.arange(0, 12, 2), np.arange(72, 120)])
    pressure = np.where((hour >= 60) & (hour < 72), 24.0, 0.0)
    days = daily_means(hours(hour, pressure), NONE)
    assert days.day.tolist() == [0, 1, 2, 3, 4]
    # 7/25 of the weight is at 24 Pa, since the first of the two-hourly values is one hour from its neighbour... and
    # its mean is brought to noon along the slopes of its neighbours, which are small
    weights = np.r_[np.ones(13), np.full(5, 2.0)]
    assert days.pressure[2] == pytest.approx(weights[12:].sum() / weights.sum() * 24.0, abs=1.0)
    # control: the plain mean of the values gives a third to the second half of the day
    assert abs(pressure[48:66].mean() - 12.0) > 3.0


def test_hours_of_a_dense_year_do_not_make_a_sparse_day_whole() -> None:
    # three-hourly data for long, then hours: six of these are no day
    hour = np.concatenate([np.arange(0, 2400, 3), np.arange(2400, 2448), 2448 + np.arange(6), np.arange(2472, 2496)])
    days = daily_means(hours(hour, np.zeros(hour.size)), NONE)
    assert 102 not in days.day
    assert days.day.size == 103
    assert days.left_out == 1


@pytest.mark.parametrize("step", [1, 2, 3, 4, 6])
def test_every_regular_sampling_makes_whole_days(step: int) -> None:
    hour = np.arange(0, 240, step)
    assert daily_means(hours(hour, np.zeros(hour.size)), NONE).day.size == 10


def test_no_hours_make_no_days() -> None:
    assert daily_means(hours(np.empty(0, np.int64), NONE), NONE).day.size == 0
