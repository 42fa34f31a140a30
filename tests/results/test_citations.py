"""A result is told by its own choices which works it rests on: all of them, and no others."""

import copy
import dataclasses
import json
from typing import Any

import pytest

from massfit.report.words.citation_text import citation_bibtex, citation_text
from massfit.results.citations import _RULES, NOT_STATED, citations, spoken
from massfit.results.estimate import Estimate
from massfit.results.finished import FinishedRun, finished_run
from massfit.tables.sources import read_sources


@pytest.fixture(scope="module")
def finished(run: Estimate) -> FinishedRun:
    return finished_run(run, command="test")


def changed(run: FinishedRun, **settings: Any) -> FinishedRun:
    """The run as if settings, "section__name", had been others."""
    provenance = copy.deepcopy(dict(run.provenance))
    for name, value in settings.items():
        section, _, key = name.partition("__")
        provenance["settings"][section][key] = value
    return dataclasses.replace(run, provenance=provenance)


def keys(run: FinishedRun) -> set[str]:
    return {each.source.key for each in citations(run) if each.source is not None}


SATELLITES = {"solutions": [{"name": "Halvorne"}]}


def everything(run: FinishedRun) -> list[FinishedRun]:
    """Runs that between them make every choice."""
    acted = {"A/1": [{"what": "samples with flag 4 (bad) left out", "count": 3, "detail": ""}]}
    sites = [{**site, "level_changes": [{"day": "2015-01-01"}]} for site in run.summary["sites"]]
    other = {"actions": acted, "sites": sites, "calibration": {}, "comparison": SATELLITES, "siting": {}}
    first = dataclasses.replace(run, summary={**run.summary, **other})
    second = changed(
        run, fingerprint__loads=["builtin:all"], fingerprint__rotational_feedback=True, posterior__group_scatter=800.0,
        corrections__tides="remove",
    )  # fmt: skip
    third = changed(run, corrections__long_period_tides="equilibrium", corrections__pole_tide="observed")
    return [first, second, dataclasses.replace(third, provenance={**third.provenance, "series_of_means": ["model"]})]


def test_every_work_of_the_list_is_cited_by_some_run_or_serves_another_command(finished: FinishedRun) -> None:
    cited = set().union(*(keys(run) for run in everything(finished)))
    others = {key for key, source in read_sources().items() if "keywords" in source.fields}
    assert cited | others == set(read_sources())
    assert cited.isdisjoint(others)
    assert {key for *_, key, _ in _RULES} <= set(read_sources())


@pytest.mark.parametrize(
    ("settings", "gone"),
    [
        pytest.param({"fingerprint__earth_model": "own.csv"}, {"dziewonski1981"}, id="earth"),
        pytest.param({"fingerprint__water_vapour_kg": 0.0}, {"trenberth2005"}, id="vapour"),
        pytest.param({"priors__year_sd_hpa": 0.1}, {"chandanpurkar2021"}, id="years"),
        pytest.param({"corrections__pole_tide": "none"}, {"desai2002", "iers"}, id="pole"),
        pytest.param({"corrections__long_period_tides": "equilibrium-classical"}, {"agnew1978"}, id="classical"),
        pytest.param(
            {"corrections__long_period_tides": "none"},
            {"agnew1978", "cartwright1971", "cartwright1973", "simon1994"},
            id="tides",
        ),
    ],
)
def test_what_was_not_used_is_not_cited(finished: FinishedRun, settings: dict[str, Any], gone: set[str]) -> None:
    before = changed(finished, corrections__long_period_tides="equilibrium", corrections__pole_tide="observed")
    after = changed(
        finished,
        **{"corrections__long_period_tides": "equilibrium", "corrections__pole_tide": "observed", **settings},
    )
    assert keys(before) - keys(after) == gone
    assert keys(after) <= keys(before)


def test_a_run_without_records_cites_nothing_of_records(finished: FinishedRun) -> None:
    datasets = {name: data for name, data in finished.datasets.items() if name != "reduced_records.nc"}
    without = citations(dataclasses.replace(finished, datasets=datasets))
    assert "Records, drift and noise" not in {each.part for each in without}
    assert "The network posterior" in {each.part for each in without}


def test_own_data_come_first_with_what_is_stated(finished: FinishedRun) -> None:
    own = [each for each in citations(finished) if each.source is None]
    assert citations(finished)[: len(own)] == own
    assert [each.what for each in own].count("ocean model") == 3
    assert own[0].text.endswith(NOT_STATED)
    stated = changed(finished, frame__references=["Satellites: the invented centre Halvorne"])
    texts = [each.text for each in citations(stated) if each.source is None]
    assert "Satellites: the invented centre Halvorne" in texts
    assert "See the references of the network." in texts[0]


def test_satellites_beside_the_answer_are_own_data_too(finished: FinishedRun) -> None:
    beside = dataclasses.replace(finished, summary={**finished.summary, "comparison": SATELLITES})
    (satellites,) = [each for each in citations(beside) if each.what == "satellite gravity"]
    assert satellites.text.startswith("Halvorne. ")
    assert {"wahr1998", "jekeli1981"} <= keys(beside) - keys(finished)


def test_the_text_names_everything_within_eighty_columns(finished: FinishedRun) -> None:
    cited = citations(finished)
    text = citation_text(cited, network="Invented", version="9.9")
    assert max(len(line) for line in text.splitlines()) <= 80
    joined = " ".join(text.replace("- ", "-").split())
    for each in cited:
        if each.source is not None:
            assert " ".join(spoken(each.source).replace("- ", "-").split()) in joined
    assert "massfit 9.9" in text


def test_the_bibtex_holds_every_work_once_and_lets_nothing_of_the_user_command(finished: FinishedRun) -> None:
    hostile = changed(finished, frame__references=[r"\input{/etc/passwd} 100 % {open ~ $x_1^2$ # & 深海"])
    text = citation_bibtex(citations(hostile), version="9.9")
    assert text.count("@article{farrell1972,") == 1
    assert text.startswith("@misc{massfit,")
    assert r"\textbackslash{}input\{/etc/passwd\} 100 \% \{open \textasciitilde{}" in text
    assert "深海" in text
    balance = text.replace(r"\{", "").replace(r"\}", "")
    assert balance.count("{") == balance.count("}")


def test_corporate_authors_and_editions_are_spoken() -> None:
    sources = read_sources()
    assert spoken(sources["iers"]).startswith("International Earth Rotation\xa0and\xa0Reference Systems Service. ")
    assert "Bayesian Data Analysis (third edition). Chapman" in spoken(sources["gelman2013"])
    assert spoken(sources["harris2020"]).startswith("Harris, C. R. et al. (2020). ")


def test_what_a_run_states_can_be_kept_in_a_file(finished: FinishedRun) -> None:
    assert json.loads(json.dumps(finished.provenance["data"])) == finished.provenance["data"]
