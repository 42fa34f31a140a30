"""The one-page report: self-contained, no scripts, no network."""

import base64
from collections.abc import Mapping
from typing import Any

import xarray as xr
from jinja2 import Environment, StrictUndefined

from massfit.phasor import delay_days, peak_days
from massfit.report.page_template import TEMPLATE
from massfit.report.text import ALTERNATIVES_NOTE, SHARE_WORDS, trust_sentence, warning_lines
from massfit.results.answer import answer_sentence, spoken_date
from massfit.results.finished import FinishedRun

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


def report_page(run: FinishedRun, pictures: Mapping[str, bytes]) -> str:
    """Fill the report.

    Parameters
    ----------
    run : FinishedRun
    pictures : mapping of str to bytes
        PNG images under the names of `PICTURES`.

    Returns
    -------
    str
        HTML with everything inside it.
    """
    summary, provenance = run.summary, run.provenance
    template = Environment(autoescape=True, undefined=StrictUndefined).from_string(TEMPLATE)
    return template.render(
        summary=summary,
        version=provenance["massfit"],
        seed=provenance["seed"],
        sentence=answer_sentence(summary),
        images={name: "data:image/png;base64," + base64.b64encode(data).decode() for name, data in pictures.items()},
        alt=PICTURES,
        quantities=[_quantity(label, summary[key], form) for label, key, form in _QUANTITIES],
        warnings=warning_lines(summary),
        shares=[(SHARE_WORDS[name], f"{100 * share:.1f} %") for name, share in summary["variance_share"].items()],
        alternatives=[_alternative(row, summary["reference_year"]) for row in summary["alternatives"]],
        alternatives_note=f"{ALTERNATIVES_NOTE[0].upper()}{ALTERNATIVES_NOTE[1:]}.",
        trust=trust_sentence(summary),
        sites=[_site(entry, summary["reference_year"]) for entry in summary["sites"]],
        actions=_actions(summary, run.datasets["reduced_records.nc"]) if "reduced_records.nc" in run.datasets else [],
        command=provenance["command"],
        versions=", ".join(f"{name} {value}" for name, value in provenance["versions"].items()),
        inputs=sorted(provenance["inputs"].items()),
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


def _site(entry: Mapping[str, Any], year: int) -> list[str]:
    phasor, admittance = complex(*entry["phasor_hpa"]), complex(*entry["admittance"])
    return [
        entry["id"] + (" *" if entry["warnings"] else ""),
        f"{entry['latitude']:.2f}",
        f"{entry['longitude']:.2f}",
        "unknown" if entry["days"] is None else str(entry["days"]),
        f"{abs(phasor):.2f}",
        spoken_date(float(peak_days(phasor)), year),
        "unknown" if entry["reduced_sd_hpa"] is None else f"{entry['reduced_sd_hpa']:.2f}",
        f"{abs(admittance):.3f}",
        f"{float(delay_days(admittance)):.1f}",
        f"{entry['standardised_residual']:.2f}",
        f"{entry['outlier_probability']:.2f}",
    ]


def _actions(summary: Mapping[str, Any], records: xr.Dataset) -> list[list[str]]:
    """Every deployment, its number of daily means and what was done to it."""
    days = dict(zip(records["deployment"].values.tolist(), records["row_size"].values.tolist(), strict=True))
    rows = []
    for deployment, actions in summary["actions"].items():
        said = [(action, f" ({action['detail']})" if action["detail"] else "") for action in actions]
        done = "; ".join(f"{action['what']}: {action['count']}{detail}" for action, detail in said)
        rows.append([deployment, str(days[deployment]), done])
    return rows
