"""Several models: root mean squares, disagreement, and the factor for optimistic models."""

import numpy as np
import pytest
from screening.invented_ocean import daily, eddying_ocean

from massfit.contracts import QUIETNESS_MAP, require
from massfit.errors import InputError
from massfit.pipeline.screen import screen_sea_floor
from massfit.screening.ensemble import inflation
from massfit.screening.field import ModelField


def test_a_place_that_is_quieter_stays_so() -> None:
    sd = np.geomspace(1.0, 1e4, 400)
    for factor in (1.0, 1.5, 3.0):
        assert np.all(np.diff(sd * inflation(sd, factor, 100.0)) > 0.0)
    assert np.allclose(inflation(sd[sd < 100.0], 3.0, 100.0), 3.0)
    assert np.all(inflation(sd, 1.0, 100.0) == 1.0)


def test_the_models_are_joined() -> None:
    first, second = (eddying_ocean(seed, mean_removed=True) for seed in (1, 2))
    second[:, 9, 20] = np.nan  # one cell is dry in one model
    west = second.assign_coords(lon=(second["lon"] + 180.0) % 360.0 - 180.0).sortby("lon")[:, ::-1]
    fields = [ModelField("north", first, "removed"), ModelField("south", west, "removed")]
    found = screen_sea_floor(fields, record_years=[1.0, 3.0], inflation_factor=2.0, quiet_sd_hpa=0.8)
    require(found, QUIETNESS_MAP)
    alone = [screen_sea_floor([field], record_years=[1.0, 3.0]) for field in fields]
    assert np.array_equal(alone[1]["lon"], found["lon"])  # the same order, whatever the file has
    both = np.sqrt((alone[0]["sd"] ** 2 + alone[1]["sd"] ** 2) / 2.0).values
    known = np.isfinite(both)
    assert np.allclose(found["sd"].values[known], both[known], rtol=1e-14)
    assert np.allclose(found["sd"].values[9, 20], alone[0]["sd"].values[9, 20])
    assert found["models"].values[9, 20] == 1
    assert np.isnan(found["disagreement"].values[9, 20])
    # the sample standard deviation of two is their distance over the root of two, in each component
    apart = (alone[0]["dynamic_phasor"] - alone[1]["dynamic_phasor"]).values
    expected = np.sqrt((apart**2).sum(axis=-1) / 2.0 / 2.0)
    assert np.allclose(found["disagreement"].values[known], expected[known], rtol=1e-12)
    ratio = (found["expected_annual_sd"] / found["annual_sd"]).values[1][known]
    assert np.allclose(ratio, inflation(both, 2.0, 80.0)[known])


def test_models_of_other_years_are_screened_together() -> None:
    later = eddying_ocean(2, time=daily("2013-01-01", "2019-01-01"), mean_removed=True)
    fields = [ModelField("north", eddying_ocean(mean_removed=True), "removed"), ModelField("south", later, "removed")]
    assert screen_sea_floor(fields).attrs["reference_year"] == 2011


def test_every_fault_of_every_field_is_told_at_once() -> None:
    pressure = eddying_ocean()
    coarse = eddying_ocean(spacing=15.0)
    unmasked = pressure.fillna(0.0)
    fields = [
        ModelField("north", pressure, "subtract"),
        ModelField("coarse", coarse, "subtract"),
        ModelField("flooded", unmasked, "subtract"),
        ModelField("brief", pressure[:100], "subtract"),
        ModelField("north", pressure, "subtract"),
    ]
    with pytest.raises(InputError) as caught:
        screen_sea_floor(fields)
    assert str(caught.value).splitlines() == [
        "north: name: several models have this name. Must be unique. Give NAME=PATH.",
        "flooded: pressure: 100 % of the land has values: the land is not masked. "
        "Land must be missing: NaN, or the _FillValue of the variable. Mask the land: its cells would be the quietest.",
        "brief: time: the field is 1.37 years long. Must be 3 years or more. "
        "Give a longer run; ten years or more tell much better.",
        "coarse: lat, lon: the grid is 12 x 24 cells, -82.5 to 82.5 north, 7.5 to 352.5 east. "
        "Must be that of the first model, north: 18 x 36 cells, -85 to 85 north, 5 to 355 east. "
        "Interpolate the models to one grid, or screen them one by one.",
    ]


def test_a_mean_that_was_not_removed_and_a_wrong_unit_are_refused() -> None:
    kept, small = eddying_ocean(), eddying_ocean(mean_removed=True) * 1e-4
    with pytest.raises(InputError) as caught:
        screen_sea_floor([ModelField("north", kept, "removed"), ModelField("small", small, "removed")])
    first, second = str(caught.value).splitlines()
    assert first.startswith("north: ocean mean: its ocean mean is said to be removed, but has an annual cycle of 0.9")
    assert first.endswith("Must be below 0.02 hPa. Give --ocean-mean north=subtract.")
    assert second == (
        "small: units: its bottom pressure varies by 0.000279 hPa (1 sd) in the typical cell. "
        "The ocean varies by a few hPa. Correct the units in its files."
    )


def test_no_choice_of_the_ocean_mean_is_a_fault() -> None:
    with pytest.raises(InputError) as caught:
        ModelField("north", eddying_ocean(), None)  # type: ignore[arg-type]
    assert str(caught.value) == (
        "north: ocean mean: there is no choice for its ocean mean. Must be subtract (the mean over the model's own "
        "ocean is subtracted here) or removed (it was before). Give --ocean-mean subtract for all models, or "
        "--ocean-mean north=removed."
    )
