import numpy as np
import pytest

from massfit.records.disturbed import find_disturbed

HOURS = np.arange(24 * 120)


def weather(rng: np.random.Generator) -> np.ndarray:
    return 150.0 * np.sin(HOURS / 60.0) + rng.normal(scale=30.0, size=HOURS.size)


@pytest.mark.parametrize("hours", [1, 3, 8, 12])
def test_a_bump_is_found_whole(rng: np.random.Generator, hours: int) -> None:
    level = weather(rng)
    level[1000 : 1000 + hours] += 3000.0
    assert np.flatnonzero(find_disturbed(level)).tolist() == list(range(1000, 1000 + hours))


def test_what_lasts_longer_is_left_to_the_analyst(rng: np.random.Generator) -> None:
    level = weather(rng)
    level[1000:1014] += 3000.0
    assert not find_disturbed(level).any()


def test_a_step_and_weather_are_not_disturbances(rng: np.random.Generator) -> None:
    level = weather(rng) + 8000.0 * (HOURS >= 1500)
    assert not find_disturbed(level).any()


def test_less_than_ten_hectopascal_is_never_called_so() -> None:
    calm = np.sin(HOURS * 1.0)
    assert not find_disturbed(np.where(HOURS == 700, 990.0, calm)).any()
    assert find_disturbed(np.where(HOURS == 700, 1010.0, calm)).sum() == 1


@pytest.mark.parametrize("count", [0, 1, 48])
def test_short_stretches_are_left_alone(count: int) -> None:
    assert not find_disturbed(np.full(count, 1e6) * (np.arange(count) == 3)).any()
