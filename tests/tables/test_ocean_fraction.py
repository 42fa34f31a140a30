"""The shipped ocean fraction against the mask it was made from, and against geography."""

import importlib.util
from pathlib import Path

import numpy as np
import pytest

from massfit.fingerprint.ocean import OceanFunction
from massfit.tables.ocean_fraction import FINE_CELLS, read_ocean_fraction

SCRIPT = Path(__file__).with_name("make_ocean_fraction.py")


def maker():
    spec = importlib.util.spec_from_file_location("make_ocean_fraction", SCRIPT)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def test_northern_strips_are_those_of_the_mask() -> None:
    # 90 N to 45 N; no enclosed water is dropped there
    strips = np.stack(list(maker().strip_counts(180)))
    assert 0 < strips.mean() < FINE_CELLS
    np.testing.assert_array_equal(np.round(read_ocean_fraction()[:180] * FINE_CELLS), strips)


@pytest.mark.slow
def test_the_whole_table_is_made_by_the_script() -> None:
    make = maker()
    counts = np.stack(list(make.strip_counts()))
    opened = make.open_ocean(counts)
    np.testing.assert_array_equal(np.round(read_ocean_fraction() * FINE_CELLS), opened)
    assert np.count_nonzero(opened != counts) == 1


def test_enclosed_water_becomes_land_but_the_date_line_is_no_wall() -> None:
    count = np.zeros((5, 1440), dtype=np.uint16)
    count[:, :3] = count[:, -2:] = 900  # one ocean on both sides of the date line
    count[2, 700] = 900  # a lake
    opened = maker().open_ocean(count)
    assert opened[2, 700] == 0
    assert np.all(opened[:, :3] == 900)
    assert np.all(opened[:, -2:] == 900)


def test_the_file_is_small() -> None:
    table = Path(maker().TARGET)
    assert table.stat().st_size < 300_000


# latitude, longitude of the middle of well-known waters (any atlas)
OCEAN = {
    "Ross Ice Shelf": (-81.0, -175.0),
    "Ronne Ice Shelf": (-79.0, -60.0),
    "Amery Ice Shelf": (-70.5, 71.0),
    "north pole": (89.9, 0.0),
    "Black Sea": (43.0, 34.0),
    "Hudson Bay": (60.0, -85.0),
    "Baltic Sea": (58.0, 20.0),
    "Red Sea": (20.0, 38.5),
}
LAND = {
    "Caspian Sea": (42.0, 50.5),
    "Aral Sea": (45.0, 60.0),
    "Lake Superior": (47.5, -88.0),
    "Lake Victoria": (-1.0, 33.0),
    "Lake Baikal": (53.5, 108.0),
    "Lake Ladoga": (61.0, 31.5),
    "south pole": (-89.9, 0.0),
    "Greenland": (72.0, -40.0),
}


@pytest.mark.parametrize("name", OCEAN)
def test_seas_and_ice_shelves_are_ocean(name: str) -> None:
    assert OceanFunction.builtin().fraction_at(*OCEAN[name]) > 0.99


@pytest.mark.parametrize("name", LAND)
def test_lakes_and_enclosed_seas_are_land(name: str) -> None:
    assert OceanFunction.builtin().fraction_at(*LAND[name]) == 0.0


def test_area_of_the_ocean() -> None:
    # 3.619e14 m2 (Eakins & Sharman 2010, from memory), from another elevation model
    area = OceanFunction.builtin().area_m2
    assert area == pytest.approx(3.619e14, rel=0.005)
    assert area == pytest.approx(3.6263e14, rel=1e-4)  # the value the documentation states
