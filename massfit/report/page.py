"""The one-page report: self-contained, no scripts, no network."""

import base64
from collections.abc import Mapping
from typing import Any

from jinja2 import Environment, StrictUndefined

from massfit.phasor import delay_days, peak_days
from massfit.report.page_template import TEMPLATE
from massfit.report.text import SHARE_WORDS, answer_sentence, spoken_date, trust_sentence, warning_lines
from massfit.results.estimate import Estimate, SiteReduction

PICTURES = {
    "phasor_plane": "The network's answer (blue: 50 and 95 % regions) and what each site alone says of it (orange: the "
    "site's phasor divided by its fingerprint, with the 50 % ellipse of its record error).",
    "network_map": "The sites, coloured by the amplitude of the annual cycle at the site relative to the ocean mean.",
    "corner": "Posterior of the answer and of the scales of the model; contours enclose 50 and 95 %, dashed lines mark "
    "the median and the central 95 %.",
    "records": "Every site: daily record with fitted drift; the series subtracted from it; what remains, with the "
    "fitted annual cycle.",
}
"""Name of each figure and what it shows."""

_QUANTITIES = (
    ("amplitude / hPa", "amplitude_hpa", ".3f"),
    ("in phase / hPa", "in_phase_hpa", ".3f"),
    ("quadrature / hPa", "quadrature_hpa", ".3f"),
    ("mm of fresh water", "water_mm", ".2f"),
    ("mm of sea water", "sea_water_mm", ".2f"),
    ("Gt", "mass_gt", ".0f"),
    ("peak, days after 1 January", "peak_day", ".1f"),
)


def report_page(estimate: Estimate, pictures: Mapping[str, bytes], *, command: str) -> str:
    """Fill the report.

    Parameters
    ----------
    estimate : Estimate
    pictures : mapping of str to bytes
        PNG images under the names of `PICTURES`.
    command : str
        The command that repeats the run.

    Returns
    -------
    str
        HTML with everything inside it.
    """
    summary = estimate.summary
    template = Environment(autoescape=True, undefined=StrictUndefined).from_string(TEMPLATE)
    return template.render(
        summary=summary,
        version=estimate.provenance["massfit"],
        seed=estimate.network.settings.posterior.seed,
        sentence=answer_sentence(summary),
        images={name: "data:image/png;base64," + base64.b64encode(data).decode() for name, data in pictures.items()},
        alt=PICTURES,
        quantities=[_quantity(label, summary[key], form) for label, key, form in _QUANTITIES],
        warnings=warning_lines(summary),
        shares=[(SHARE_WORDS[name], f"{100 * share:.1f} %") for name, share in summary["variance_share"].items()],
        alternatives=[_alternative(row, summary["reference_year"]) for row in summary["alternatives"]],
        trust=trust_sentence(summary),
        sites=_sites(estimate),
        actions=[row for reduction in estimate.reductions for row in _actions(reduction)],
        command=command,
        versions=", ".join(f"{name} {value}" for name, value in estimate.provenance["versions"].items()),
        inputs=sorted(estimate.network.inputs.items()),
    )


def _quantity(label: str, value: Mapping[str, Any], form: str) -> list[str]:
    centre = [f"{value[key]:{form}}" for key in ("median", "mean", "sd")]
    regions = [f"{value[key][0]:{form}} to {value[key][1]:{form}}" for key in ("region50", "region95")]
    return [label, *centre, *regions]


def _alternative(row: Mapping[str, Any], year: int) -> list[str]:
    phasor = complex(row["in_phase_hpa"], row["quadrature_hpa"])
    return [
        row["name"],
        f"{row['shift_sd']:.2f}",
        f"{row['sd_ratio']:.2f}",
        f"{abs(phasor):.3f}",
        spoken_date(float(peak_days(phasor)), year),
    ]


def _sites(estimate: Estimate) -> list[list[str]]:
    year = estimate.summary["reference_year"]
    by_id = {reduction.site.id: reduction for reduction in estimate.reductions}
    rows = []
    for entry in estimate.summary["sites"]:
        reduction = by_id[entry["id"]]
        phasor, admittance = complex(*entry["phasor_hpa"]), complex(*entry["admittance"])
        rows.append(
            [
                entry["id"] + (" *" if entry["warnings"] else ""),
                f"{reduction.site.latitude_deg:.2f}",
                f"{reduction.site.longitude_deg:.2f}",
                str(int(reduction.used.sum())),
                f"{abs(phasor):.2f}",
                spoken_date(float(peak_days(phasor)), year),
                f"{reduction.fit.reduced_sd / 100.0:.2f}",
                f"{abs(admittance):.3f}",
                f"{float(delay_days(admittance)):.1f}",
                f"{entry['standardised_residual']:.2f}",
                f"{entry['outlier_probability']:.2f}",
            ]
        )
    return rows


def _actions(reduction: SiteReduction) -> list[list[str]]:
    rows = []
    for daily in reduction.daily:
        said = [(action, f" ({action.detail})" if action.detail else "") for action in daily.actions]
        done = "; ".join(f"{action.what}: {action.count}{detail}" for action, detail in said)
        rows.append([daily.deployment, str(len(daily.time)), done])
    return rows
