import numpy as np
import pytest

from massfit.records.settling import settled_after

DAYS = np.arange(400)


@pytest.mark.parametrize(("time_constant", "least", "most"), [(2.0, 7, 15), (5.0, 16, 35), (500.0, 60, 60)])
def test_days_until_a_week_moves_no_more_than_usual(
    rng: np.random.Generator, time_constant: float, least: int, most: int
) -> None:
    # a week changes 3000 Pa exp(-t / T) by 3000 (1 - exp(-7 / T)) exp(-t / T); usual are 15 Pa sqrt(2), and three
    # times that is 64 Pa: T = 2 d gives 7.6 d, T = 5 d gives 17.8 d, before the noise. A record that moves for 65 days
    # and then rests is cut at 60 days
    drift = 3000.0 * np.exp(-DAYS / time_constant) if time_constant < 100 else -60.0 * np.minimum(DAYS, 65)
    count = settled_after(DAYS, drift + rng.normal(scale=15.0, size=DAYS.size), 0.0)
    assert least <= count <= most


def test_a_record_at_rest_is_not_trimmed() -> None:
    assert settled_after(DAYS, 10.0 * np.sin(DAYS / 3.0), 0.0) == 0


@pytest.mark.parametrize("count", [0, 1, 20, 90])
def test_too_short_to_say_what_is_usual(count: int) -> None:
    assert settled_after(DAYS[:count], 3000.0 * np.exp(-DAYS[:count] / 5.0), 0.0) == 0
