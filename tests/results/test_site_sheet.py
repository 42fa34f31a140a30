"""What the figure of a site shows is what the run found."""

import numpy as np
import pytest

from massfit.constants import PASCAL_PER_HPA
from massfit.phasor import annual_basis, days_since
from massfit.results.finished import FinishedRun
from massfit.results.site_sheet import SiteSheet, site_sheets


@pytest.fixture(scope="module")
def sheets(judged: FinishedRun) -> list[SiteSheet]:
    return site_sheets(judged)


def test_there_is_a_sheet_a_site_in_their_order(sheets: list[SiteSheet], judged: FinishedRun) -> None:
    assert [sheet.site for sheet in sheets] == [site["id"] for site in judged.summary["sites"]]


def test_record_less_corrections_and_drift_is_what_remains(sheets: list[SiteSheet]) -> None:
    # the sum of everything drawn, up to the levels, which each panel puts where it likes
    for sheet in sheets:
        for curve in sheet.deployments:
            used = np.isfinite(curve.drift)
            place = np.searchsorted(sheet.correction_time, curve.time[used])
            taken = np.sum([series[place] for series in sheet.corrections.values()], axis=0)
            left = curve.pressure[used] - curve.drift[used] - taken
            own = sheet.reduced[np.searchsorted(sheet.reduced_time, curve.time[used])]
            # where recorders overlap the day of the other one may be found: only single ones are compared
            if len(sheet.deployments) == 1 or len(np.unique(sheet.reduced_time)) == len(sheet.reduced_time):
                np.testing.assert_allclose(left - left.mean(), own - own.mean(), atol=1e-6)


def test_the_annual_cycle_drawn_is_the_phasor(sheets: list[SiteSheet], judged: FinishedRun) -> None:
    year = judged.summary["reference_year"]
    for sheet in sheets:
        fitted = np.linalg.lstsq(annual_basis(days_since(sheet.reduced_time, year)), sheet.annual, rcond=None)[0]
        np.testing.assert_allclose(fitted, sheet.phasor, atol=1e-9)


def test_the_walk_goes_from_the_record_to_the_site(sheets: list[SiteSheet]) -> None:
    for sheet in sheets:
        assert sheet.walk[0][0] == "record"
        np.testing.assert_allclose(sheet.walk[-1][1], sheet.phasor, atol=1e-8)
        assert len(sheet.walk) == 1 + len(sheet.corrections)


def test_the_spectrum_lies_in_its_band_mostly(sheets: list[SiteSheet]) -> None:
    # the noise was invented outside the forms fitted, so that more than 1 in 20 may lie outside, but not half
    inside = np.concatenate(
        [
            (sheet.spectrum.density > sheet.spectrum.low) & (sheet.spectrum.density < sheet.spectrum.high)
            for sheet in sheets
            if sheet.spectrum is not None
        ]
    )
    assert inside.size > 40
    assert inside.mean() > 0.6


def test_missing_days_are_those_without_a_value(sheets: list[SiteSheet], judged: FinishedRun) -> None:
    for sheet, site in zip(sheets, judged.summary["sites"], strict=True):
        spans = [curve.time[[0, -1]].astype("datetime64[D]") for curve in sheet.deployments]
        days = np.unique(np.concatenate([np.arange(first, last + 1) for first, last in spans]))
        assert site["days"] + len(sheet.missing) >= len(days)
        assert not np.isin(sheet.missing, sheet.reduced_time.astype("datetime64[D]")).all() or not len(sheet.missing)


def test_facts_name_drift_and_noise(sheets: list[SiteSheet], judged: FinishedRun) -> None:
    for sheet, site in zip(sheets, judged.summary["sites"], strict=True):
        facts = dict(sheet.facts)
        assert facts["subtracted"] == ", ".join(site["models"])
        assert f"white {site['noise']['white_hpa'][0][0]:.2f}" in facts["noise"] or "to" in facts["noise"]
        slope = site["drift"][0]["slope_hpa_per_year"][0]
        assert f"slope {slope:.2f}" in facts["recorder 1"]


def test_reduced_sd_is_that_of_the_series_drawn(sheets: list[SiteSheet], judged: FinishedRun) -> None:
    for sheet, site in zip(sheets, judged.summary["sites"], strict=True):
        # besides the annual cycle the fit takes a semi-annual one: the rest is a little less
        assert site["reduced_sd_hpa"] <= np.std(sheet.reduced - sheet.annual) * 1.02
        assert site["reduced_sd_hpa"] * PASCAL_PER_HPA > 1.0
