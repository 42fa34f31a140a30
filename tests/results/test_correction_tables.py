"""The corrections of a run add up: record = phasor of the site + what was subtracted."""

import numpy as np
import pytest
import xarray as xr

from massfit.constants import PASCAL_PER_HPA
from massfit.corrections.phasors import CorrectionPhasor, correction_phasors
from massfit.phasor import annual_basis, days_since
from massfit.results.correction_tables import correction_table, with_corrections
from massfit.results.datasets import reduced_records
from massfit.results.estimate import Estimate


def test_every_site_adds_up_to_its_record(run: Estimate) -> None:
    # invariant: one linear operator acts on the record and on every series that is taken off it
    for site in run.summary["sites"]:
        record = next(row for row in site["corrections"] if row["series"] == "record")
        taken = np.sum([row["phasor_hpa"] for row in site["corrections"] if row["summand"]], axis=0)
        np.testing.assert_allclose(np.array(site["phasor_hpa"]) + taken, record["phasor_hpa"], atol=1e-8)
        assert np.hypot(*taken) > 0.05  # the control: without them it does not add up


def test_the_dataset_says_the_same(run: Estimate) -> None:
    data = run.site_phasors
    assert data["correction_phasor"].dims == ("site", "correction", "component")
    for place, site in enumerate(run.summary["sites"]):
        own = data["correction_phasor"].isel(site=place)
        answer = data["phasor"].isel(site=place).weighted(data["weight"].isel(site=place)).mean("part").mean("model")
        summed = own.where(data["summand"] == 1, 0.0).sum("correction")
        np.testing.assert_allclose(answer + summed, own.sel(correction="record"), atol=1e-6)
        for row in site["corrections"]:
            label = row["series"] if row["model"] in (None, "mean") else f"{row['series']}: {row['model']}"
            np.testing.assert_allclose(own.sel(correction=label) / PASCAL_PER_HPA, row["phasor_hpa"], atol=1e-12)


def test_every_series_of_a_run_is_listed(run: Estimate) -> None:
    for site in run.summary["sites"]:
        names = {(row["series"], row["model"]) for row in site["corrections"]}
        models = {("circulation", name) for name in (*site["models"], "mean")}
        tides = {("record", None), ("long_period_tides", None), ("pole_tide", None), ("ocean_mean_atmosphere", None)}
        # of the invented models one is a field, and one comes with its own ocean mean
        assert names >= models | tides
        assert {name for name, _ in names} >= {"self_attraction", "own_ocean_mean"}
        mean = np.array([row["phasor_hpa"] for row in site["corrections"] if row["model"] == "mean"])
        single = [
            row["phasor_hpa"]
            for row in site["corrections"]
            if row["series"] == "circulation" and row["model"] in site["models"]
        ]
        np.testing.assert_allclose(np.mean(single, axis=0), mean[0], atol=1e-9)


def test_the_parts_of_the_models_are_kept_as_series(run: Estimate) -> None:
    records = reduced_records(run.reductions)
    assert "local_air_pressure" not in records  # no model of this network asks for it
    for name in ("self_attraction", "own_ocean_mean"):
        assert records[name].dims == ("model", "obs")
        has = np.isfinite(records[name]).any("obs")
        labels = set(run.site_phasors["correction"].values)
        assert {f"{name}: {model}" for model in records["model"].values[has]} == {
            label for label in labels if label.startswith(name)
        }


def test_a_phasor_is_about_what_least_squares_finds_in_the_series(run: Estimate) -> None:
    # a slow twin of another kind: plain least squares beside level, slope and half-year line
    for reduction in run.reductions:
        days = days_since(reduction.corrections["time"].values[reduction.used], 2016)
        columns = np.column_stack([annual_basis(days), annual_basis(days, 2), np.ones_like(days), days])
        for name in ("pole_tide", "ocean_mean_atmosphere"):
            series = reduction.corrections[name].values[reduction.used]
            plain = np.linalg.lstsq(columns, series, rcond=None)[0][:2]
            own = next(each.phasor for each in reduction.phasors if each.series == name)
            assert np.hypot(*(own - plain)) < 0.15 * np.hypot(*own) + 1.0, (reduction.site.id, name)


def test_zeros_are_left_out_and_gaps_are_missing(run: Estimate) -> None:
    zero = CorrectionPhasor("pole_tide", None, np.zeros(2))
    assert correction_table([zero]) == []
    bare = run.site_phasors.drop_vars(["correction_phasor", "summand", "correction"])
    assert "correction_phasor" not in with_corrections(bare, [])
    some = with_corrections(bare, run.reductions[:1])
    assert np.isfinite(some["correction_phasor"][0]).all()
    assert np.isnan(some["correction_phasor"][1:]).all()


@pytest.mark.parametrize(("series", "model", "summand"), [
    ("record", None, False),
    ("pole_tide", None, True),
    ("circulation", "mean", True),
    ("circulation", "one", False),
    ("self_attraction", "one", False),
])  # fmt: skip
def test_summands(series: str, model: str | None, summand: bool) -> None:
    assert CorrectionPhasor(series, model, np.zeros(2)).summand is summand


def test_calibrations_are_a_summand_of_their_own() -> None:
    # the operator acts on record and readings: L(record) + L(readings) = phasor + L(tides) + L(models)
    zero = np.zeros(3)
    data = xr.Dataset(
        {
            **dict.fromkeys(("long_period_tides", "pole_tide", "ocean_mean_atmosphere"), ("time", zero)),
            "circulation": (("model", "time"), np.zeros((1, 3))),
            "present": ("model", [1]),
        },
        {"time": np.arange(3), "model": ["one"]},
    )
    companions = np.array([[90.0, 10.0], [5.0, 1.0], [2.0, 0.0], [-3.0, 4.0], [20.0, -6.0]])
    found = correction_phasors(data, companions, np.array([[60.0, 5.0]]), calibrated=True)
    row = next(each for each in found if each.series == "calibrations")
    assert row.summand
    np.testing.assert_allclose(row.phasor, [90.0 - 60.0 - 24.0, 10.0 - 5.0 + 1.0])
    taken = np.sum([each.phasor for each in found if each.summand], axis=0)
    np.testing.assert_allclose(np.array([60.0, 5.0]) + taken, companions[0])
    # without any there is no such row
    assert all(each.series != "calibrations" for each in correction_phasors(data, companions, np.array([[60.0, 5.0]])))
