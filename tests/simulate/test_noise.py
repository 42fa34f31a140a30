from itertools import pairwise

import numpy as np
import pytest
from scipy.signal import periodogram

from massfit.simulate.noise import LONGEST_PERIOD_DAYS, SHORTEST_PERIOD_DAYS, flicker, ornstein_uhlenbeck


def slope(series: np.ndarray, step_days: float) -> float:
    """Slope of log power against log frequency between 200 and 4 days, from averaged periodograms."""
    frequency, power = periodogram(series, 1.0 / step_days, window="hann", axis=-1)
    edges = np.geomspace(1.0 / 200.0, 1.0 / 4.0, 13)
    middle, mean = np.sqrt(edges[1:] * edges[:-1]), power.mean(axis=0)
    binned = [mean[(frequency >= low) & (frequency < high)].mean() for low, high in pairwise(edges)]
    return float(np.polyfit(np.log(middle), np.log(binned), 1)[0])


@pytest.mark.parametrize("step_days", [1.0, 0.25])
def test_flicker_falls_as_one_over_frequency(step_days: float) -> None:
    rng = np.random.default_rng(1)
    series = np.array([flicker(rng, round(2000 / step_days), step_days=step_days) for _ in range(60)])
    assert slope(series, step_days) == pytest.approx(-1.0, abs=0.05)


def test_red_noise_is_not_flicker() -> None:
    # control: the slope of an Ornstein-Uhlenbeck process runs from 0 to -2, at 20 days to about -1.5 in this band
    series = ornstein_uhlenbeck(np.random.default_rng(1), (60, 2000), step_days=1.0, time_scale_days=20.0)
    assert abs(slope(series, 1.0) + 1.0) > 0.2


def test_flicker_has_unit_variance_in_its_band() -> None:
    # the definition of its size: variance between periods of 2 and 1500 days
    rng = np.random.default_rng(2)
    step, variances = 0.5, []
    for _ in range(60):
        series = flicker(rng, 6000, step_days=step)
        frequency, power = periodogram(series, 1.0 / step, detrend=False)
        band = (frequency > 1.0 / LONGEST_PERIOD_DAYS) & (frequency < 1.0 / SHORTEST_PERIOD_DAYS)
        variances.append(np.sum(power[band]) * frequency[1])
    # half of the transform is seen, so that power leaks in from longer periods: 5 % is the spread and the leak
    assert np.mean(variances) == pytest.approx(1.0, abs=0.05)


@pytest.mark.parametrize(("step_days", "scale_days"), [(1.0, 5.0), (1.0 / 24.0, 35.0)])
def test_ornstein_uhlenbeck_is_stationary_with_its_decay(step_days: float, scale_days: float) -> None:
    series = ornstein_uhlenbeck(np.random.default_rng(3), (4000, 50), step_days=step_days, time_scale_days=scale_days)
    # 4000 realisations: standard error of a variance is sqrt(2 / 4000) = 0.022
    assert np.allclose(series.var(axis=0), 1.0, atol=5 * 0.022)
    for lag in (1, 10, 40):
        correlation = np.mean(series[:, 0] * series[:, lag])
        assert correlation == pytest.approx(np.exp(-lag * step_days / scale_days), abs=5 * 0.022)
