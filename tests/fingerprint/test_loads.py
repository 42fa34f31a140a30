import numpy as np
import pytest

from massfit.constants import PASCAL_PER_HPA, STANDARD_GRAVITY, TROPICAL_YEAR_DAYS
from massfit.errors import InputError
from massfit.fingerprint.admittance import water_vapour_phasor
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.loads import BUILTIN_NAMES, builtin_loads
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.pattern import LoadPattern
from massfit.phasor import peak_days

LOADS = builtin_loads()


def mass_over(load: LoadPattern, south: float, north: float, west: float, east: float) -> complex:
    area = CellGrid.from_centres(load.latitude_deg, load.longitude_deg).cell_area_m2
    rows = (load.latitude_deg > south) & (load.latitude_deg < north)
    columns = (load.longitude_deg > west) & (load.longitude_deg < east)
    return complex(np.sum((load.values * area)[np.ix_(rows, columns)]))


@pytest.mark.parametrize("load", LOADS, ids=lambda load: load.name)
def test_the_ocean_takes_up_what_is_observed_of_it(load: LoadPattern) -> None:
    # Chambers, Wahr & Nerem (2004): about 8.5 mm (0.83 hPa), early to mid October; an ensemble spreads around it
    water = -mass_over(load, -90, 90, -180, 180) - water_vapour_phasor(0.65e15, "07-15", 2015)
    pressure_hpa = abs(water) * STANDARD_GRAVITY / OceanFunction.builtin().area_m2 / PASCAL_PER_HPA
    assert 0.6 < pressure_hpa < 1.1
    assert 263 < peak_days(water) < 303  # 20 September to 30 October


@pytest.mark.parametrize("load", LOADS, ids=lambda load: load.name)
def test_seasons_of_well_known_regions(load: LoadPattern) -> None:
    # months as in Schmidt et al. (2006) and Tapley et al. (2004): Amazon April to June, monsoon Asia September,
    # Siberian and European snow March to April
    amazon = peak_days(mass_over(load, -15, 0, -70, -52))
    asia = peak_days(mass_over(load, 12, 30, 75, 108))
    snow = peak_days(mass_over(load, 50, 70, 25, 100))
    assert 91 < amazon < 151
    assert 240 < asia < 290
    assert 60 < snow < 120


def test_nothing_lies_on_the_ocean() -> None:
    # the share of land in a cell bounds what the cell holds; cells without land hold nothing
    ocean = OceanFunction.builtin()
    for load in LOADS:
        cells = CellGrid.from_centres(load.latitude_deg, load.longitude_deg)
        land = 1.0 - regrid(ocean.fraction, ocean.cells, cells)
        assert np.all(np.abs(load.values) <= land * 600.0 + 1e-9)


def test_members_differ_in_pattern_not_only_in_size() -> None:
    assert len(LOADS) >= 5
    assert len(set(BUILTIN_NAMES)) == len(LOADS)
    unit = [load.values.ravel() / np.linalg.norm(load.values) for load in LOADS]
    for i, first in enumerate(unit):
        for second in unit[i + 1 :]:
            assert abs(np.vdot(first, second)) < 0.9995


def test_names_are_taken_in_order_and_once() -> None:
    assert [p.name for p in builtin_loads(("wide-basins", "nominal", "wide-basins"))] == ["wide-basins", "nominal"]
    assert [p.name for p in builtin_loads(("all", "nominal"))] == list(BUILTIN_NAMES)


def test_every_unknown_name_is_reported_with_the_nearest() -> None:
    with pytest.raises(InputError) as caught:
        builtin_loads(("snow-ritch", "nominal", "zzz"))
    assert [fault.name for fault in caught.value.faults] == ["snow-ritch", "zzz"]
    assert "'snow-rich'" in caught.value.faults[0].action


def test_a_delay_is_a_delay() -> None:
    nominal, slow = builtin_loads(("nominal", "slow-rivers"))
    box = (-10, 0, -70, -55)
    delay = (np.angle(mass_over(slow, *box) / mass_over(nominal, *box))) * TROPICAL_YEAR_DAYS / (2 * np.pi)
    assert delay == pytest.approx(15.0, abs=0.5)
