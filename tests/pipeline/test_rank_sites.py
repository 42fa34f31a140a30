"""Which sites carry a finished run."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import massfit
from massfit.errors import InputError
from massfit.io.fields.site_column import read_site_column
from massfit.pipeline.executor import local_processes
from massfit.pipeline.rank_sites import RANKING, SiteRanking, rank_sites, with_ranking
from massfit.report.words.siting_text import siting_text, smallest_sentence
from massfit.results.finished import FinishedRun, finished_run


@pytest.fixture(scope="module")
def run() -> FinishedRun:
    options = {"sites": 4, "years": 2, "models": 2, "load_members": 2, "sampling": "daily"}
    made = massfit.SimulationOptions(incidents=False, bad_site=False, **options)
    return finished_run(massfit.estimate(massfit.simulate_network(made, seed=5).network), command="invented")


@pytest.fixture(scope="module")
def ranking(run: FinishedRun) -> SiteRanking:
    by = {site["id"]: 9.0 - k for k, site in enumerate(run.summary["sites"])}
    return rank_sites(run, subsets=3, by=by, by_name="quiet.csv", target_width_hpa=0.001)


def test_every_site_is_left_out_and_ordered(run: FinishedRun, ranking: SiteRanking) -> None:
    siting = ranking.summary
    names = [site["id"] for site in run.summary["sites"]]
    assert [row["name"] for row in siting["without_sites"]] == names
    assert [row["added"] for row in siting["ordered"]] == names[::-1]  # the column falls along the sites
    assert siting["ordered_by"] == "quiet.csv"
    assert [row["sites"] for row in siting["sizes"]] == [1, 2, 3, 4]
    assert smallest_sentence(siting) == "No subset keeps a width of 0.001 hPa."


def test_processes_give_the_same_to_the_last_bit(run: FinishedRun, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("massfit.pipeline.rank_sites.PART", 4)
    with local_processes(2) as two:
        shared = rank_sites(run, subsets=3, with_pull=False, executor=two)
    assert shared.dataset.sizes["subset"] > 8, "several parts"
    xr.testing.assert_identical(shared.dataset, rank_sites(run, subsets=3, with_pull=False).dataset)


def test_the_table_fits_a_terminal(ranking: SiteRanking) -> None:
    text = siting_text(ranking.summary)
    assert max(len(line) for line in text.splitlines()) <= 80
    for row in ranking.summary["without_sites"]:
        assert row["name"][:6] in text


def test_the_dataset_holds_what_was_found(run: FinishedRun, ranking: SiteRanking) -> None:
    found = with_ranking(run, ranking).datasets[RANKING]
    assert found.attrs["Conventions"].startswith("CF-")
    assert {name: found.sizes[name] for name in ("site", "kept_count", "criterion")} == {
        "site": 4, "kept_count": 4, "criterion": 2
    }  # fmt: skip
    assert found["without_site_mean"].attrs["units"] == "Pa"
    everything = found["subset_has_site"].values.all(axis=1)
    np.testing.assert_allclose(found["subset_mean"].values[everything][0], found["ordered_mean"].values[-1])
    np.testing.assert_allclose(found["leverage"].sum("site"), 1.0, atol=0.01)


def test_the_answer_of_all_sites_is_that_of_the_run(run: FinishedRun, ranking: SiteRanking) -> None:
    whole = ranking.summary["whole"]
    widths = [run.summary[key]["sd"] for key in ("in_phase_hpa", "quadrature_hpa")]
    for key, sd in zip(("in_phase_hpa", "quadrature_hpa"), widths, strict=True):
        # the run's own draws, a few thousand of them, and the error of the fast answer
        assert whole[key] == pytest.approx(run.summary[key]["mean"], abs=0.07 * sd)
    assert whole["width_hpa"] == pytest.approx(np.sqrt(np.mean(np.square(widths))), rel=0.06)


def test_the_same_run_gives_the_same_ranking(run: FinishedRun) -> None:
    first, second = (rank_sites(run, subsets=1, with_pull=False) for _ in range(2))
    assert first.summary == second.summary
    assert first.summary["ordered_by"] == "error of the record / hPa"


def test_a_run_that_cannot_be_ranked_is_refused(run: FinishedRun) -> None:
    summary = {
        **run.summary,
        "sites": run.summary["sites"][:2],
        "convergence": {**run.summary["convergence"], "converged": False},
    }
    with pytest.raises(InputError) as error:
        rank_sites(replace(run, summary=summary))
    assert [fault.name for fault in error.value.faults] == ["sites", "convergence"]
    with pytest.raises(InputError, match="no finite value"):
        rank_sites(run, by={"nowhere": 1.0}, by_name="quiet.csv")


@pytest.mark.parametrize(
    ("text", "problem"),
    [
        ("name,quiet\na,1\n", "the header is not site,value"),
        ("site,value\na,high\n", "the line is 'a,high'"),
        ("site,value\na,1\na,2\n", "the site stands there twice"),
        ("", "the header is not site,value"),
    ],
)
def test_a_wrong_column_is_refused(tmp_path: Path, text: str, problem: str) -> None:
    path = tmp_path / "quiet.csv"
    path.write_text(text)
    with pytest.raises(InputError, match=problem):
        read_site_column(path)
    with pytest.raises(InputError, match="cannot be read"):
        read_site_column(tmp_path / "missing.csv")
