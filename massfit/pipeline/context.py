"""The summary in its context: what was assumed, what was done, and every warning."""

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import date
from typing import Any

import numpy as np

from massfit.annual.cautions import QUIET_SD
from massfit.constants import PASCAL_PER_HPA
from massfit.corrections.circulation import CirculationAtSites
from massfit.network import Network, ReducedSite
from massfit.records.daily import GAIN_CHANGE, TIDES_LEFT
from massfit.records.record import DailyRecord
from massfit.results.assumptions import stated_assumptions
from massfit.results.correction_tables import correction_table
from massfit.results.estimate import SiteReduction
from massfit.results.site_facts import coverage
from massfit.settings import Frame
from massfit.site import Site


@dataclass(frozen=True)
class SitesInContext:
    """The sites of a run beside what they rest on.

    Parameters
    ----------
    head : mapping
        `network`, `reference_year`, `period`, `records_span`.
    facts : mapping of str to mapping
        Place of each site and what is known of its record.
    notes : mapping of str to list of str
        What was noticed at each site.
    left_out : mapping of str to str
        Sites that were left out, and why.
    warnings : list of str
    used : Network
        With those circulation models alone that some site has subtracted.
    actions : mapping of str to list of mapping
        Everything that was done to each deployment.
    """

    head: Mapping[str, Any]
    facts: Mapping[str, Mapping[str, Any]]
    notes: Mapping[str, list[str]]
    left_out: Mapping[str, str]
    warnings: list[str]
    used: Network
    actions: Mapping[str, list[dict[str, Any]]]


def sites_in_context(
    network: Network, reductions: Sequence[SiteReduction], circulation: Sequence[CirculationAtSites]
) -> SitesInContext:
    """Gather what the phasors of the sites rest on.

    Parameters
    ----------
    network : Network
    reductions : sequence of SiteReduction
    circulation : sequence of CirculationAtSites

    Returns
    -------
    SitesInContext
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
    unused = [
        f"The ocean model {model.name} covers no site and was not used. Give a file that covers the records."
        for model in network.circulation
        if model.name not in of_sites
    ]
    noticed = [note for model in circulation if model.name in of_sites for note in model.notes]
    return SitesInContext(
        head={
            "network": frame.name,
            "reference_year": frame.reference_year,
            "period": [str(start), str(end)],
            "records_span": [str(first), str(last)],
        },
        facts={name: {**_place(places[name]), **facts} for name, (facts, _) in known.items()},
        notes={name: notes for name, (_, notes) in known.items()},
        left_out=_left_out(network, known),
        warnings=[*unused, *([] if elsewhere else _no_quiet_site(reductions)), *network.warnings, *noticed],
        used=replace(network, circulation=tuple(model for model in network.circulation if model.name in of_sites)),
        actions={
            daily.deployment: [
                {"what": action.what, "count": action.count, "detail": action.detail} for action in daily.actions
            ]
            for reduction in reductions
            for daily in reduction.daily
        },
    )


def in_context(summary: Mapping[str, Any], sites: SitesInContext, ocean_area_m2: float) -> dict[str, Any]:
    """Put the numbers of the posterior beside what they rest on.

    Parameters
    ----------
    summary : mapping
        From `posterior.summary.summarise`, the `predictive_check`, and the `calibration` where there is one.
    sites : SitesInContext
    ocean_area_m2 : float
        Area of the ocean, m2.

    Returns
    -------
    dict
        The content of `estimate.json`.
    """
    return {
        **sites.head,
        "ocean_area_m2": ocean_area_m2,
        **summary,
        "sites": [
            {
                **entry,
                **sites.facts[entry["id"]],
                "warnings": [*entry["warnings"], *sites.notes[entry["id"]]],
            }
            for entry in summary["sites"]
        ],
        "left_out": sites.left_out,
        "assumptions": list(stated_assumptions(sites.used)),
        "warnings": [
            *sites.warnings,
            *summary["warnings"],
            *([] if summary["predictive_check"]["agrees"] else summary["predictive_check"]["sentences"]),
            *([] if summary.get("calibration", {"holds": True})["holds"] else [summary["calibration"]["sentence"]]),
        ],
        "actions": sites.actions,
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


def _place(site: Site) -> dict[str, Any]:
    return {"latitude": site.latitude_deg, "longitude": site.longitude_deg}


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
    notes += [note for daily in reduction.daily for note in _found_notes(daily)]
    known = {
        "days": fit.days,
        **coverage(reduction.corrections["time"].values, reduction.used),
        "reduced_sd_hpa": fit.reduced_sd / PASCAL_PER_HPA,
        "models": list(fit.models),
        "model_distance_km": _distances_km(reduction),
        "level_changes": _level_changes(reduction),
        "corrections": correction_table(reduction.phasors),
    }
    return known, [*notes, *fit.notes]


def _level_changes(reduction: SiteReduction) -> list[dict[str, Any]]:
    """Every change of level within a deployment, with the size of the fit; null where the fit does not know it."""
    sizes = {(fit.deployment, time): size for fit in reduction.fit.drifts for time, size in fit.steps}
    rows = []
    for daily in reduction.daily:
        for change in daily.changes:
            size = sizes.get((daily.deployment, change.end))
            rows.append(
                {
                    "deployment": daily.deployment,
                    "kind": change.kind,
                    "start": str(change.start.astype("datetime64[s]")),
                    "end": str(change.end.astype("datetime64[s]")),
                    "found": change.found,
                    "size_hpa": None if size is None else size.mean / PASCAL_PER_HPA,
                    "size_sd_hpa": None if size is None else size.sd / PASCAL_PER_HPA,
                }
            )
    return rows


def _found_notes(daily: DailyRecord) -> list[str]:
    """Say what was found in a record that its analyst should confirm."""
    notes = []
    found = [change for change in daily.changes if change.found]
    if found:
        times = ", ".join(f"{change.kind} {np.datetime_as_string(change.start, unit='D')}" for change in found)
        notes.append(
            f"{daily.deployment}: changes of level that nobody declared were found and are fitted ({times}). Confirm "
            'them with `steps` or `ramps`, or refuse them with steps = "none".'
        )
    gain = [action.detail for action in daily.actions if action.what == GAIN_CHANGE]
    return [*notes, *(f"{daily.deployment}: the gain of the sensor seems to change. {detail}." for detail in gain)]


def _distances_km(reduction: SiteReduction) -> dict[str, float]:
    """Distance of the wet cell taken of each model on a grid whose cells at the site are dry; 0 elsewhere."""
    distances = reduction.corrections["distance"]
    return {model: round(float(distances.sel(model=model)) / 1000.0, 1) for model in reduction.fit.models}


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
