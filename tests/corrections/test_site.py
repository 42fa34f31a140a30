"""The series that are subtracted at one site."""

from dataclasses import replace

import numpy as np
import pytest
import xarray as xr

from massfit.constants import STANDARD_GRAVITY
from massfit.contracts import CORRECTIONS, require
from massfit.corrections.circulation import CirculationAtSites
from massfit.corrections.long_period_tides import zonal_height
from massfit.corrections.pole_tide import observed_wobble
from massfit.corrections.site import site_corrections
from massfit.errors import InputError
from massfit.network import Series
from massfit.site import Site

SITE = Site("A", -11.25, 205.5)
TIME = np.delete(np.arange("2015-01-01T12", "2016-06-01", 24, dtype="datetime64[h]").astype("datetime64[ns]"), [40, 41])
RESPONSES = xr.Dataset(
    {
        "zonal": ("site", [1.0, -5000.0], {"units": "Pa m-1"}),
        "wobble_m1": ("site", [1.0, 2e7], {"units": "Pa rad-1"}),
        "wobble_m2": ("site", [1.0, -3e7], {"units": "Pa rad-1"}),
    },
    coords={"site": ["B", "A"]},
    attrs={"long_period_tides": "equilibrium", "pole_tide": "observed"},
)
AIR = Series(
    "air.csv",
    np.arange("2014-12-01T12", "2016-07-01", 24, dtype="datetime64[h]").astype("datetime64[ns]"),
    np.full(578, 40.0),
)


def at_sites(name: str, time: np.ndarray, value: float) -> CirculationAtSites:
    pressure = np.full((time.size, 2), value)
    pressure[:, 0] = -999.0
    return CirculationAtSites(name, ("B", "A"), time, pressure, np.zeros(2))


def corrections(time: np.ndarray = TIME, **changes) -> xr.Dataset:
    inputs = {"responses": RESPONSES, "atmosphere": AIR, "circulation": (at_sites("calm", AIR.time, 7.0),)}
    return site_corrections(SITE, time, **{**inputs, **changes})


def test_each_series_is_the_one_of_the_site() -> None:
    result = corrections()
    require(result, CORRECTIONS)
    m1, m2, _ = observed_wobble(TIME)
    np.testing.assert_allclose(result["long_period_tides"], -5000.0 * zonal_height(TIME))
    np.testing.assert_allclose(result["pole_tide"], 2e7 * m1 - 3e7 * m2)
    np.testing.assert_array_equal(result["ocean_mean_atmosphere"], np.full(TIME.size, 40.0))
    np.testing.assert_array_equal(result["circulation"], np.full((1, TIME.size), 7.0))
    assert result["present"].values.tolist() == [1]
    assert result.attrs["notes"] == ""


def test_without_atmosphere_or_models() -> None:
    result = corrections(atmosphere=None, circulation=())
    assert not result["ocean_mean_atmosphere"].any()
    assert result["circulation"].shape == (0, TIME.size)


@pytest.mark.parametrize(("covered", "present"), [(0.96, 1), (0.94, 0)])
def test_a_model_below_95_percent_of_the_days_is_missing(covered: float, present: int) -> None:
    short = at_sites("short", TIME[: int(covered * TIME.size)], 3.0)
    result = corrections(circulation=(at_sites("calm", AIR.time, 7.0), short))
    assert result["present"].values.tolist() == [1, present]
    share = float(np.isfinite(result["circulation"][1]).mean())
    assert share == pytest.approx(covered if present else 0.0, abs=0.01)
    assert ("short: covers 94 % of the days of A" in result.attrs["notes"]) is not bool(present)


def test_a_site_without_any_model_is_noted() -> None:
    result = corrections(circulation=(at_sites("calm", AIR.time + np.timedelta64(3650, "D"), 7.0),))
    assert "no circulation model covers A" in result.attrs["notes"]


def test_every_series_that_does_not_cover_the_record_is_named() -> None:
    ahead = TIME + np.timedelta64(100 * 365, "D")
    with pytest.raises(InputError) as caught:
        corrections(ahead)
    assert [fault.name for fault in caught.value.faults] == ["polar motion", "ocean_mean_atmosphere"]
    assert "It runs from 2014-12-01T12:00 to 2016-06-30T12:00" in str(caught.value)
    assert f"does not cover {TIME.size} days of the record of A, first 2114-12-08" in str(caught.value)


def test_no_polar_motion_is_asked_for_without_pole_tide() -> None:
    none = RESPONSES.assign_attrs(pole_tide="none")
    result = corrections(TIME + np.timedelta64(100 * 365, "D"), responses=none, atmosphere=None, circulation=())
    assert not result["pole_tide"].any()


def test_tides_of_a_month_stay_within_their_known_size() -> None:
    # the sum of nine heights bounds them: 0.437 * 21.8 cm * 1/2 at the equator
    bound = 5000.0 * 0.437 * 0.2184
    assert 0.4 * bound < np.abs(corrections()["long_period_tides"]).max() < bound
    assert bound / STANDARD_GRAVITY == pytest.approx(48.7, abs=0.2)  # mm of fresh water


def cut(name: str, days: slice, value: float) -> CirculationAtSites:
    return replace(at_sites(name, TIME[days], value), partial="cut")


def test_a_record_is_cut_to_the_days_of_a_model_where_that_is_asked_for() -> None:
    calm, short = at_sites("calm", AIR.time, 7.0), cut("short", slice(0, 200), 3.0)
    result = corrections(circulation=(calm, short))
    assert result["present"].values.tolist() == [1, 1]
    np.testing.assert_array_equal(np.isfinite(result["circulation"]).sum("time"), [TIME.size, 200])
    assert f"the record is cut to 200 of {TIME.size} days, as asked" in result.attrs["notes"]
    # the control: the same model without the choice is missing
    missing = corrections(circulation=(calm, replace(short, partial="missing")))
    assert missing["present"].values.tolist() == [1, 0]


def test_a_record_is_not_cut_below_what_a_site_needs_and_the_order_does_not_matter() -> None:
    # the two share 60 days: only the fuller one is taken
    early, late = cut("early", slice(0, 250), 3.0), cut("late", slice(190, 450), 4.0)
    for models in ((early, late), (late, early)):
        result = corrections(circulation=models)
        taken = dict(zip(result["model"].values, result["present"].values, strict=True))
        assert taken == {"early": 0, "late": 1}
        assert "the record of A is not cut for it, since 60 days would be left" in result.attrs["notes"]


def test_parts_of_a_model_are_kept_on_the_days_of_the_record() -> None:
    field = replace(at_sites("field", AIR.time, 7.0), parts={"self_attraction": np.full((AIR.time.size, 2), 0.5)})
    result = corrections(circulation=(at_sites("calm", AIR.time, 7.0), field))
    require(result, CORRECTIONS)
    assert np.isnan(result["self_attraction"].sel(model="calm")).all()
    np.testing.assert_array_equal(result["self_attraction"].sel(model="field"), np.full(TIME.size, 0.5))
    assert "own_ocean_mean" not in result


def test_the_distance_to_a_wet_cell_is_handed_on() -> None:
    away = replace(at_sites("away", AIR.time, 7.0), distance_km=np.array([0.0, 123.0]))
    result = corrections(circulation=(away,))
    assert result["distance"].values.tolist() == [123e3]
    assert result.attrs["notes"] == "away: uses the nearest wet cell, 123 km from A"


@pytest.mark.parametrize(
    ("distance_km", "reason"),
    [
        (np.nan, "lost: has no series for A and is left out there"),
        (412.4, "lost: has no wet cell within 300 km of A (the nearest is 412 km away)"),
        (np.inf, "lost: has no wet cell within 300 km of A (there is none at all)"),
        (0.0, "lost: covers 0 % of the days of A and is left out there"),
    ],
    ids=["table", "far", "dry", "other years"],
)
def test_why_a_model_is_missing_is_said(distance_km: float, reason: str) -> None:
    lost = replace(at_sites("lost", AIR.time, np.nan), distance_km=np.array([0.0, distance_km]))
    result = corrections(circulation=(at_sites("calm", AIR.time, 7.0), lost))
    assert result["present"].values.tolist() == [1, 0]
    assert reason in result.attrs["notes"]
