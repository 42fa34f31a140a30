"""Invented fields of ocean models: the liveliness they were made with is what a screening finds."""

import numpy as np

from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.pipeline.screen import screen_sea_floor
from massfit.screening.field import ModelField
from massfit.simulate.sea_floor import invented_sea_floor, liveliness


def test_a_screening_finds_the_liveliness_of_the_eddies() -> None:
    fields = invented_sea_floor(3, years=4, spacing_deg=5.0)
    found = screen_sea_floor([ModelField(name, field, "subtract") for name, field in fields.items()])
    ocean, latitude = OceanFunction.builtin(), found["lat"].values
    land = regrid(ocean.fraction, ocean.cells, CellGrid.from_centres(latitude, found["lon"].values)) < 0.5
    ratio = (found["sd"].values / liveliness(land, latitude))[~land]
    # the mean of some sixty eddies that is taken off, and four years of 20-day memory: 5 % each
    assert abs(np.median(ratio) - 1.0) < 0.1
    assert np.all(np.abs(ratio - 1.0) < 0.5)
    assert np.nanmax(found["disagreement"]) > 4.0 * np.nanmin(found["disagreement"])


def test_the_same_seed_gives_the_same_fields() -> None:
    first, second, other = (invented_sea_floor(seed, years=3, spacing_deg=30.0)["south"] for seed in (1, 1, 2))
    assert first.identical(second)
    assert not first.identical(other)
