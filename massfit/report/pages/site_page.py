"""The page of `massfit phasors`: every site on its own, self-contained, no network."""

import re
from collections.abc import Mapping, Sequence
from typing import Any

from massfit.phasor import peak_days
from massfit.report.pages.frame import filled
from massfit.report.pages.page_parts import as_data, made_with
from massfit.report.pages.page_tables import Table, actions_table, corrections_table, input_table, left_out_table
from massfit.results.answer import spoken_date
from massfit.results.finished import FinishedRun

CAPTION = (
    "Above: the daily record with the fitted drift, what was subtracted (light blue: range of the circulation "
    "models), what remains. Below, from the left: power of the residuals (blue) against what the fitted noise lets "
    "expect there (black, with 95 % in grey; dotted: the noise itself; dashed: one cycle a year); correlation of the "
    "whitened residuals (white ones stay within the grey 19 times in 20); the phasor of each year alone (orange, 1 "
    "sigma, with noise and drift times at their most probable) about that of the whole record (blue, 95 %, all that "
    "included); how the phasor of the record (open circle) becomes that of the site (blue) as each series is taken "
    "off, in the colours of the panel of what was subtracted."
)


def picture_name(place: int, site: str) -> str:
    """File name of the figure of a site, without its ending.

    Examples
    --------
    >>> picture_name(3, "North/../Rise <3>")
    'site_03_north_rise_3'
    """
    words = re.sub(r"[^a-z0-9]+", "_", site.casefold()).strip("_")[:40]
    return f"site_{place:02d}_{words}".rstrip("_")


def site_page(run: FinishedRun, pictures: Mapping[str, bytes]) -> str:
    """Fill the page.

    Parameters
    ----------
    run : FinishedRun
        Of `massfit phasors`.
    pictures : mapping of str to bytes
        PNG images of the sites that have records, by the names of :func:`picture_name`, in the order of the sites.

    Returns
    -------
    str
        HTML with everything inside it.
    """
    summary = run.summary
    drawn = [site["id"] for site in summary["sites"] if site.get("drift")]
    names = dict(zip(drawn, pictures, strict=True))
    return filled(
        "sites.html",
        summary=summary,
        version=run.provenance["massfit"],
        sites=[(site, names.get(site["id"])) for site in summary["sites"]],
        images=as_data(pictures),
        captions=dict.fromkeys(pictures, ""),
        caption=CAPTION,
        alternatives_text={
            names[site["id"]]: f"{site['id']}: {_spoken(site, summary['reference_year'])}"
            for site in summary["sites"]
            if site["id"] in names
        },
        spoken={site["id"]: _spoken(site, summary["reference_year"]) for site in summary["sites"]},
        made_with=made_with(run.provenance),
        tables={
            "sites": overview_table(summary["sites"], summary["reference_year"]),
            "corrections": corrections_table(summary),
            "lines": tide_table(summary["sites"]),
            "left_out": left_out_table(summary),
            "actions": actions_table(summary, run.datasets.get("reduced_records.nc")),
            "inputs": input_table(run.provenance),
        },
    )


def _spoken(site: Mapping[str, Any], year: int) -> str:
    peak = spoken_date(float(peak_days(complex(*site["phasor_hpa"]))), year)
    models = ", ".join(site["models"]) or "no ocean model"
    return (
        f"amplitude {site['amplitude_hpa']:.2f} \u00b1 {site['amplitude_sd_hpa']:.2f} hPa, peak on {peak} \u00b1 "
        f"{site['peak_sd_days']:.0f} days, with {models} subtracted."
    )


def overview_table(sites: Sequence[Mapping[str, Any]], year: int) -> Table:
    """Tabulate coverage, phasor and standing of every site.

    Parameters
    ----------
    sites : sequence of mapping
        From `phasors.json`.
    year : int
        Reference year.

    Returns
    -------
    Table
    """
    head = (
        "site", "first day", "last day", "days", "coverage", "amplitude / hPa", "peak", "sd / days", "record sd / hPa",
        "widened by drift", "whitened mean square", "portmanteau p", "models",
    )  # fmt: skip
    return Table("The sites", head, [_overview(site, year) for site in sites])


def _overview(site: Mapping[str, Any], year: int) -> list[str]:
    judged = site["judged"] or {}
    day, month = spoken_date(float(peak_days(complex(*site["phasor_hpa"]))), year).split()
    return [
        site["id"] + (" *" if site["warnings"] else ""),
        site.get("first_day") or "",
        site.get("last_day") or "",
        _spelt(site["days"], ".0f"),
        _spelt(site.get("coverage"), ".0%").replace("%", " %"),
        f"{site['amplitude_hpa']:.3f} \u00b1 {site['amplitude_sd_hpa']:.3f}",
        f"{day} {month[:3]}",
        f"{site['peak_sd_days']:.1f}",
        _spelt(site["reduced_sd_hpa"], ".2f"),
        _spelt(judged.get("inflation"), ".2f"),
        _spelt(judged.get("whitened_mean_square"), ".2f"),
        _spelt(judged.get("portmanteau_p"), ".2g"),
        str(len(site["models"])),
    ]


def _spelt(value: float | None, form: str) -> str:
    return "unknown" if value is None else f"{value:{form}}"


def tide_table(sites: Sequence[Mapping[str, Any]]) -> Table | None:
    """Tabulate the amplitude of every line of the long-period tides, by site.

    Parameters
    ----------
    sites : sequence of mapping
        From `phasors.json`.

    Returns
    -------
    Table or None
        None where no long-period tide was taken off.
    """
    known = [site for site in sites if any(row["amplitude_hpa"] for row in site.get("long_period_tides", []))]
    if not known:
        return None
    lines = known[0]["long_period_tides"]
    head = ("site", *(f"{row['line']} ({_period(row['period_days'])})" for row in lines))
    rows = [[site["id"], *(f"{row['amplitude_hpa']:.3f}" for row in site["long_period_tides"])] for site in known]
    share = ["rises and falls with the node by", *(_share(row["nodal_share"]) for row in lines)]
    return Table("Amplitude of each long-period tide, hPa", head, [*rows, share])


def _period(days: float) -> str:
    return f"{days / 365.25:.1f} yr" if days > 400.0 else f"{days:.1f} d"


def _share(share: float) -> str:
    return f"{100.0 * share:.0f} %" if share else ""
