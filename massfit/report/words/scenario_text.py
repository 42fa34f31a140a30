"""The answer of a scenario: plain text that fits 80 columns."""

from collections.abc import Mapping
from typing import Any

from massfit.report.words.names import wrapped
from massfit.report.words.run_text import SHARE_WORDS, WIDTH
from massfit.results.answer import date_range, spoken_date, spoken_range


def scenario_text(answer: Mapping[str, Any]) -> str:
    """Write the answer of a scenario beside that of the whole network.

    Parameters
    ----------
    answer : mapping
        From `massfit.pipeline.scenario.answer_scenario_file`.

    Returns
    -------
    str
        Lines of at most 80 columns.
    """
    whole, year = answer["everything"], answer["reference_year"]
    rows = [
        ("", "all", "scenario"),
        *(_row(name, whole, answer, spell) for name, spell in _spellings(year)),
        *(
            (SHARE_WORDS.get(name, name), f"{100 * whole['variance_share'][name]:.1f} %", f"{100 * share:.1f} %")
            for name, share in answer["variance_share"].items()
        ),
    ]
    table = [f"{label:<24}{first:>26}{second:>26}".rstrip() for label, first, second in rows]
    head = f"Scenario: {answer['sites']} of {whole['sites']} sites, normal site scatter"
    return "\n".join([head, "", *table, "", *wrapped(_kind(answer, year), WIDTH)])


def _kind(answer: Mapping[str, Any], year: int) -> str:
    """Say of what kind the table is, and what Student-t scatter gives where the run had it."""
    note = "Each site enters by the mean and covariance of its mixture. A question to the network, not a new estimate."
    if answer["student_t"] is None:
        return note
    scenario, of_run = (_spoken(each, year) for each in (answer["student_t"], answer["run"]))
    return (
        f"With Student-t scatter and mixtures, as the run had them: scenario {scenario}; run {of_run}. "
        f"{note} Set its columns beside each other, not beside the run."
    )


def _spoken(answer: Mapping[str, Any], year: int) -> str:
    amplitude, day = answer["amplitude_hpa"], answer["peak_day"]
    region = spoken_range(amplitude["region95"], ".3f")
    return f"{amplitude['median']:.3f} hPa (95 %: {region}), peak {spoken_date(day['median'], year)}"


def bench_note(summary: Mapping[str, Any], site_scatter: str) -> str:
    """Say how the numbers of the bench differ by kind from the answer of the run.

    Parameters
    ----------
    summary : mapping
        The content of `estimate.json`.
    site_scatter : str
        Of the run.

    Returns
    -------
    str
    """
    if site_scatter == "normal":
        return (
            "Each site enters by the mean and the covariance of its mixture; otherwise the numbers are of the same "
            "kind as the answer above."
        )
    return (
        f"The answer above, {summary['amplitude_hpa']['median']:.2f} hPa, has Student-t site scatter, which gives a "
        f"site that lies far off less say. The bench has normal scatter{_moved(summary)}, and each site enters by the "
        "mean and the covariance of its mixture: its own numbers with all ticked are the ones to hold a scenario "
        "against."
    )


def _moved(summary: Mapping[str, Any]) -> str:
    """Say what normal scatter changes of this answer, where the run has found it."""
    for row in summary.get("alternatives", []):
        if row["name"] == "normal site scatter":
            size = f"{abs(row['shift_sd']):.2f} standard deviations and its width by a factor of {row['sd_ratio']:.2f}"
            return f" (for the whole network that moves the answer by {size})"
    return ""


def _row(label: str, whole: Mapping[str, Any], answer: Mapping[str, Any], spell: Any) -> tuple[str, str, str]:
    return label, spell(whole), spell(answer)


def _spellings(year: int) -> list[tuple[str, Any]]:
    return [
        ("amplitude / hPa", lambda a: f"{a['amplitude_hpa']['median']:.3f}"),
        ("  95 %", lambda a: spoken_range(a["amplitude_hpa"]["region95"], ".3f")),
        ("peak", lambda a: spoken_date(a["peak_day"]["median"], year)),
        ("  95 %", lambda a: _short(date_range(a["peak_day"]["region95"], year))),
        ("in phase / hPa", lambda a: "{mean:.4f} ± {sd:.4f}".format(**a["in_phase_hpa"])),
        ("quadrature / hPa", lambda a: "{mean:.4f} ± {sd:.4f}".format(**a["quadrature_hpa"])),
    ]


def _short(dates: str) -> str:
    """Months by three letters, so that a range fits its column."""
    return " ".join(
        word[:3] if word.isalpha() and word not in {"to"} and len(word) > 4 else word for word in dates.split()
    )
