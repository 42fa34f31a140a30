"""The summary at the end of a run: plain text that fits 80 columns."""

from collections.abc import Mapping
from typing import Any

from massfit.phasor import delay_days, peak_days
from massfit.report.words.comparison_text import verdict
from massfit.report.words.names import fitted, padded, wrapped
from massfit.results.answer import date_range, spoken_date, spoken_range

WIDTH = 80

ALTERNATIVES_NOTE = (
    "shift: of the mean phasor, in standard deviations of the answer; width ratio: sd over that of the answer; each of "
    "the component, in phase or quadrature, that moves more. s_common: the error a model makes at every site"
)
"""What the two numbers beside another choice are."""

SHARE_WORDS = {
    "record": "record noise and drift",
    "site_scatter": "site scatter",
    "group": "scatter within groups",
    "model_local": "models at a site",
    "model_spread": "model spread (common)",
    "atmosphere": "air pressure",
    "year": "year to year",
    "fingerprint": "fingerprint",
    "scales": "unknown scales",
}


def summary_text(summary: Mapping[str, Any]) -> str:
    """Write the answer, what it rests on and what to beware of.

    Parameters
    ----------
    summary : mapping
        The content of `estimate.json`.

    Returns
    -------
    str
        Lines of at most 80 columns.
    """
    blocks = [
        _answer(summary),
        _shares(summary),
        _alternatives(summary),
        _sites(summary),
        _trust(summary),
        _predictive(summary),
        _calibration(summary),
        _satellites(summary),
        _warnings(summary),
    ]
    return "\n\n".join("\n".join(block) for block in blocks if block)


def _answer(summary: Mapping[str, Any]) -> list[str]:
    year = summary["reference_year"]
    rows = [("amplitude", "amplitude_hpa", "hPa", ".3f"), ("", "water_mm", "mm of fresh water", ".2f")]
    rows += [("", "sea_water_mm", "mm of sea water", ".2f"), ("", "mass_gt", "Gt", ".0f")]
    lines = [
        fitted(f"massfit: {summary['network']}", WIDTH),
        "Annual cycle of the mass of the whole ocean, median and 95 % region",
        "",
    ]
    for label, key, unit, form in rows:
        value = summary[key]
        lines.append(f"  {label:<10}{value['median']:>9{form}} {unit:<18} {spoken_range(value['region95'], form)}")
    day = summary["peak_day"]
    lines.append(f"  {'peak':<10}{spoken_date(day['median'], year):>16}            {date_range(day['region95'], year)}")
    return lines


def _shares(summary: Mapping[str, Any]) -> list[str]:
    shares = sorted(summary["variance_share"].items(), key=lambda item: -item[1])
    words = [f"{SHARE_WORDS.get(name, name)} {100 * share:.0f} %" for name, share in shares if share >= 0.005]
    return wrapped("Where the variance comes from: " + ", ".join(words) + ".", WIDTH, rest="  ")


def _alternatives(summary: Mapping[str, Any]) -> list[str]:
    if "what_if" in summary:
        return _what_if(summary)
    rows = summary["alternatives"]
    if not rows:
        return []
    lines = [f"{'If instead':<48}{'shift / sd':>14}{'width ratio':>14}"]
    lines += [f"  {padded(row['name'], 46)}{row['shift_sd']:>14.2f}{row['sd_ratio']:>14.2f}" for row in rows]
    return lines + wrapped(ALTERNATIVES_NOTE, WIDTH)


def _what_if(summary: Mapping[str, Any]) -> list[str]:
    """List every other choice, drawn anew, under the heading of its kind."""
    lines = [f"{'If instead':<45}{'shift / sd':>11}{'width':>7}{'hPa':>7}{'peak day':>9}"]
    kind = None
    for row in summary["what_if"]:
        if row["kind"] != kind:
            lines.append(f"  {row['kind']}")
            kind = row["kind"]
        mark = "" if row["converged"] else "!"
        lines.append(
            f"    {padded(row['name'], 41)}{row['shift_sd']:>11.2f}{row['sd_ratio']:>7.2f}"
            f"{row['amplitude_hpa']:>7.3f}{row['peak_day']:>9.1f}{mark}"
        )
    unsure = [] if all(row["converged"] for row in summary["what_if"]) else wrapped("! did not converge", WIDTH)
    return lines + wrapped(ALTERNATIVES_NOTE, WIDTH) + unsure


def _sites(summary: Mapping[str, Any]) -> list[str]:
    head = f"{'Site':<14}{'hPa':>7}{'peak day':>10}{'ratio':>8}{'delay d':>9}{'residual':>10}{'outlier':>9}"
    lines = [head]
    for site in summary["sites"]:
        phasor, admittance = complex(*site["phasor_hpa"]), complex(*site["admittance"])
        day, delay = float(peak_days(phasor)), float(delay_days(admittance))
        mark = " *" if site["warnings"] else ""
        lines.append(
            f"{padded(site['id'], 13)} {abs(phasor):>7.2f}{day:>10.1f}{abs(admittance):>8.3f}{delay:>9.1f}"
            f"{site['standardised_residual']:>10.2f}{site['outlier_probability']:>9.2f}{mark}"
        )
    note = (
        "hPa and peak day: the site's own phasor, mean over models; ratio and delay of its fingerprint; "
        "residual against the other sites, in sigmas; * has a warning"
    )
    return lines + wrapped(note, WIDTH)


def trust_sentence(summary: Mapping[str, Any]) -> str:
    """Say whether the sampler converged and how far the second route differs.

    Parameters
    ----------
    summary : mapping
        The content of `estimate.json`.

    Returns
    -------
    str
    """
    state = summary["convergence"]
    verdict = "Converged" if state["converged"] else "NOT CONVERGED: do not use this number"
    return (
        f"{verdict}: R-hat {state['rhat_max']:.3f}, effective draws {state['ess_bulk_min']:.0f} (bulk) "
        f"and {state['ess_tail_min']:.0f} (tail); the second route differs by "
        f"{state['second_route_mean_shift_sd']:.3f} sd and a width ratio of {state['second_route_sd_ratio']:.3f}."
    )


def warning_lines(summary: Mapping[str, Any]) -> list[str]:
    """Collect the warnings of the run and of its sites.

    Parameters
    ----------
    summary : mapping
        The content of `estimate.json`.

    Returns
    -------
    list of str
    """
    of_sites = [f"{site['id']}: {text}" for site in summary["sites"] for text in site["warnings"]]
    return [*summary["warnings"], *of_sites]


def _trust(summary: Mapping[str, Any]) -> list[str]:
    return wrapped(trust_sentence(summary), WIDTH, rest="  ")


def _predictive(summary: Mapping[str, Any]) -> list[str]:
    check = summary["predictive_check"]
    return wrapped(" ".join(check["sentences"]), WIDTH, rest="  ") if check["agrees"] else []


def _calibration(summary: Mapping[str, Any]) -> list[str]:
    return wrapped(summary["calibration"]["sentence"], WIDTH, rest="  ") if "calibration" in summary else []


def _satellites(summary: Mapping[str, Any]) -> list[str]:
    return wrapped(verdict(summary["comparison"]), WIDTH, rest="  ") if "comparison" in summary else []


def _warnings(summary: Mapping[str, Any]) -> list[str]:
    lines = []
    for text in warning_lines(summary):
        lines += wrapped(text, WIDTH, first="  - ", rest="    ")
    return ["Warnings", *lines] if lines else []
