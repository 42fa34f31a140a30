"""The map from sums in one pass is that of a least-squares fit to every cell (slow independent twin)."""

from collections.abc import Callable

import numpy as np
import pytest
import xarray as xr
from screening.invented_ocean import LIVELY_PA, QUIET_PA, direct, eddying_ocean, is_quiet

from massfit.constants import TROPICAL_YEAR_DAYS
from massfit.pipeline.screen import screen_sea_floor
from massfit.screening.field import ModelField
from massfit.screening.line_noise import attenuation

YEAR = 2011


def gappy(pressure: xr.DataArray) -> xr.DataArray:
    """Ice that comes and goes, a lost month, a lost time, single lost values, and a cell that is late."""
    values, rng = pressure.values.copy(), np.random.default_rng(3)
    ice = np.arange(len(values)) % 73 < 25
    values[ice, :2] = np.nan
    values[20:90, 5, :10] = np.nan
    values[100] = np.nan
    values[rng.random(values.shape) < 5e-4] = np.nan
    values[:150, 8, 3] = np.nan
    return pressure.copy(data=values)


FIELDS: dict[str, tuple[Callable[[], xr.DataArray], bool, float]] = {
    "subtract": (eddying_ocean, True, 1.0),
    "removed": (lambda: eddying_ocean(mean_removed=True), False, 1.0),
    "gaps": (lambda: gappy(eddying_ocean()), True, 1.0),
    "north first": (lambda: eddying_ocean()[:, ::-1], True, 1.0),
    "from 180 west": (lambda: eddying_ocean().roll(lon=18, roll_coords=True), True, 1.0),
    "in bands": (eddying_ocean, True, 1e-3),
    "gaps, in bands": (lambda: gappy(eddying_ocean()), True, 1e-3),
}


@pytest.mark.parametrize("name", FIELDS)
def test_the_map_is_that_of_a_fit_to_every_cell(name: str) -> None:
    make, subtract, memory_gb = FIELDS[name]
    pressure = make()
    choice = "subtract" if subtract else "removed"
    found = screen_sea_floor([ModelField("invented", pressure, choice)], reference_year=YEAR, memory_gb=memory_gb)
    expected = direct(pressure.sortby(["lat", "lon"]), reference_year=YEAR, subtract=subtract)
    phasor = found["dynamic_phasor"].values * attenuation(5.0)
    made = {
        "sd": found["sd"].values,
        "annual_mean_sd": found["annual_mean_sd"].values,
        "in_phase": phasor[..., 0],
        "quadrature": phasor[..., 1],
    }
    for key, values in made.items():
        assert np.array_equal(np.isfinite(values), np.isfinite(expected[key])), key
        size = np.nanmax(np.abs(expected[key]))
        assert np.nanmax(np.abs(values - expected[key])) < 1e-10 * size, key


def test_an_absolute_pressure_loses_no_digits_that_matter() -> None:
    # 4e7 Pa, the bottom of a trench: double precision itself leaves 1e-8 Pa
    pressure = eddying_ocean(offset=4e7)
    found = screen_sea_floor([ModelField("invented", pressure, "subtract")], reference_year=YEAR)
    expected = direct(pressure, reference_year=YEAR, subtract=True)
    assert np.nanmax(np.abs(found["sd"].values / expected["sd"] - 1.0)) < 1e-9


def test_the_quiet_patches_are_found() -> None:
    found = screen_sea_floor([ModelField("invented", eddying_ocean(mean_removed=True), "removed")])
    quiet = is_quiet(found["lat"].values, found["lon"].values)
    sd = found["sd"].values
    assert np.nanmax(sd[quiet]) < 2.0 * QUIET_PA < 0.5 * LIVELY_PA < np.nanmin(sd[~quiet])


def test_months_are_made_good_for_what_a_mean_loses() -> None:
    # closed form: the mean of a wave over an interval is the wave times the sinc of the share of the period
    months = np.arange("2005-01", "2015-01", dtype="datetime64[M]").astype("datetime64[ns]")
    edges = np.append(months, np.datetime64("2015-01", "ns")).astype("datetime64[D]")
    day = np.arange(edges[0], edges[-1])
    wave = 100.0 * np.cos(2.0 * np.pi / TROPICAL_YEAR_DAYS * ((day - day[0]).astype(float) + 0.5))
    mean = np.add.reduceat(wave, (edges[:-1] - edges[0]).astype(int)) / np.diff(edges).astype(int)
    middle = months + np.diff(edges).astype("timedelta64[ns]") // 2
    noise = np.random.default_rng(0).normal(0.0, 10.0, (middle.size, 2, 2))
    pressure = xr.DataArray(
        mean[:, None, None] + noise - noise.mean(axis=0),
        dims=("time", "lat", "lon"),
        coords={"time": middle, "lat": [-20.0, -10.0], "lon": [200.0, 210.0]},
    )
    found = screen_sea_floor([ModelField("invented", pressure, "removed")], reference_year=2005)
    sd = 10.0 * np.sqrt(2.0 / middle.size) / 2.0  # of the mean over four cells
    assert abs(found["dynamic_phasor"].values[..., 0].mean() - 100.0) < 4.0 * sd
