"""The one-page report: self-contained, no network."""

from collections.abc import Mapping
from typing import Any

from massfit.report.figures.record_panels import ROWS_OF_A_PAGE
from massfit.report.pages.frame import filled
from massfit.report.pages.page_parts import as_data, as_json, as_packed_csv, made_with
from massfit.report.pages.page_tables import (
    Table,
    actions_table,
    alternatives_table,
    calibration_table,
    citations_table,
    corrections_table,
    fingerprint_table,
    input_table,
    left_out_table,
    predictive_table,
    quantities_table,
    shares_table,
    site_table,
    years_table,
)
from massfit.report.pages.satellite_tables import definition_words, satellite_tables
from massfit.report.pages.siting_tables import siting_tables
from massfit.report.pages.sparklines import with_sparklines
from massfit.report.words.comparison_text import bridge_sentences, verdict
from massfit.report.words.run_text import ALTERNATIVES_NOTE, SHARE_WORDS, trust_sentence, warning_lines
from massfit.report.words.scenario_text import bench_note
from massfit.report.words.siting_plan_text import siting_words
from massfit.results.answer import answer_sentence
from massfit.results.bench import bench_data
from massfit.results.citations import citations
from massfit.results.figure_data import figure_tables, weekly_means
from massfit.results.finished import FinishedRun

PICTURES = {
    "phasor_plane": "The network's answer (blue: mean, 50 and 95 % regions, drawn from draws smoothed by 0.4 of their "
    "standard deviation) and what each site alone says of it (orange: the site's phasor divided by its fingerprint, "
    "with the 50 % ellipse of its record error); triangles: where the answer would move with one ocean model alone.",
    "network_map": "The sites, coloured by the amplitude of the annual cycle at the site relative to the ocean mean.",
    "fingerprint": "How each site sees the cycle under each load member: amplitude relative to the ocean mean, and "
    "delay.",
    "moved_site": "How far the answer moves as the site that makes the largest share of it is moved off, in the "
    "direction of its own cycle: under normal scatter it follows; under Student-t scatter a site that is far off "
    "loses its say.",
    "corner": "Posterior of the answer and of the scales of the model; contours enclose 50 and 95 %, dashed lines mark "
    "the median and the central 95 %.",
    "convergence": "How the sampler moved: each kept step of the independent chains, how soon a walker forgets where "
    "it was, R-hat and the effective number of draws of every quantity; the grey is beyond the limits.",
    "coverage": "Days of each month that the fit of each site used; a month without a cell has no data. Above, how "
    "many sites were at work.",
    "records": "Each site: daily record with fitted drift, deployments in turn blue and orange; the series subtracted "
    "from it; what remains, with the fitted annual cycle. Every row has its own scale; one day in 250, the most "
    "extreme, is out of sight.",
    "siting_influence": "What each site carries. Bars: the part of the answer's precision that is lost without it, the "
    "scales held; dots: how far the answer then moves, the scales integrated anew.",
    "siting_sizes": "Answer and error of a component for random subsets of the sites, against the number kept.",
    "siting_order": "The answer as more and more sites are kept, those of the smallest value first, with one standard "
    "deviation; dashed, as a warning, those first that agree with the others: beyond a few sites that error "
    "is too small.",
    "siting_path": "Error of a component of the answer with the best subset of every size by two criteria, chosen by "
    "what the sites would tell and not by what they read, beside random subsets. A: least mean variance; D: least "
    "area of the ellipse. The choice holds the scales; the error drawn integrates them anew, and so may rise.",
    "siting_candidate_map": "By how much one recorder more would bring the error of the answer down, for a record of "
    "the length planned: dots are the sites of the network, numbered diamonds the best places of the open sea, far "
    "apart. Pale cells are not listed: near the coast or the loads.",
    "siting_record_length": "Error of a component of the phasor against the years of record: of a record by itself, "
    "and of the answer with one recorder more at the best place.",
    "siting_service": "By how many per cent the error of the answer is larger than if every recorder runs on, against "
    "the month, from the last day of the records, in which a recorder ends or is replaced by one with a drift of its "
    "own; the cross is for a recorder that is lost with its record.",
    "satellite": "Network, satellites and other determinations of the water of the whole ocean, with 95 % ellipses; "
    "the satellites' ocean mean of each month as the kernel sees it, less its mean, and the annual cycle fitted to it; "
    "of a model with annual terms, these alone.",
    "satellite_sites": "Satellite pressure at each recorder (squares) beside the recorder's own phasor (dots), with "
    "one standard deviation; bars may lead out of the frame. p: probability of a difference at least as large; names "
    "in bold have less than 0.05.",
}
"""Name of each figure and what it shows. Further pages of records end in ``_2`` and so on."""


def report_page(run: FinishedRun, pictures: Mapping[str, bytes]) -> str:
    """Fill the report.

    Parameters
    ----------
    run : FinishedRun
    pictures : mapping of str to bytes
        PNG images under the names of `PICTURES`; one that ends in ``_column`` is shown on narrow screens instead.

    Returns
    -------
    str
        HTML with everything inside it. A section whose stage was not run is absent.
    """
    summary, provenance = run.summary, run.provenance
    return filled(
        "run.html",
        scripts=("page.js", "bench_model.js", "bench_answer.js", "bench_view.js"),
        summary=summary,
        version=provenance["massfit"],
        sentence=answer_sentence(summary),
        images=as_data(pictures),
        captions={name: PICTURES[_stem(name)] for name in pictures if not name.endswith("_column")},
        alternatives_text=_alternative_texts(summary),
        record_pictures=[name for name in pictures if _stem(name) == "records"],
        warnings=warning_lines(summary),
        trust=trust_sentence(summary),
        satellite_verdict=verdict(summary["comparison"]) if "comparison" in summary else "",
        definition_words=definition_words(summary["comparison"]) if "comparison" in summary else "",
        bridge_words=" ".join(bridge_sentences(summary["comparison"])) if "comparison" in summary else "",
        siting_words=siting_words(run.datasets),
        alternatives_note=f"{ALTERNATIVES_NOTE[0].upper()}{ALTERNATIVES_NOTE[1:]}.",
        figure_data=_figure_data(run, pictures),
        tables=_tables(run),
        made_with=made_with(provenance),
        **_bench(run),
    )


def _bench(run: FinishedRun) -> dict[str, Any]:
    """Collect what the bench shows and carries; nothing where the network is too large for a browser."""
    bench = bench_data(run)
    if bench is None:
        return {"bench": None}
    return {
        "bench": bench,
        "bench_kind": bench_note(run.summary, bench["site_scatter"]),
        "bench_json": as_json(bench),
        "share_words_json": as_json(SHARE_WORDS),
    }


def _figure_data(run: FinishedRun, pictures: Mapping[str, bytes]) -> dict[str, str]:
    tables = figure_tables(run, rows_of_a_page=ROWS_OF_A_PAGE)
    return {name: as_packed_csv(table.head, table.rows) for name, table in tables.items() if name in pictures}


def _stem(name: str) -> str:
    return "records" if name.startswith("records") else name.removesuffix("_column")


def _tables(run: FinishedRun) -> dict[str, Table | None]:
    summary = run.summary
    return {
        "quantities": quantities_table(summary),
        "shares": shares_table(summary),
        "years": years_table(summary),
        "alternatives": alternatives_table(summary),
        "predictive": predictive_table(summary),
        "calibration": calibration_table(summary),
        "sites": with_sparklines(site_table(summary), summary["sites"], *weekly_means(run)),
        "left_out": left_out_table(summary),
        "corrections": corrections_table(summary),
        "fingerprint": fingerprint_table(summary, run.datasets["fingerprints.nc"]),
        "actions": actions_table(summary, run.datasets.get("reduced_records.nc")),
        "citations": citations_table(citations(run)),
        "inputs": input_table(run.provenance),
        **satellite_tables(summary),
        **siting_tables(run.summary, run.datasets),
    }


def _alternative_texts(summary: Mapping[str, Any]) -> dict[str, str]:
    """Say in words what each picture shows; the caption beside it says how to read it."""
    count = len(summary["sites"])
    flagged = [site["id"] for site in summary["sites"] if site["warnings"]]
    return {
        "phasor_plane": f"Plane of in phase and quadrature with {count} sites about the answer. "
        + answer_sentence(summary),
        "network_map": f"World map of {count} sites; positions and ratios are in the table below. With a warning: "
        + (", ".join(flagged) or "none")
        + ".",
        "fingerprint": "Amplitude ratio and delay of each site under each load member; ranges are in the table below.",
        "moved_site": "Shift of the answer against the offset of one site, under normal and Student-t site scatter.",
        "corner": "Posterior densities of amplitude and peak day, "
        + answer_sentence(summary).removeprefix("The annual cycle of ocean mass has an "),
        "convergence": f"Traces, autocorrelation, R-hat and effective draws of the sampler. {trust_sentence(summary)}",
        "coverage": f"Calendar of the months of {count} sites; days and coverage of each are in the table below.",
        "siting_influence": "Precision lost, and shift of the answer, without each site; what carries most is on top.",
        "siting_sizes": "Spread of the answer over random subsets, narrowing towards that of all sites.",
        "siting_order": "Answer and error against the number of sites kept, in an allowed and in a forbidden order.",
        "siting_path": "Error against the number of sites kept, for best and for random subsets.",
        "siting_candidate_map": "World map of what one recorder more would do; the best places are in the table below.",
        "siting_record_length": "Errors against the years of record, falling steeply up to a year and a quarter.",
        "siting_service": "Error of the answer against the month of service for the sites that matter most; the "
        "numbers are in the table below.",
        "satellite": "Determinations in the plane of in phase and quadrature, and the monthly ocean mean of the "
        "satellites; the numbers are in the tables below.",
        "satellite_sites": "Amplitude and peak day of recorder and satellites at every site; the numbers are in the "
        "table below.",
        "records": "Daily records, corrections and remainders over time; what was done to each is in the tables below.",
    }
