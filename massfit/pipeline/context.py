"""The summary in its context: what was assumed, what was done, and every warning."""

from collections.abc import Collection, Mapping, Sequence
from dataclasses import replace
from datetime import date
from typing import Any

from massfit.annual.cautions import QUIET_SD
from massfit.constants import PASCAL_PER_HPA
from massfit.network import Network, ReducedSite
from massfit.records.daily import TIDES_LEFT
from massfit.results.assumptions import stated_assumptions
from massfit.results.correction_tables import correction_table
from massfit.results.estimate import SiteReduction
from massfit.results.site_facts import coverage
from massfit.settings import Frame
from massfit.site import Site


def in_context(
    summary: Mapping[str, Any], network: Network, reductions: Sequence[SiteReduction], fingerprints_area_m2: float
) -> dict[str, Any]:
    """Put the numbers of the posterior beside what they rest on.

    Parameters
    ----------
    summary : mapping
        From `posterior.summary.summarise`, and the `predictive_check`.
    network : Network
    reductions : sequence of SiteReduction
    fingerprints_area_m2 : float
        Area of the ocean, m2.

    Returns
    -------
    dict
        The content of `estimate.json`.
    """
    frame = network.settings.frame
    places = {site.id: site for site in network.sites}
    elsewhere = [each for each in network.reduced if places[each.site].excluded_because is None]
    known = {
        **{reduction.site.id: _recorded(reduction) for reduction in reductions},
        **{each.site: _elsewhere(each, frame) for each in elsewhere},
    }
    first, last = records_span(reductions, elsewhere)
    start, end = stated_period(frame, first, last)
    of_sites = {name for facts, _ in known.values() for name in facts["models"]}
    used = tuple(model for model in network.circulation if model.name in of_sites)
    unused = [
        f"The ocean model {model.name} covers no site and was not used. Give a file that covers the records."
        for model in network.circulation
        if model.name not in of_sites
    ]
    return {
        "network": frame.name,
        "reference_year": frame.reference_year,
        "period": [str(start), str(end)],
        "records_span": [str(first), str(last)],
        "ocean_area_m2": fingerprints_area_m2,
        **summary,
        "sites": [_site(entry, places[entry["id"]], *known[entry["id"]]) for entry in summary["sites"]],
        "left_out": _left_out(network, known),
        "assumptions": list(stated_assumptions(replace(network, circulation=used))),
        "warnings": [
            *unused,
            *([] if elsewhere else _no_quiet_site(reductions)),
            *network.warnings,
            *summary["warnings"],
            *([] if summary["predictive_check"]["agrees"] else summary["predictive_check"]["sentences"]),
        ],
        "actions": {
            daily.deployment: [
                {"what": action.what, "count": action.count, "detail": action.detail} for action in daily.actions
            ]
            for reduction in reductions
            for daily in reduction.daily
        },
    }


def records_span(reductions: Sequence[SiteReduction], elsewhere: Sequence[ReducedSite]) -> tuple[date, date]:
    """First and last day of what the sites hold; a site that was reduced elsewhere gives whole years.

    Parameters
    ----------
    reductions : sequence of SiteReduction
    elsewhere : sequence of ReducedSite

    Returns
    -------
    (datetime.date, datetime.date)
    """
    spans = [each.corrections["time"].values[[0, -1]].astype("datetime64[D]").tolist() for each in reductions]
    spans += [[date(each.years[0], 1, 1), date(each.years[1], 12, 31)] for each in elsewhere]
    return min(first for first, _ in spans), max(last for _, last in spans)


def stated_period(frame: Frame, first: date, last: date) -> tuple[date, date]:
    """First and last day of the period that the answer is the mean of: as stated, or that of the records.

    Parameters
    ----------
    frame : Frame
    first, last : datetime.date
        Of the records.

    Returns
    -------
    (datetime.date, datetime.date)
    """
    return frame.start or first, frame.end or last


def _site(entry: Mapping[str, Any], site: Site, known: Mapping[str, Any], notes: Sequence[str]) -> dict[str, Any]:
    place = {"latitude": site.latitude_deg, "longitude": site.longitude_deg}
    return {**entry, **place, **known, "warnings": [*entry["warnings"], *notes]}


def _recorded(reduction: SiteReduction) -> tuple[dict[str, Any], list[str]]:
    """Say what the run found of a site's record, and its notes."""
    fit = reduction.fit
    notes = [note for note in str(reduction.corrections.attrs["notes"]).split("\n") if note]
    notes += [
        f"{daily.deployment} holds daily means: their short tides cannot be removed, and what a daily mean leaves of "
        "K1 and P1 (0.27 %) looks annual. Give finer data, or state that the tides are already removed."
        for daily in reduction.daily
        if any(action.what == TIDES_LEFT for action in daily.actions)
    ]
    known = {
        "days": fit.days,
        **coverage(reduction.corrections["time"].values, reduction.used),
        "reduced_sd_hpa": fit.reduced_sd / PASCAL_PER_HPA,
        "models": list(fit.models),
        "corrections": correction_table(reduction.phasors),
    }
    return known, [*notes, *fit.notes]


def _elsewhere(reduced: ReducedSite, frame: Frame) -> tuple[dict[str, Any], list[str]]:
    """Say the same of a site that was reduced elsewhere: neither its days nor how quiet it is are known."""
    first, last = reduced.years
    early = frame.start is not None and first < frame.start.year
    late = frame.end is not None and last > frame.end.year
    notes = [f"Its phasor is of {first} to {last}, beyond the stated period."] if early or late else []
    known = {"days": None, "reduced_sd_hpa": None, "models": list(reduced.models), "years": [first, last]}
    return known, notes


def _no_quiet_site(reductions: Sequence[SiteReduction]) -> list[str]:
    if any(reduction.fit.reduced_sd <= QUIET_SD for reduction in reductions):
        return []
    return [
        "No site of this network is quiet: what the records hold at the annual line may be dynamics or the recorder, "
        "so do not read the answer as the cycle of ocean mass."
    ]


def _left_out(network: Network, used: Collection[str]) -> dict[str, str]:
    return {
        site.id: site.excluded_because or "too few days of data are left"
        for site in network.sites
        if site.id not in used
    }
