"""What `massfit phasors` prints: the table of the sites, and what to beware of, in 80 columns."""

from collections.abc import Mapping
from typing import Any

from massfit.report.words.names import fitted, padded, wrapped
from massfit.report.words.run_text import WIDTH, warning_lines

_NOTE = (
    "sd beside amplitude and peak day, to first order; record: sd of what remains of the daily record; drift: what "
    "drift and steps widen the sigma by; p: portmanteau test of the whitened residuals; M: ocean models subtracted; "
    "* has a warning"
)


def site_text(summary: Mapping[str, Any]) -> str:
    """Write the table of the sites.

    Parameters
    ----------
    summary : mapping
        The content of `phasors.json`.

    Returns
    -------
    str
        Lines of at most 80 columns.
    """
    widths = {"hPa": 6, "sd": 7, "peak day": 10, "sd ": 6, "days": 7, "record": 8, "drift": 7, "p": 9, "M": 4}
    head = f"{'Site':<14}" + "".join(f"{name.strip():>{width}}" for name, width in widths.items())
    blocks = [
        [fitted(f"massfit: {summary['network']}, the sites", WIDTH)],
        [head, *(_row(site) for site in summary["sites"]), *wrapped(_NOTE, WIDTH)],
        _warnings(summary),
    ]
    return "\n\n".join("\n".join(block) for block in blocks if block)


def _row(site: Mapping[str, Any]) -> str:
    judged = site["judged"] or {}
    return (
        f"{padded(site['id'], 13)} {site['amplitude_hpa']:>6.2f}{site['amplitude_sd_hpa']:>7.3f}"
        f"{site['peak_day']:>10.1f}{site['peak_sd_days']:>6.1f}{_spelt(site['days'], '.0f', 7)}"
        f"{_spelt(site['reduced_sd_hpa'], '.2f', 8)}{_spelt(judged.get('inflation'), '.2f', 7)}"
        f"{_spelt(judged.get('portmanteau_p'), '.2g', 9)}{len(site['models']):>4}{' *' if site['warnings'] else ''}"
    )


def _spelt(value: float | None, form: str, width: int) -> str:
    return f"{'-' if value is None else format(value, form):>{width}}"


def _warnings(summary: Mapping[str, Any]) -> list[str]:
    lines = []
    for text in warning_lines(summary):
        lines += wrapped(text, WIDTH, first="  - ", rest="    ")
    return ["Warnings", *lines] if lines else []
