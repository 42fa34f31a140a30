"""Phasors of what was subtracted, coverage, and the spread of the fingerprint, against closed forms."""

import numpy as np
import pytest
import xarray as xr

from massfit.phasor import annual_basis, as_components, days_since
from massfit.results.estimate import Estimate
from massfit.results.site_facts import annual_phasor, coverage, member_table, subtracted_phasors

TIME = np.datetime64("2014-03-01T12", "ns") + np.arange(900) * np.timedelta64(1, "D")
BASIS = annual_basis(days_since(TIME, 2015))


def corrections(present: tuple[int, ...]) -> xr.Dataset:
    rng = np.random.default_rng(3)
    cycles = np.array([[30.0, -10.0], [10.0, 30.0]]) @ BASIS.T
    cycles[1, :100] = np.nan
    zero = np.zeros(TIME.size)
    return xr.Dataset(
        {
            "long_period_tides": ("time", 1e-9 * rng.normal(size=TIME.size) + BASIS @ [5.0, 6.0]),
            "pole_tide": ("time", zero),
            "ocean_mean_atmosphere": ("time", 70.0 + 0.05 * np.arange(TIME.size) + BASIS @ [-40.0, 20.0]),
            "circulation": (("model", "time"), cycles),
            "present": ("model", np.array(present)),
        },
        {"time": TIME, "model": ["one", "two"]},
    )


def test_each_series_gives_its_own_phasor_and_zeros_none() -> None:
    used = np.arange(TIME.size) >= 100
    found = subtracted_phasors(corrections((1, 1)), used, reference_year=2015)
    assert [(row["series"], row["model"]) for row in found] == [
        ("long_period_tides", None),
        ("ocean_mean_atmosphere", None),
        ("circulation", "mean"),
        ("circulation", "one"),
        ("circulation", "two"),
    ]
    expected = [[0.05, 0.06], [-0.4, 0.2], [0.2, 0.1], [0.3, -0.1], [0.1, 0.3]]
    assert np.array([row["phasor_hpa"] for row in found]) == pytest.approx(np.array(expected), abs=1e-9)


def test_a_missing_model_is_not_in_the_mean() -> None:
    found = subtracted_phasors(corrections((1, 0)), np.ones(TIME.size, dtype=bool), reference_year=2015)
    assert [(row["series"], row["model"]) for row in found][2:] == [("circulation", "mean")]
    assert found[-1]["phasor_hpa"] == pytest.approx([0.3, -0.1])


def test_a_slope_and_a_semi_annual_cycle_do_not_leak() -> None:
    days = np.arange(400.0)  # little over a year, where both would leak
    series = 0.3 * days + annual_basis(days, 2) @ [4.0, -2.0] + annual_basis(days) @ [1.0, -0.5]
    assert annual_phasor(days, series) == pytest.approx([1.0, -0.5], abs=1e-9)
    # the control: with neither beside it the annual cycle is wrong by more than half of itself
    alone = np.linalg.lstsq(annual_basis(days), series - series.mean(), rcond=None)[0]
    assert np.hypot(*(alone - [1.0, -0.5])) > 0.5


def test_coverage_counts_days_between_first_and_last() -> None:
    used = np.zeros(TIME.size, dtype=bool)
    used[[10, 11, 19]] = True
    assert coverage(TIME, used) == {"first_day": "2014-03-11", "last_day": "2014-03-20", "coverage": 0.3}


def test_spread_of_members() -> None:
    # a quarter turn of a year is 91.31 days
    members = np.array([[1.0 + 0.0j, 1j], [1.2 + 0.0j, 1j]])
    fingerprints = xr.Dataset(
        {"admittance": (("member", "site", "component"), as_components(members))}, {"site": ["A", "B"]}
    )
    second, first = member_table(fingerprints, ["B", "A"])
    assert first["ratio"] == pytest.approx(1.1)
    assert first["ratio_range"] == pytest.approx([1.0, 1.2])
    assert first["spread"] == pytest.approx(0.2 / np.sqrt(2.0))
    assert second["delay_range_days"] == pytest.approx([91.31055, 91.31055])
    assert second["spread"] == pytest.approx(0.0)
    assert member_table(fingerprints.isel(member=[0]), ["A"])[0]["spread"] is None


def test_a_run_holds_them(run: Estimate) -> None:
    for site, reduction in zip(run.summary["sites"], run.reductions, strict=True):
        names = {(row["series"], row["model"]) for row in site["corrections"]}
        models = {("circulation", name) for name in (*site["models"], "mean")}
        assert names >= models | {("ocean_mean_atmosphere", None)}
        assert site["first_day"] == str(reduction.corrections["time"].values[reduction.used][0])[:10]
        assert 0.5 < site["coverage"] <= 1.0
