import numpy as np
import pytest

from massfit.constants import EARTH_RADIUS, STANDARD_GRAVITY
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.phasor import peak_days
from massfit.simulate.clock import Clock, make_clock
from massfit.simulate.loads import draw_water_load, integral, with_total
from massfit.simulate.options import SimulationOptions
from massfit.simulate.world import World, draw_world

OCEAN = OceanFunction.builtin()


@pytest.fixture(scope="module")
def clock() -> Clock:
    return make_clock(SimulationOptions(years=4, sampling="daily"))


@pytest.fixture(scope="module")
def world(clock: Clock) -> World:
    return draw_world(np.random.default_rng(7), OCEAN, clock)


def test_water_keeps_its_mass(world: World) -> None:
    # land + vapour + ocean = 0
    ocean = world.annual * OCEAN.area_m2 / STANDARD_GRAVITY
    total = integral(world.load) + world.water_vapour + ocean
    assert abs(total) < 1e-10 * abs(ocean)


def test_dry_air_keeps_its_mass(world: World) -> None:
    # weight of all air changes by its water vapour only; the land fraction is brought to the grid of the pattern here
    pattern = world.air_pressure
    cells = CellGrid.from_centres(pattern.latitude_deg, pattern.longitude_deg)
    land = 1.0 - regrid(OCEAN.fraction, OCEAN.cells, cells)
    on_land = np.sum(pattern.values * land * cells.cell_area_m2)
    total = on_land + world.air_annual * OCEAN.area_m2
    assert total == pytest.approx(STANDARD_GRAVITY * world.water_vapour, rel=1e-9)


def test_the_winter_continent_is_heavy(world: World) -> None:
    # Siberia: high pressure in January, by several hPa
    pattern = world.air_pressure
    row = int(np.argmin(np.abs(pattern.latitude_deg - 50.0)))
    column = int(np.argmin(np.abs(pattern.longitude_deg - 95.0)))
    phasor = pattern.values[row, column]
    assert abs(phasor) > 500.0
    assert np.cos((peak_days(phasor) - 8.0) / 58.13) > 0.9


def test_load_lies_on_land(world: World) -> None:
    fraction = regrid(
        OCEAN.fraction,
        OCEAN.cells,
        CellGrid.from_centres(world.load.latitude_deg, world.load.longitude_deg),
    )
    assert np.all(world.load.values[fraction == 1.0] == 0.0)
    assert np.abs(world.load.values).max() < 1000.0  # nowhere a metre of water


def test_the_mean_over_the_period_is_the_target(world: World, clock: Clock) -> None:
    # plain least squares on ocean-mean water over whole years, without noise: the definition of A
    water = world.water(1.0, clock.days)
    angle = 2.0 * np.pi * clock.days / 365.2422
    basis = np.column_stack([np.ones_like(angle), *(f(k * angle) for k in (1, 2) for f in (np.cos, np.sin))])
    fit = np.linalg.lstsq(basis, water, rcond=None)[0]
    assert abs(complex(fit[1], fit[2]) - world.annual) < 1.0  # Pa; year-to-year changes are 5 Pa a component
    assert np.abs(world.year_changes).max() > 1.0


def test_drawn_members_differ_but_are_of_one_kind() -> None:
    # the ocean's answer to unscaled draws is of the observed kind: around 0.8 hPa, September to November
    vapour = 0.65e15 * np.exp(2j * np.pi * 195.0 / 365.2422)
    answers = []
    for seed in range(12):
        load = draw_water_load(OCEAN, np.random.default_rng(seed), name=str(seed), cell_deg=2.0)
        answers.append(-STANDARD_GRAVITY * (integral(load) + vapour) / OCEAN.area_m2)
    assert 60.0 < np.mean(np.abs(answers)) < 110.0
    assert np.all((peak_days(np.array(answers)) > 250.0) & (peak_days(np.array(answers)) < 310.0))
    assert np.std(np.abs(answers)) > 5.0


def test_with_total_sets_the_integral() -> None:
    load = draw_water_load(OCEAN, np.random.default_rng(1), name="x", cell_deg=2.0)
    assert integral(with_total(load, 3e15 - 1e15j)) == pytest.approx(3e15 - 1e15j, rel=1e-12)


def test_integral_of_a_constant_is_the_area_of_the_sphere() -> None:
    load = draw_water_load(OCEAN, np.random.default_rng(1), name="x", cell_deg=2.0)
    ones = type(load)("ones", load.latitude_deg, load.longitude_deg, np.ones(load.values.shape, dtype=complex))
    assert integral(ones).real == pytest.approx(4.0 * np.pi * EARTH_RADIUS**2, rel=1e-12)
