import numpy as np
import pytest

from massfit.records.steps import find_steps

HOURS = 24 * 400
DAYS = np.arange(HOURS) / 24.0


def weather(rng: np.random.Generator, scale: float = 120.0, hours: float = 60.0) -> np.ndarray:
    """Red noise of some days with white noise, Pa: a quiet deep place."""
    decay = np.exp(-1.0 / hours)
    kicks = rng.normal(scale=scale * np.sqrt(1 - decay**2), size=HOURS)
    values = np.empty(HOURS)
    values[0] = rng.normal(scale=scale)
    for hour in range(1, HOURS):
        values[hour] = decay * values[hour - 1] + kicks[hour]
    return values + rng.normal(scale=20.0, size=HOURS)


def test_planted_steps_are_found_where_they_are(rng: np.random.Generator) -> None:
    planted, sizes = [50.3, 200.7, 310.1], np.array([900.0, -700.0, 1500.0])
    values = weather(rng) + sizes @ (np.array(planted)[:, None] <= DAYS)
    found = find_steps(DAYS, values)
    assert found.threshold < 700.0
    # within two hours of white noise and weather
    np.testing.assert_allclose(found.days, planted, rtol=0, atol=2.1 / 24)
    # weather changes by less than a threshold within a window
    np.testing.assert_allclose(found.sizes, sizes, rtol=0, atol=found.threshold)


def test_nothing_is_found_in_noise(rng: np.random.Generator) -> None:
    # 20 records of 400 days: no false step, although the level of weather wanders by several hPa
    assert [find_steps(DAYS, weather(rng)).days.size for _ in range(20)] == [0] * 20


def test_nothing_is_found_in_heavy_tailed_noise(rng: np.random.Generator) -> None:
    kicks = rng.standard_t(3, size=(5, HOURS)) * 10.0
    assert [find_steps(DAYS, weather(rng) + row).days.size for row in kicks] == [0] * 5


@pytest.mark.parametrize("shape", ["drift", "ramp", "wave", "annual"])
def test_what_is_no_step(rng: np.random.Generator, shape: str) -> None:
    after = np.clip(DAYS - 200.0, 0, None)
    change = {
        # 30 hPa within days of the start; 10 hPa within a day; a day of waves of 5 hPa; the cycle itself
        "drift": 3000.0 * np.exp(-DAYS / 3.0),
        "ramp": 1000.0 * np.clip(after, 0, 1),
        "wave": 500.0 * np.sin(2 * np.pi * after * 24 / 5) * (after > 0) * (after < 1),
        "annual": 500.0 * np.cos(2 * np.pi * DAYS / 365.2422),
    }[shape]
    assert find_steps(DAYS, weather(rng) + change).days.size == 0


def test_declared_steps_are_not_found_again(rng: np.random.Generator) -> None:
    values = weather(rng) + 900.0 * (DAYS >= 50.3)
    assert find_steps(DAYS, values, known=np.array([50.3])).days.size == 0


def test_a_change_across_a_long_gap_is_no_step(rng: np.random.Generator) -> None:
    values = weather(rng) + 900.0 * (DAYS >= 50)
    kept = (DAYS < 50) | (DAYS > 53)
    assert find_steps(DAYS[kept], values[kept]).days.size == 0
    brief = (DAYS < 50) | (DAYS > 50.2)
    assert find_steps(DAYS[brief], values[brief]).days.size == 1


@pytest.mark.parametrize("count", [0, 1, 24, 25])
def test_short_records_have_none(count: int) -> None:
    assert find_steps(DAYS[:count], np.zeros(count)).days.size == 0
