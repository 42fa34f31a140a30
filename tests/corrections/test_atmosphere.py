"""Ocean mean and annual phasor of air pressure."""

import numpy as np
import pytest
import xarray as xr

from massfit.corrections.atmosphere import air_pressure_pattern, annual_phasor, ocean_mean_air_pressure
from massfit.errors import InputError
from massfit.fingerprint.ocean import OceanFunction
from massfit.network import Series

RATE = 2.0 * np.pi / 365.2422
TIME = np.arange("2014-01-01T12", "2017-01-01", 24, dtype="datetime64[h]").astype("datetime64[ns]")
ANGLE = RATE * ((TIME - np.datetime64("2016-01-01", "ns")) / np.timedelta64(1, "D"))
TRUTH = 30.0 - 50.0j
LATITUDE, LONGITUDE = np.arange(-87.5, 90.0, 5.0), np.arange(2.5, 360.0, 5.0)


def air(step: int = 1) -> xr.DataArray:
    """1000 hPa and an annual cycle whose size follows the sine of latitude."""
    cycle = TRUTH.real * np.cos(ANGLE) + TRUTH.imag * np.sin(ANGLE)
    values = 1e5 + cycle[::step, None, None] * np.sin(np.radians(LATITUDE))[:, None] * np.ones(LONGITUDE.size)
    return xr.DataArray(
        values, dims=("time", "lat", "lon"), coords={"time": TIME[::step], "lat": LATITUDE, "lon": LONGITUDE}
    )


def test_ocean_mean_against_a_sum_over_the_quarter_degree_cells() -> None:
    ocean = OceanFunction.builtin()
    series = ocean_mean_air_pressure(air(10), ocean)
    area = ocean.fraction * ocean.cells.cell_area_m2
    latitude = np.arange(89.875, -90.0, -0.25)  # rows of the built-in table run southward
    rows = np.abs(LATITUDE - latitude[:, None]).argmin(axis=1)
    sine = np.sin(np.radians(LATITUDE))[rows]
    share = float((area * sine[:, None]).sum() / area.sum())
    cycle = (TRUTH.real * np.cos(ANGLE) + TRUTH.imag * np.sin(ANGLE))[::10]
    np.testing.assert_allclose(series.pressure, 1e5 + cycle * share, atol=1e-6)
    assert share < -0.05  # there is more ocean in the south: the test can fail


def test_pattern_gives_back_the_phasor_of_every_cell() -> None:
    pattern = air_pressure_pattern(air(5), 2016)
    expected = TRUTH * np.sin(np.radians(LATITUDE))[:, None] * np.ones(LONGITUDE.size)
    # five-day values are taken as means: closed form of the attenuation that is undone
    np.testing.assert_allclose(pattern.values, expected / np.sinc(5 / 365.2422), rtol=1e-9)


def test_annual_phasor_of_monthly_means_is_not_attenuated() -> None:
    edges = np.arange("2014-01", "2017-02", dtype="datetime64[M]").astype("datetime64[ns]")
    days = (edges - np.datetime64("2016-01-01", "ns")) / np.timedelta64(1, "D")
    integral = (TRUTH.real * np.sin(RATE * days) - TRUTH.imag * np.cos(RATE * days)) / RATE
    means = np.diff(integral) / np.diff(days)
    middles = edges[:-1] + (edges[1:] - edges[:-1]) / 2
    fitted = annual_phasor(Series("air", middles, 7.0 + means), 2016)
    assert fitted == pytest.approx(TRUTH, abs=1e-9)


def test_slope_and_half_year_do_not_leak() -> None:
    series = 5.0 * ANGLE + 40.0 * np.sin(2.0 * ANGLE) + TRUTH.real * np.cos(ANGLE) + TRUTH.imag * np.sin(ANGLE)
    assert annual_phasor(Series("air", TIME, series), 2016) == pytest.approx(TRUTH, rel=1e-4)


def test_phase_counts_from_the_reference_year() -> None:
    series = Series("air", TIME, np.cos(ANGLE))
    # 1 January 2015 is 365 days before that of 2016: the peak comes a quarter of a day earlier in the year
    turn = np.angle(annual_phasor(series, 2015)) / RATE
    assert turn == pytest.approx(365.0 - 365.2422, abs=1e-3)


def test_less_than_a_year_is_refused() -> None:
    with pytest.raises(InputError, match="300 values over 300 days"):
        annual_phasor(Series("air", TIME[:300], np.zeros(300)), 2016)


def test_regional_or_broken_fields_are_refused() -> None:
    ocean = OceanFunction.builtin()
    with pytest.raises(InputError, match=r"covers \d+ % of the ocean"):
        ocean_mean_air_pressure(air(50).isel(lat=slice(0, 20)), ocean)
    broken = air(50)
    broken[3, 10, 10] = np.nan
    with pytest.raises(InputError, match="first at 2014-05-31"):
        ocean_mean_air_pressure(broken, ocean)
