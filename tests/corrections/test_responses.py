"""Equilibrium responses of the ocean at the sites."""

from functools import cache

import numpy as np
import pytest

from massfit.constants import STANDARD_GRAVITY
from massfit.corrections.long_period_tides import LINES, zonal_function, zonal_height
from massfit.corrections.responses import equilibrium_responses, long_period_tide_at, pole_tide_at
from massfit.earth.love import love_numbers
from massfit.errors import InputError
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator, prepare_operator
from massfit.site import Site

PACIFIC = [
    Site(f"{latitude}/{longitude}", latitude, longitude)
    for latitude in (-12, -6, 0, 6)
    for longitude in (180, 215, -115)
]
TIME = np.arange("2008-01-01T12", "2020-01-01T12", 24, dtype="datetime64[h]").astype("datetime64[ns]")
MM = 1000.0 * STANDARD_GRAVITY / 1000.0  # Pa in one mm of fresh water


@cache
def operator(max_degree: int = 90) -> SeaLevelOperator:
    return prepare_operator(OceanFunction.builtin(), love_numbers(max_degree=max_degree), max_degree=max_degree)


def wobble_rms_mm(latitude: float) -> float:
    """Largest over the oceans of the standard deviation of the pole tide at a latitude."""
    sites = [Site(str(longitude), latitude, longitude) for longitude in (60, 180, 215, 240, 330)]
    responses = equilibrium_responses(operator(), sites)
    return max(float(np.std(pole_tide_at(responses, site.id, TIME)[0])) / MM for site in sites)


def test_classical_tide_is_the_height_of_the_potential() -> None:
    responses = equilibrium_responses(operator(), PACIFIC, long_period_tides="equilibrium-classical", pole_tide="none")
    expected = 1025.0 * STANDARD_GRAVITY * zonal_function(-12.0) * zonal_height(TIME)
    np.testing.assert_allclose(long_period_tide_at(responses, "-12/180", TIME), expected, rtol=1e-12)
    pressure, predicted = pole_tide_at(responses, "-12/180", TIME)
    assert not pressure.any()
    assert predicted == 0


def test_classical_annual_tide_is_10_to_14_percent_low_in_the_tropical_pacific() -> None:
    # common practice; the ocean's own load and attraction make the difference
    own = equilibrium_responses(operator(), PACIFIC)["zonal"].values
    classical = equilibrium_responses(operator(), PACIFIC, long_period_tides="equilibrium-classical")["zonal"].values
    low = 1.0 - classical / own
    assert low.min() > 0.10
    assert low.max() < 0.14


def test_rigid_earth_without_attraction_keeps_the_mass_only() -> None:
    # weightless water: the response is the potential less its mean over the ocean
    light = prepare_operator(
        OceanFunction.builtin(), love_numbers(max_degree=40), max_degree=40, sea_water_density=1e-6
    )
    area = light.ocean * light.cell_area_m2
    mean = float(np.sum(area * zonal_function(light.latitude_deg)[:, None]) / np.sum(area))
    responses = equilibrium_responses(light, PACIFIC)
    heights = responses["zonal"].values / (1e-6 * STANDARD_GRAVITY)
    expected = zonal_function(np.array([site.latitude_deg for site in PACIFIC])) - mean
    np.testing.assert_allclose(heights, expected, atol=1e-6)


def test_pole_tide_by_latitude() -> None:
    # common practice: tenths of a mm at the equator, 1-2 mm at 10-12 degrees, 2-4 mm poleward of 15 (fresh water;
    # read as standard deviation to peak, peak being about twice the standard deviation)
    assert 0.05 < wobble_rms_mm(0.0) < 0.5
    assert 1.0 < wobble_rms_mm(11.0) < 2.0
    assert 1.5 < wobble_rms_mm(16.0) < 4.0
    assert 2.0 < wobble_rms_mm(-40.0) < 4.5


def test_annual_tide_left_in_moves_a_peak_date_by_days() -> None:
    # the annual line alone, against 0.86 hPa that peak on 1 October (quiet tropical recorders, common practice)
    annual = tuple(line for line in LINES if line.name == "Sa")
    response = float(equilibrium_responses(operator(), PACIFIC)["zonal"].sel(site="0/180"))
    pressure = response * zonal_height(TIME, lines=annual) / 100.0
    days = (TIME - np.datetime64("2016-01-01", "ns")) / np.timedelta64(1, "D")
    rate = 2 * np.pi / 365.2422
    tide = 2 * np.mean(pressure * np.exp(1j * rate * days))
    target = 0.86 * np.exp(1j * rate * 274.0)
    shift = abs(np.angle((target + tide) / target)) / rate
    assert 0.08 < abs(tide) < 0.16
    assert 5.0 < shift < 10.0


def test_responses_have_converged_with_degree() -> None:
    # the potentials are of degree 2: what is left is the shape of the coasts
    coarse, fine = (equilibrium_responses(operator(degree), PACIFIC) for degree in (90, 180))
    for name in ("zonal", "wobble_m1", "wobble_m2"):
        scale = float(abs(fine[name]).max())
        assert float(abs(coarse[name] - fine[name]).max()) < 2e-3 * scale, name


@pytest.mark.parametrize("options", [{"long_period_tides": "fitted"}, {"pole_tide": "equilibrium"}])
def test_unknown_method_is_refused_with_the_choices(options: dict[str, str]) -> None:
    with pytest.raises(InputError, match="Must be one of"):
        equilibrium_responses(operator(), PACIFIC, **options)
