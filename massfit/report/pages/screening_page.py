"""The page of a screening: self-contained, no network."""

from collections.abc import Mapping, Sequence
from typing import Any

from massfit.display import counted
from massfit.report.pages.frame import filled
from massfit.report.pages.page_parts import as_data, made_with
from massfit.report.pages.page_tables import Table
from massfit.results.finished import FinishedRun

PICTURES = {
    "sd_map": "Standard deviation of bottom pressure less ocean mean, trend, annual and semi-annual cycle; root mean "
    "square over the models. Every site has the colour of its own cell; grey: land, or no values.",
    "annual_map": "What a record of that length is expected to show of the dynamics at the annual line: standard "
    "deviation of one component of its annual phasor, with inflation for models that are too quiet.",
    "yearly_map": "Standard deviation of means over calendar years, level and trend taken off.",
    "disagreement_map": "Standard deviation over the models of one component of the annual phasor of their dynamics: "
    "what no longer record averages down.",
}
"""Name of each figure and what it shows."""


def screening_page(run: FinishedRun, pictures: Mapping[str, bytes]) -> str:
    """Fill the page.

    Parameters
    ----------
    run : FinishedRun
        Of a screening.
    pictures : mapping of str to bytes
        PNG images under the names of `PICTURES`; one that ends in ``_column`` is shown on narrow screens instead.

    Returns
    -------
    str
        HTML with everything inside it.
    """
    shown = [name for name in PICTURES if name in pictures]
    return filled(
        "screening.html",
        network=run.summary["network"],
        version=run.provenance["massfit"],
        sentence=screening_sentence(run.summary),
        warnings=run.summary["warnings"],
        assumptions=run.summary["assumptions"],
        images=as_data(pictures),
        captions={name: PICTURES[name] for name in shown},
        alternatives_text={name: f"World map. {PICTURES[name]}" for name in shown},
        tables={
            "sites": _site_table(run.summary),
            "area": _area_table(run.summary),
            "models": _model_table(run.summary["models"]),
            "inputs": _input_table(run.provenance),
        },
        made_with=made_with(run.provenance),
    )


def screening_sentence(summary: Mapping[str, Any]) -> str:
    """Say in one sentence how quiet the sea floor is.

    Parameters
    ----------
    summary : mapping
        The content of `screening.json`.

    Returns
    -------
    str
    """
    quantiles, years = summary["quantiles"], f"{summary['record_years'][-1]:g}"
    quarter, half = quantiles["sd_hpa"][1:3]
    annual = quantiles[f"expected_annual_sd_{years}_years_hpa"][1]
    line = "" if annual is None else (
        f" Over the quietest quarter at the annual line a record of {years} years is expected to hold less than "
        f"{annual:.2f} hPa of dynamics in each component."
    )  # fmt: skip
    return (
        f"Of the area that {counted(len(summary['models']), 'model')} cover{'s' * (len(summary['models']) == 1)}, a "
        f"quarter varies by less than {quarter:.2f} hPa (1 sd) and half by less than {half:.2f} hPa.{line}"
    )


def _site_table(summary: Mapping[str, Any]) -> Table | None:
    if not summary["sites"]:
        return None
    lengths = [f"{years:g}" for years in summary["record_years"]]
    head = ["site", "latitude", "longitude", "cell / km away", "sd", "yearly means"]
    head += [f"annual line, {length} yr" for length in lengths]
    rows = [
        [
            row["id"],
            f"{row['latitude']:.2f}",
            f"{row['longitude']:.2f}",
            f"{row['distance_km']:.0f}",
            _number(row["sd_hpa"]),
            _number(row["annual_mean_sd_hpa"]),
            *(_number(row["expected_annual_sd_hpa"][length]) for length in lengths),
            _number(row["disagreement_hpa"]),
            _number(row["percentile"], 1),
        ]
        for row in summary["sites"]
    ]
    return Table("The sites on the map", [*head, "models apart", "quieter / % of area"], rows)


def _area_table(summary: Mapping[str, Any]) -> Table:
    quantiles = summary["quantiles"]
    names = {"sd_hpa": "standard deviation", "annual_mean_sd_hpa": "of yearly means"}
    for years in summary["record_years"]:
        names[f"annual_sd_{years:g}_years_hpa"] = f"annual line, {years:g} yr, as the models have it"
        names[f"expected_annual_sd_{years:g}_years_hpa"] = f"annual line, {years:g} yr, expected"
    names["disagreement_hpa"] = "disagreement of the models"
    rows = [[text, *(_number(value) for value in quantiles[key])] for key, text in names.items() if key in quantiles]
    heads = [f"{100 * share:.0f} % quieter" for share in quantiles["shares"]]
    return Table("Quantiles over the area, hPa", ["hPa, 1 sd", *heads], rows)


def _model_table(models: Sequence[Mapping[str, Any]]) -> Table:
    rows = [
        [
            model["name"],
            model["first_day"],
            model["last_day"],
            f"{model['step_days']:g}",
            str(model["cells"]),
            f"{100 * model['line_sd_share']:.0f}",
            {"subtract": "subtracted here", "removed": "removed before"}[model["ocean_mean"]],
        ]
        for model in models
    ]
    head = ["model", "from", "to", "step / days", "cells", "annual line known to / %", "ocean mean"]
    return Table("The models", head, rows)


def _input_table(provenance: Mapping[str, Any]) -> Table | None:
    rows = [list(item) for item in provenance["inputs"].items()]
    return Table("Files that were read", ("input", "size and time of change"), rows, wordy=True) if rows else None


def _number(value: float | None, digits: int = 3) -> str:
    return "" if value is None else f"{value:.{digits}f}"
