"""The table of other choices on a small network, from records to page."""

import csv
import json
from dataclasses import replace
from pathlib import Path
from typing import Literal

import numpy as np
import pytest

from massfit.network import Network
from massfit.pipeline.estimate import estimate
from massfit.pipeline.save import save_results
from massfit.pipeline.sites import SiteTask
from massfit.pipeline.what_if import other_treatments
from massfit.records.record import DailyRecord
from massfit.report.words.run_text import summary_text
from massfit.results.estimate import Estimate
from massfit.settings import make_settings
from massfit.simulate.network import simulate_network
from massfit.simulate.options import SimulationOptions
from massfit.site import Site


@pytest.fixture(scope="module")
def tiny() -> Network:
    options = SimulationOptions(
        sites=2, years=1.5, models=1, load_members=1, sampling="daily", incidents=False, bad_site=False
    )
    return simulate_network(options, seed=5).network


@pytest.fixture(scope="module")
def asked(tiny: Network) -> Estimate:
    with pytest.MonkeyPatch.context() as patch:
        # runs too short to converge: nothing here looks at the distribution of the draws
        patch.setattr("massfit.posterior.sample.STEPS", 60)
        patch.setattr("massfit.posterior.sample.MAX_STEPS", 60)
        # one choice of each kind
        patch.setattr("massfit.pipeline.what_if.NoiseForm", Literal["white"])
        patch.setattr("massfit.pipeline.what_if.DriftForm", Literal["linear"])
        patch.setattr("massfit.posterior.what_if._SCALES", {"model_common_hpa": "prior of s_common (models, shared)"})
        return estimate(tiny, what_if=True)


def test_rows_cover_every_kind_and_the_base_is_the_answer(asked: Estimate) -> None:
    rows = asked.summary["what_if"]
    kinds = list(dict.fromkeys(row["kind"] for row in rows))
    assert kinds == ["network model", "priors", "fingerprint", "drift", "noise", "records"]
    numbers = ("shift_sd", "sd_ratio", "in_phase_hpa", "quadrature_hpa", "amplitude_hpa", "peak_day")
    assert all(np.isfinite([row[key] for key in numbers]).all() for row in rows)
    named = {row["name"]: row for row in rows}
    # what is known of two sites and one model is mostly prior: a wider one widens
    assert named["double the prior of s_common (models, shared)"]["sd_ratio"] > 1.1
    assert named["half the prior of s_common (models, shared)"]["sd_ratio"] < 0.95
    # half a record says less than all of it; controls for a table of zeros
    halves = [row for row in rows if row["kind"] == "records"]
    assert len(halves) == 2
    assert any(abs(row["shift_sd"]) > 0.1 for row in halves)


def test_the_table_is_in_every_output(asked: Estimate, tmp_path: Path) -> None:
    save_results(asked, tmp_path / "results")
    rows = asked.summary["what_if"]
    assert json.loads((tmp_path / "results/estimate.json").read_text())["what_if"] == rows
    with (tmp_path / "results/what_if.csv").open() as file:
        table = list(csv.DictReader(file))
    assert [row["name"] for row in table] == [row["name"] for row in rows]
    assert float(table[0]["shift_sd"]) == pytest.approx(rows[0]["shift_sd"], rel=1e-4)
    page, text = (tmp_path / "results/report.html").read_text(), summary_text(asked.summary)
    assert "records from" in page
    assert all(line in text for line in ("  network model", "  records"))
    assert "! did not converge" in text.splitlines()
    assert max(map(len, text.splitlines())) <= 80
    assert "moved_site" not in asked.summary  # of two sites neither is the wrong one


def task(site: str, first: str, days: int, drift: str = "exponential+linear") -> SiteTask:
    time = np.datetime64(first, "ns") + np.arange(days) * np.timedelta64(1, "D")
    record = DailyRecord(site, f"{site}/1", time, np.zeros(days), time[0], drift)
    settings = make_settings(
        network={"name": "Invented", "reference_year": 2016}, corrections={"ocean_mean_atmosphere": "already-removed"}
    )
    return SiteTask(Site(site, 0.0, 0.0), (record,), None, None, (), settings)  # type: ignore[arg-type]


def test_halves_hold_every_day_once_and_leave_short_sites_out() -> None:
    tasks = [task("A", "2014-01-01T12", 730), task("B", "2014-01-01T12", 400)]
    first, second = (refit for refit in other_treatments(tasks) if refit.kind == "records")
    assert first.name == "records before 2015-01-01"
    assert [each.site.id for each in first.tasks] == ["A", "B"]
    assert [each.site.id for each in second.tasks] == ["A"]  # 36 days of B are left
    times = [each.tasks[0].daily[0].time for each in (first, second)]
    np.testing.assert_array_equal(np.concatenate(times), tasks[0].daily[0].time)


def test_a_record_declared_free_of_drift_stays_so() -> None:
    tasks = [task("A", "2014-01-01T12", 730), task("B", "2014-01-01T12", 730, drift="none")]
    (linear,) = (refit for refit in other_treatments(tasks) if refit.name == "every drift linear")
    assert [each.daily[0].drift for each in linear.tasks] == ["linear", "none"]
    only = [replace(tasks[1], site=Site("C", 0.0, 0.0))]
    assert not [refit for refit in other_treatments(only) if refit.kind == "drift"]


def test_a_network_without_records_has_no_other_treatment() -> None:
    assert other_treatments([]) == []
