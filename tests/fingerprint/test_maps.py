"""World maps of the admittance: against the adjoint route, snapshots in time, and cases whose answer is known."""

import numpy as np
import pytest
from numpy.typing import NDArray

from massfit.constants import ANNUAL_RATE, EARTH_RADIUS, TROPICAL_YEAR_DAYS
from massfit.contracts import FOOTPRINTS, require
from massfit.errors import InputError
from massfit.fingerprint.admittance import site_fingerprints, water_vapour_phasor
from massfit.fingerprint.footprint import site_footprints
from massfit.fingerprint.loads import builtin_loads
from massfit.fingerprint.maps import (
    MAP_LATITUDE_DEG,
    MAP_LONGITUDE_DEG,
    admittance_by_degree,
    admittance_maps,
    footprint_maps,
    value_on_map,
)
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator, prepare_operator
from massfit.fingerprint.pattern import LoadPattern
from massfit.fingerprint.rotation import prepare_rotation
from massfit.fingerprint.sea_level import solve_sea_level
from massfit.phasor import as_complex, delay_days, phasor_from_peak
from massfit.site import Site

LOADS = builtin_loads(("nominal", "slow-rivers"))
VAPOUR = water_vapour_phasor(0.65e15, "07-15", 2015)
DEEP = [Site("P", -11.2, 205.3), Site("D", 3.9, 179.9), Site("A", 2.7, -28.4), Site("N", 88.9, 12.0)]


def at(maps: NDArray[np.complex128], latitude: float, longitude: float) -> NDArray[np.complex128]:
    return maps[..., int(np.argmin(abs(MAP_LATITUDE_DEG - latitude))), int(longitude % 360.0)]


def test_a_map_holds_the_site_admittance_of_every_cell_centre(coarse: SeaLevelOperator) -> None:
    # the sites go by the adjoint, the map by a forward solve; centres at the poles and at the date line
    centres = [(-89.5, 0.5), (89.5, 300.5), (10.5, 179.5), (10.5, 180.5), (-35.5, 359.5)]
    sites = [Site(str(place), *place) for place in centres]
    prints = as_complex(site_fingerprints(coarse, sites, LOADS, water_vapour=VAPOUR).admittance.to_numpy())
    maps = as_complex(admittance_maps(coarse, LOADS, water_vapour=VAPOUR).map_admittance.to_numpy())
    found = np.stack([at(maps, *place) for place in centres], axis=-1)
    np.testing.assert_allclose(found, prints, rtol=0, atol=1e-10)


def test_between_the_centres_a_map_is_as_good_as_its_cells(operator: SeaLevelOperator) -> None:
    # in deep water the field is smooth; on the shelf of Oregon it bends within a cell of one degree, whose linear
    # interpolation then misses: the map is for the eye, the site's own sum for numbers
    sites = [*DEEP, Site("shelf", 45.0, -124.6)]
    prints = as_complex(site_fingerprints(operator, sites, LOADS[:1]).admittance.to_numpy())[0]
    maps = as_complex(admittance_maps(operator, LOADS[:1]).map_admittance.to_numpy())[0]
    places = [s.latitude_deg for s in sites], [s.longitude_deg for s in sites]
    missed = np.abs(value_on_map(maps, *places) - prints)
    assert missed[:-1].max() < 5e-4
    assert missed[-1] > 2e-3


def test_delay_is_later_in_time(coarse: SeaLevelOperator) -> None:
    # no phasor enters here: sea level on 73 days of the year under the real load of each day, and when it is highest
    load = np.zeros((2, *coarse.cells.shape), dtype=complex)
    latitude, longitude = np.meshgrid(coarse.latitude_deg, coarse.longitude_deg, indexing="ij")
    load[0] = 100.0 * np.exp(-(((latitude - 60) / 8) ** 2) - ((longitude - 100) / 20) ** 2)
    load[1] = 100.0 * np.exp(-(((latitude + 5) / 8) ** 2) - ((longitude - 300) / 8) ** 2)
    days = np.linspace(0.0, TROPICAL_YEAR_DAYS, 73, endpoint=False)
    place, level, mean = (-8.5, 325.5), [], []
    for day in days:
        today = load[0] * np.cos(ANNUAL_RATE * (day - 85)) + load[1] * np.cos(ANNUAL_RATE * (day - 140))
        sea = solve_sea_level(coarse, load=today.real)
        level.append(float(sea.at(*place)))
        mean.append(sea.ocean_mean)
    # three equally spaced samples about the top give the top of a cosine to a tenth of a day
    later = (top_of(days, level) - top_of(days, mean) + 182.6) % TROPICAL_YEAR_DAYS - 182.6
    total = load[0] * phasor_from_peak(1.0, 85.0) + load[1] * phasor_from_peak(1.0, 140.0)
    sea = solve_sea_level(coarse, load=total)
    grid = sea.operator.grid
    real, imaginary = grid.synthesise_regular(sea.coefficients, MAP_LATITUDE_DEG, MAP_LONGITUDE_DEG)
    delay = float(delay_days(at((real + 1j * imaginary) / sea.ocean_mean, *place)))
    assert abs(later) > 5.0
    assert delay == pytest.approx(later, abs=0.2)


def top_of(days: NDArray[np.float64], values: list[float]) -> float:
    best = int(np.argmax(values))
    left, middle, right = (values[(best + shift) % len(values)] for shift in (-1, 0, 1))
    return float(days[best] + 0.5 * (left - right) / (left - 2.0 * middle + right) * (days[1] - days[0]))


def test_a_later_load_delays_every_place_alike_and_changes_no_map(coarse: SeaLevelOperator) -> None:
    first = LOADS[0]
    later = LoadPattern("later", first.latitude_deg, first.longitude_deg, first.values * np.exp(0.7j))
    maps = as_complex(admittance_maps(coarse, [first, later]).map_admittance.to_numpy())
    np.testing.assert_allclose(maps[1], maps[0], rtol=0, atol=1e-12 * np.abs(maps[0]).max())


def test_an_ocean_planet_under_an_even_load_rises_evenly(all_ocean: OceanFunction, love) -> None:
    planet = prepare_operator(all_ocean, love, max_degree=30)
    even = LoadPattern("even", MAP_LATITUDE_DEG, MAP_LONGITUDE_DEG, np.full((180, 360), 3.0 - 4.0j))
    maps = as_complex(admittance_maps(planet, [even], water_vapour=1e14j).map_admittance.to_numpy())
    np.testing.assert_allclose(maps, 1.0, rtol=0, atol=1e-12)


def test_without_attraction_every_load_raises_the_sea_evenly(coarse: SeaLevelOperator) -> None:
    still = SeaLevelOperator(coarse.grid, coarse.ocean, 1e-20 * coarse.kernel, 1025.0, "almost without attraction")
    maps = as_complex(admittance_maps(still, LOADS).map_admittance.to_numpy())
    np.testing.assert_allclose(maps, 1.0, rtol=0, atol=1e-12)
    # control: with it no map is even
    assert np.ptp(np.abs(as_complex(admittance_maps(coarse, LOADS).map_admittance.to_numpy()))) > 1.0


def test_the_maps_say_where_the_ocean_is(coarse: SeaLevelOperator) -> None:
    maps = admittance_maps(coarse, LOADS[:1])
    area = np.cos(np.radians(MAP_LATITUDE_DEG))[:, None] * np.ones(360)
    share = float(np.average(maps.ocean_fraction.to_numpy(), weights=area))
    assert share == pytest.approx(coarse.ocean_area_m2 / (4 * np.pi * EARTH_RADIUS**2), abs=1e-4)
    assert maps.ocean_fraction.sel(lat=24.5, lon=10.5) == 0.0


def test_mean_over_the_members_at_every_degree(coarse: SeaLevelOperator, love) -> None:
    finer = prepare_operator(OceanFunction.builtin(), love, max_degree=60)
    found = admittance_by_degree(iter([(coarse, None), (finer, None)]), DEEP, LOADS, water_vapour=VAPOUR)
    assert found.degree.to_numpy().tolist() == [40, 60]
    for operator, row in zip((coarse, finer), as_complex(found.to_numpy()), strict=True):
        members = site_fingerprints(operator, DEEP, LOADS, water_vapour=VAPOUR).admittance.to_numpy()
        np.testing.assert_allclose(row, as_complex(members).mean(axis=0), rtol=1e-10)


def test_footprints_on_the_cells_of_the_maps_give_the_same_admittance(coarse: SeaLevelOperator) -> None:
    # the built-in loads are even within cells of one degree, so that nothing is lost
    prints = site_footprints(coarse, DEEP)
    maps = footprint_maps(coarse, prints)
    require(maps, FOOTPRINTS)
    area = EARTH_RADIUS**2 * np.radians(1.0) * np.diff(np.sin(np.radians(np.arange(-90.0, 90.5))))[:, None]
    turned = np.roll(LOADS[1].values, 180, axis=1)  # the loads begin at the date line, the maps at Greenwich
    height = np.tensordot(maps.footprint.to_numpy(), turned * area, 2)
    height = height + maps.constant.to_numpy() * VAPOUR
    mean = -(np.sum(turned * area) + VAPOUR) / (coarse.sea_water_density * coarse.ocean_area_m2)
    expected = as_complex(site_fingerprints(coarse, DEEP, LOADS[1:], water_vapour=VAPOUR).admittance.to_numpy())[0]
    np.testing.assert_allclose(height / mean, expected, rtol=1e-9)


def test_rotational_feedback_is_in_maps_and_degrees(coarse: SeaLevelOperator, love) -> None:
    rotation = prepare_rotation(coarse, love)
    sites = [Site("cell", 42.5, 268.5)]
    turned = as_complex(site_fingerprints(coarse, sites, LOADS, rotation=rotation).admittance.to_numpy())
    maps = as_complex(admittance_maps(coarse, LOADS, rotation=rotation).map_admittance.to_numpy())
    np.testing.assert_allclose(at(maps, 42.5, 268.5), turned[:, 0], rtol=0, atol=1e-10)
    mean = as_complex(admittance_by_degree([(coarse, rotation)], sites, LOADS).to_numpy())[0]
    np.testing.assert_allclose(mean, turned.mean(axis=0), rtol=0, atol=1e-10)
    # control: it does something there
    still = as_complex(site_fingerprints(coarse, sites, LOADS).admittance.to_numpy())
    assert np.abs(turned - still).min() > 1e-3


def test_smooth_footprints_are_amplitude_ratios_without_ripples(operator: SeaLevelOperator) -> None:
    prints = site_footprints(operator, DEEP[:1])
    maps = footprint_maps(operator, prints)
    sharp = -operator.sea_water_density * operator.ocean_area_m2 * maps.footprint[0]
    smooth = maps.footprint_ratio[0]
    far = {"lat": slice(20.0, 60.0), "lon": slice(0.0, 60.0)}
    # far from the site both are the same but for the ripples of the truncated sum
    assert float(abs(sharp - smooth).sel(far).max()) < 0.1
    steps = [float(abs(field.sel(far).diff("lat", 2)).max()) for field in (sharp, smooth)]
    assert steps[1] < 0.05 * steps[0]  # what is left is the bend of the field itself
    # the kernel keeps the mean over the sphere
    area = np.cos(np.radians(maps.lat))
    means = [float((field * area).mean() / area.mean()) for field in (sharp, smooth)]
    assert means[1] == pytest.approx(means[0], abs=1e-3)


def test_any_regular_grid_holds_the_values_at_its_points(coarse: SeaLevelOperator, rng: np.random.Generator) -> None:
    coefficients = coarse.grid.analyse(rng.normal(size=(2, *coarse.cells.shape)))
    latitude, longitude = np.array([-90.0, -33.3, 89.9]), np.arange(-170.0, 190.0, 45.0)  # fewer columns than orders
    fields = coarse.grid.synthesise_regular(coefficients, latitude, longitude)
    places = np.repeat(latitude, longitude.size), np.tile(longitude, latitude.size)
    expected = coarse.grid.synthesise_at(coefficients, *places).reshape(2, 3, 8)
    np.testing.assert_allclose(fields, expected, rtol=0, atol=1e-11)


def test_interpolation_goes_on_beyond_the_date_line_and_the_poles() -> None:
    # a plane through the centre of the sphere is smooth everywhere, poles included
    latitude, longitude = np.radians(MAP_LATITUDE_DEG)[:, None], np.radians(MAP_LONGITUDE_DEG)
    plane = np.cos(latitude) * np.exp(1j * longitude) + 0.3 * np.sin(latitude)
    north, east = np.array([89.9, -89.99, 90.0, 12.3, 12.3, -40.2]), np.array([10.0, -120.0, 0.0, 359.99, -0.01, 180.0])
    exact = np.cos(np.radians(north)) * np.exp(1j * np.radians(east)) + 0.3 * np.sin(np.radians(north))
    np.testing.assert_allclose(value_on_map(plane + 0j, north, east), exact, rtol=0, atol=2e-4)


def test_what_moves_no_water_is_refused(coarse: SeaLevelOperator) -> None:
    with pytest.raises(InputError, match="no member"):
        admittance_maps(coarse, [])
    nothing = LoadPattern("dry", MAP_LATITUDE_DEG, MAP_LONGITUDE_DEG, np.zeros((180, 360), dtype=complex))
    with pytest.raises(InputError, match="dry: it leaves the ocean mean as it is"):
        admittance_by_degree([(coarse, None)], DEEP, [nothing])
