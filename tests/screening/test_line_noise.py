"""The noise at the annual line of a short record, told from a longer field: against simulated records."""

import numpy as np
import pytest
import xarray as xr
from numpy.typing import NDArray
from scipy.signal import lfilter

from massfit.constants import TROPICAL_YEAR_DAYS
from massfit.phasor import annual_basis
from massfit.pipeline.screen import screen_sea_floor
from massfit.screening.field import ModelField
from massfit.screening.line_noise import SLOPES, LineNoise, noise_at_line

STEP_DAYS = 5.0
CELLS = 400
RECORD_YEARS = (1.0, 2.0, 4.0)


def red(rng: np.random.Generator, times: int, days: float) -> NDArray[np.float64]:
    """Noise of unit variance that forgets within some days; white for none."""
    keep = np.exp(-STEP_DAYS / days) if days else 0.0
    before = int(6.0 * days / STEP_DAYS)
    noise = lfilter([np.sqrt(1.0 - keep**2)], [1.0, -keep], rng.normal(size=(before + times, CELLS)), axis=0)
    return np.asarray(noise[before:])


def power_law(rng: np.random.Generator, times: int, power: float) -> NDArray[np.float64]:
    """Noise whose density is the frequency in cycles a year to a negative power, by random waves."""
    length = 8 * times
    frequency = np.fft.rfftfreq(length, STEP_DAYS / TROPICAL_YEAR_DAYS)[1:]
    spacing = frequency[0]
    waves = rng.normal(size=(frequency.size, CELLS)) + 1j * rng.normal(size=(frequency.size, CELLS))
    waves *= np.sqrt(frequency**-power * spacing)[:, None]
    padded = np.concatenate([np.zeros((1, CELLS)), waves]) * length / 2.0
    return np.asarray(np.fft.irfft(padded, n=length, axis=0)[:times])


NOISE = {
    "white": lambda rng, n: red(rng, n, 0.0),
    "20 days": lambda rng, n: red(rng, n, 20.0),
    "400 days": lambda rng, n: red(rng, n, 400.0),
    "1/f": lambda rng, n: power_law(rng, n, 1.0),
    "1/f2": lambda rng, n: power_law(rng, n, 2.0),
}


def simulated_sd(make, rng: np.random.Generator, years: float) -> float:  # type: ignore[no-untyped-def]
    """Spread of the annual phasor of many records, by least squares with level, trend and season."""
    days = (np.arange(round(years * TROPICAL_YEAR_DAYS / STEP_DAYS)) + 0.5) * STEP_DAYS
    design = np.column_stack([np.ones_like(days), days / days[-1], annual_basis(days), annual_basis(days, 2)])
    solved = [np.linalg.lstsq(design, make(rng, days.size), rcond=None)[0][2:4] for _ in range(6)]
    return float(np.sqrt(np.mean(np.square(solved))))


@pytest.mark.parametrize("name", NOISE)
def test_the_sigma_of_a_record_is_that_of_simulated_records(name: str) -> None:
    rng = np.random.default_rng(7)
    time = (np.datetime64("2000-01-03T12") + np.arange(round(12 * 365.2422 / 5)) * np.timedelta64(120, "h")).astype(
        "datetime64[ns]"
    )
    series = 100.0 * NOISE[name](rng, time.size)
    pressure = xr.DataArray(
        series.reshape(time.size, 20, 20),
        dims=("time", "lat", "lon"),
        coords={"time": time, "lat": np.arange(20.0) - 20.0, "lon": np.arange(20.0) + 200.0},
    )
    found = screen_sea_floor([ModelField("invented", pressure, "removed")], record_years=RECORD_YEARS)
    told = np.sqrt((found["annual_sd"] ** 2).mean(("lat", "lon"))).values
    true = [100.0 * simulated_sd(NOISE[name], rng, years) for years in RECORD_YEARS]
    # 400 cells and 2400 records tell 1.5 % each; a power law is near the truth: 6 %, and for one year, whose estimator
    # takes in everything from half to twice the annual frequency, 15 %
    assert np.all(np.abs(told / true - 1.0) < [0.15, 0.08, 0.08]), (told, true)
    # a single cell has some 22 degrees of freedom: 1 / sqrt(44) = 15 %, more where the slope is uncertain
    assert 0.10 < float(found["annual_sd"][1].std() / found["annual_sd"][1].mean()) < 0.25


def test_a_cell_that_never_moves_has_no_noise() -> None:
    tables = LineNoise(np.ones((SLOPES.size, 6)), np.ones((SLOPES.size, 2)))
    found = noise_at_line(np.zeros((6, 3)), tables)
    assert np.array_equal(found.record_variance, np.zeros((2, 3)))
