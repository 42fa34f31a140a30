"""The page of `massfit phasors`: every site on its own, self-contained, no scripts, no network."""

import re
from collections.abc import Mapping, Sequence
from typing import Any

from jinja2 import Environment, StrictUndefined

from massfit.phasor import peak_days
from massfit.report.pages.page_parts import MACROS, STYLE, as_data, made_with
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
    template = Environment(autoescape=True, undefined=StrictUndefined, trim_blocks=True).from_string(_TEMPLATE)
    return template.render(
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


_TEMPLATE = (
    MACROS
    + """<!DOCTYPE html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta http-equiv="Content-Security-Policy"
 content="default-src 'none'; img-src data:; style-src 'unsafe-inline'">
<meta name="viewport" content="width=device-width, initial-scale=1">
<title>{{ summary.network }}: the sites</title>
<style>"""
    + STYLE
    + """</style>
</head>
<body>
<header>
<h1>{{ summary.network }}: the sites</h1>
<p class="small">Annual phasor of each site of the network, and what it was made of; no network answer. massfit
{{ version }}. Results are for research.</p>
</header>
<main>
{{ table('sites') }}
<p class="small">Days: those that the fit used; coverage: their share of the days from the first to the last. Amplitude
and peak: mean over the models, with their standard deviations to first order. Record sd: of what remains of the daily
record. Widened by drift: sigma of the phasor over that with level and annual cycle alone. Whitened mean square: 1 where
the fitted noise is that of the record. * has a warning.</p>
<nav aria-label="Contents"><ul>
{% if summary.warnings %}<li><a href="#beware">Beware</a></li>{% endif %}
<li><a href="#assumed">What was assumed</a></li>
{% if tables.corrections %}<li><a href="#corrections">The corrections</a></li>{% endif %}
{% for site, name in sites %}<li><a href="#site{{ loop.index }}">{{ site.id }}</a></li>{% endfor %}
{% if tables.actions %}<li><a href="#records">The records</a></li>{% endif %}
<li><a href="#provenance">Where it comes from</a></li>
</ul></nav>
{% if summary.warnings %}

<h2 id="beware">Beware</h2>
<ul>{% for text in summary.warnings %}<li>{{ text }}</li>{% endfor %}</ul>
{% endif %}

<h2 id="assumed">What was assumed</h2>
<ul>{% for text in summary.assumptions %}<li>{{ text }}</li>{% endfor %}</ul>
{% if tables.left_out %}{{ table('left_out') }}{% endif %}
{% if tables.corrections %}

<h2 id="corrections">The corrections and what each did</h2>
<p>Annual cycle, in phase and quadrature, hPa, of the daily record and of every series that was taken off it, by the
linear operator of the site's own fit. The phasor of the site, the tides, the air pressure and the mean of the models
add up to the record. A series that is zero throughout is not listed.</p>
{{ table('corrections') }}
{% if tables.lines %}
<h3>Long-period tides</h3>
{{ table('lines') }}
{% endif %}
{% endif %}

<h2 id="figures">How to read the figures</h2>
<p>{{ caption }}</p>
{% for site, name in sites %}

<h2 id="site{{ loop.index }}">{{ site.id }}</h2>
<p>{{ spoken[site.id][0] | upper }}{{ spoken[site.id][1:] }}</p>
{% if site.warnings %}<ul>{% for text in site.warnings %}<li>{{ text }}</li>{% endfor %}</ul>{% endif %}
{% if name %}{{ figure(name) }}{% else %}<p>This site was reduced elsewhere: there is no record to show.</p>{% endif %}
{% endfor %}
{% if tables.actions %}

<h2 id="records">Everything done to each record</h2>
{{ table('actions') }}
{% endif %}

<h2 id="provenance">Where it comes from, and how to repeat it</h2>
<dl>{% for name, value in made_with %}<dt>{{ name }}</dt><dd>{{ value }}</dd>{% endfor %}</dl>
<p class="small">Every setting is in run.json beside this page.</p>
{% if tables.inputs %}{{ table('inputs') }}{% endif %}
</main>
</body>
</html>
"""
)
