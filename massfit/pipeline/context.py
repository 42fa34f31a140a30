"""The summary in its context: what was assumed, what was done, and every warning."""

from collections.abc import Mapping, Sequence
from typing import Any

from massfit.network import Network
from massfit.posterior.summary import QUIET_SD
from massfit.results.assumptions import stated_assumptions
from massfit.results.estimate import SiteReduction


def in_context(
    summary: Mapping[str, Any], network: Network, reductions: Sequence[SiteReduction], fingerprints_area_m2: float
) -> dict[str, Any]:
    """Put the numbers of the posterior beside what they rest on.

    Parameters
    ----------
    summary : mapping
        From `posterior.summary.summarise`.
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
    first = min(str(reduction.corrections["time"].values[0])[:10] for reduction in reductions)
    last = max(str(reduction.corrections["time"].values[-1])[:10] for reduction in reductions)
    return {
        "network": frame.name,
        "reference_year": frame.reference_year,
        "period": [str(frame.start or first), str(frame.end or last)],
        "records_span": [first, last],
        "ocean_area_m2": fingerprints_area_m2,
        **summary,
        "sites": [_site(entry, reduction) for entry, reduction in zip(summary["sites"], reductions, strict=True)],
        "left_out": _left_out(network, reductions),
        "assumptions": list(stated_assumptions(network)),
        "warnings": [*_no_quiet_site(reductions), *network.warnings, *summary["warnings"]],
        "actions": {
            daily.deployment: [
                {"what": action.what, "count": action.count, "detail": action.detail} for action in daily.actions
            ]
            for reduction in reductions
            for daily in reduction.daily
        },
    }


def _site(entry: Mapping[str, Any], reduction: SiteReduction) -> dict[str, Any]:
    site, fit = reduction.site, reduction.fit
    notes = [note for note in str(reduction.corrections.attrs["notes"]).split("\n") if note]
    return {
        **entry,
        "latitude": site.latitude_deg,
        "longitude": site.longitude_deg,
        "days": fit.days,
        "reduced_sd_hpa": fit.reduced_sd / 100.0,
        "models": list(fit.models),
        "warnings": [*entry["warnings"], *notes, *fit.notes],
    }


def _no_quiet_site(reductions: Sequence[SiteReduction]) -> list[str]:
    if any(reduction.fit.reduced_sd <= QUIET_SD for reduction in reductions):
        return []
    return [
        "No site of this network is quiet: what the records hold at the annual line may be dynamics or the recorder, "
        "so do not read the answer as the cycle of ocean mass."
    ]


def _left_out(network: Network, reductions: Sequence[SiteReduction]) -> dict[str, str]:
    used = {reduction.site.id for reduction in reductions}
    return {
        site.id: site.excluded_because or "too few days of data are left"
        for site in network.sites
        if site.id not in used
    }
