"""The summary at the end of a run fits a terminal, whatever it has to say."""

import copy
from typing import Any

import pytest

from massfit.report.words.names import columns
from massfit.report.words.run_text import summary_text, trust_sentence
from massfit.results.answer import date_range, spoken_date
from massfit.results.estimate import Estimate


@pytest.fixture
def summary(run: Estimate) -> dict[str, Any]:
    return copy.deepcopy(dict(run.summary))


def test_it_says_the_answer(summary: dict[str, Any]) -> None:
    text = summary_text(summary)
    amplitude = summary["amplitude_hpa"]
    assert f"{amplitude['median']:.3f} hPa" in text
    assert f"{amplitude['region95'][0]:.3f} to {amplitude['region95'][1]:.3f}" in text
    assert spoken_date(summary["peak_day"]["median"], summary["reference_year"]) in text
    assert "Converged: R-hat" in text
    for site in summary["sites"]:
        assert site["id"] in text


def test_lines_fit_eighty_columns(summary: dict[str, Any]) -> None:
    assert max(map(len, summary_text(summary).splitlines())) <= 80


def test_long_names_huge_numbers_and_many_warnings_fit_too(summary: dict[str, Any]) -> None:
    summary["network"] = "The Extraordinarily Verbose Network of the Institute for Names without End " * 2
    summary["warnings"] = [f"Warning {k}: " + "a long story about an unfortunate recorder " * 4 for k in range(40)]
    for site in summary["sites"]:
        site["id"] = "Sørlige-dyphavsrenna-stasjon-nummer-tre"
        site["warnings"] = ["W" * 200, "short"]
        site["phasor_hpa"] = [-123.4, 567.8]
        site["standardised_residual"] = 1234.5
    for row in summary["alternatives"]:
        row["name"] = "without the model of the very long name and its many versions"
        row["shift_sd"], row["sd_ratio"] = -123.45, 123.45
    for name in ("amplitude_hpa", "water_mm", "sea_water_mm", "mass_gt"):
        value = summary[name]
        value["median"], value["region95"] = 9876.543, [1234.567, 98765.432]
    text = summary_text(summary)
    assert max(map(len, text.splitlines())) <= 80
    assert text.count("Warning ") == 40


def test_wide_letters_are_counted_by_the_columns_they_take(summary: dict[str, Any]) -> None:
    summary["network"] = "深海の圧力計" * 12
    summary["warnings"] = ["記録" * 60]
    for site in summary["sites"]:
        site["id"] = "北太平洋観測点第三号"
    lines = summary_text(summary).splitlines()
    assert max(map(columns, lines)) <= 80
    # len() would not have seen it
    assert any(columns(line) > len(line) for line in lines)


def test_long_names_that_begin_alike_stay_apart(summary: dict[str, Any]) -> None:
    for number, site in enumerate(summary["sites"]):
        site["id"] = f"Southern-Array-Station-{number}"
    text = summary_text(summary)
    assert all(f"-{number} " in text for number in range(len(summary["sites"])))


def test_a_run_that_did_not_converge_says_so(summary: dict[str, Any]) -> None:
    summary["convergence"]["converged"] = False
    assert trust_sentence(summary).startswith("NOT CONVERGED: do not use this number")
    assert "NOT CONVERGED" in summary_text(summary)


@pytest.mark.parametrize(
    ("region", "words"),
    [
        ([-3.0, 5.0], "29 December to 6 January"),
        ([270.0, 290.5], "28 September to 18 October"),
        ([0.0, 350.0], "any day of the year"),
    ],
)
def test_regions_of_days_are_spoken(region: list[float], words: str) -> None:
    # 28 September is the 271st day of 2015
    assert date_range(region, 2015) == words
