import numpy as np
import pytest

from massfit.records.ramps import find_ramps

DAYS = np.arange(500)


def weather(rng: np.random.Generator, scale: float = 80.0, days: float = 12.0) -> np.ndarray:
    """Red noise with white noise on top, Pa, of a quiet place."""
    decay = np.exp(-1.0 / days)
    values = np.empty(DAYS.size)
    values[0] = rng.normal(scale=scale)
    for day, kick in enumerate(rng.normal(scale=scale * np.sqrt(1 - decay**2), size=DAYS.size - 1)):
        values[day + 1] = decay * values[day] + kick
    return values + rng.normal(scale=8.0, size=DAYS.size)


def ramp(first: float, length: float) -> np.ndarray:
    return np.clip((DAYS - first) / length, 0.0, 1.0)


@pytest.mark.parametrize("length", [1.0, 3.0, 7.0, 12.0])
@pytest.mark.parametrize("size", [1500.0, -4000.0])
def test_a_ramp_is_found_with_its_days_and_its_total(rng: np.random.Generator, length: float, size: float) -> None:
    found = find_ramps(DAYS, weather(rng) + size * ramp(200.0, length))
    assert found.first.size == 1
    # days 201 to 200 + length - 1 are on neither level; weather hides what is smaller than two of its days
    assert 198 <= found.first[0] <= 203
    assert 200 + length - 4 <= found.last[0] <= 200 + length + 3
    # the weather of three days on either side
    assert found.sizes[0] == pytest.approx(size, abs=4 * 80.0)
    assert not found.in_gap[0]


def test_a_fast_change_with_a_slow_end_is_one_ramp(rng: np.random.Generator) -> None:
    # like a volcano: most of it within a day, the rest within a week
    shape = 0.7 * ramp(300.0, 1.0) + 0.3 * ramp(301.0, 6.0)
    found = find_ramps(DAYS, weather(rng) + 23_000.0 * shape)
    assert found.first.tolist() == [301]
    # all but 2 % of it are over on day 306
    assert found.last[0] in (305, 306, 307)
    assert found.sizes[0] == pytest.approx(23_000.0, rel=0.03)


@pytest.mark.parametrize("length", [2, 10, 30])
def test_a_change_across_a_gap(rng: np.random.Generator, length: int) -> None:
    values = weather(rng) + 2500.0 * (DAYS >= 250)
    kept = (DAYS < 250) | (250 + length <= DAYS)
    found = find_ramps(DAYS[kept], values[kept])
    assert (found.first.tolist(), found.last.tolist()) == ([250], [249 + length])
    assert found.in_gap.tolist() == [True]
    assert found.sizes[0] == pytest.approx(2500.0, abs=5 * 80.0)


def test_a_gap_alone_is_no_change(rng: np.random.Generator) -> None:
    kept = (DAYS < 250) | (DAYS >= 270)
    assert find_ramps(DAYS[kept], weather(rng)[kept]).first.size == 0


def test_two_changes_are_kept_apart(rng: np.random.Generator) -> None:
    found = find_ramps(DAYS, weather(rng) + 3000.0 * ramp(100.0, 3.0) - 5000.0 * ramp(300.0, 6.0))
    np.testing.assert_allclose(found.sizes, [3000.0, -5000.0], atol=4 * 80.0)


@pytest.mark.parametrize("time_constant", [2.0, 5.0, 20.0, 100.0])
def test_an_exponential_drift_is_no_ramp(rng: np.random.Generator, time_constant: float) -> None:
    drift = 4000.0 * np.exp(-DAYS / time_constant) - 1000.0 * DAYS / 365.0
    assert find_ramps(DAYS, weather(rng) + drift).first.size == 0


@pytest.mark.parametrize("shape", ["wave", "annual", "month"])
def test_what_comes_back_is_no_ramp(rng: np.random.Generator, shape: str) -> None:
    change = {
        # five days 20 hPa up; the cycle itself; a month of a passing eddy
        "wave": 2000.0 * ((DAYS > 200) & (DAYS < 206)),
        "annual": 500.0 * np.cos(2 * np.pi * DAYS / 365.2422),
        "month": 600.0 * np.exp(-0.5 * ((DAYS - 200.0) / 10.0) ** 2),
    }[shape]
    assert find_ramps(DAYS, weather(rng) + change).first.size == 0


def test_nothing_is_found_in_noise(rng: np.random.Generator) -> None:
    assert [find_ramps(DAYS, weather(rng)).first.size for _ in range(30)] == [0] * 30


def test_nothing_is_found_in_heavy_tailed_noise(rng: np.random.Generator) -> None:
    kicks = 20.0 * rng.standard_t(2, size=(10, DAYS.size))
    assert [find_ramps(DAYS, weather(rng) + row).first.size for row in kicks] == [0] * 10


@pytest.mark.parametrize("count", [0, 1, 13, 14, 40])
def test_short_records_have_none(count: int) -> None:
    values = np.where(np.arange(count) > count // 2, 9e4, 0.0)
    assert find_ramps(DAYS[:count], values).first.size == 0
