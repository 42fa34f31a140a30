"""The calendar of the days that were used."""

import numpy as np
import pytest
import xarray as xr

from massfit.results.coverage import monthly_coverage
from massfit.results.estimate import Estimate
from massfit.results.finished import FinishedRun, finished_run


def records(*deployments: tuple[str, str, int, slice]) -> FinishedRun:
    """Daily records: site, first day, days, and which of them were not used."""
    parts = []
    for site, first, days, unused in deployments:
        reduced = np.zeros(days)
        reduced[unused] = np.nan
        parts.append((site, np.datetime64(f"{first}T12", "ns") + np.arange(days) * np.timedelta64(1, "D"), reduced))
    dataset = xr.Dataset(
        {
            "reduced": ("obs", np.concatenate([reduced for *_, reduced in parts])),
            "row_size": ("deployment", [len(time) for _, time, _ in parts]),
        },
        coords={
            "time": ("obs", np.concatenate([time for _, time, _ in parts])),
            "site": ("deployment", [site for site, *_ in parts]),
        },
    )
    return FinishedRun({}, {}, {"reduced_records.nc": dataset})


def test_the_share_of_every_month_is_counted() -> None:
    # January has 31 days, February of a leap year 29
    found = monthly_coverage(records(("A", "2016-01-11", 40, slice(21, 31)), ("B", "2016-03-01", 31, slice(0, 31))))
    assert [str(month)[:7] for month in found["month"].values] == ["2016-01", "2016-02", "2016-03"]
    expected = [[21 / 31, 9 / 29, np.nan], [np.nan, np.nan, 0.0]]
    assert found["share"].values == pytest.approx(np.array(expected), nan_ok=True)
    assert found["site_of_deployment"].values.tolist() == ["A", "B"]
    assert found["deployed"].values.astype("datetime64[D]").astype(str).tolist() == ["2016-01-11", "2016-03-01"]


def test_days_on_which_two_recorders_overlap_count_once() -> None:
    found = monthly_coverage(records(("A", "2016-01-01", 20, slice(0, 0)), ("A", "2016-01-11", 21, slice(0, 0))))
    assert found["share"].values.tolist() == [[1.0]]
    assert found.sizes["deployment"] == 2


def test_a_run_without_records_has_an_empty_calendar() -> None:
    assert dict(monthly_coverage(FinishedRun({}, {}, {})).sizes) == {"site": 0, "month": 0, "deployment": 0}


def test_the_days_of_a_run_add_up(run: Estimate) -> None:
    found = monthly_coverage(finished_run(run, command="test"))
    months = found["month"].values.astype("datetime64[M]")
    lengths = ((months + 1).astype("datetime64[D]") - months.astype("datetime64[D]")).astype(int)
    days = np.nansum(found["share"].values * lengths, axis=1)
    assert days == pytest.approx([site["days"] for site in run.summary["sites"]])
