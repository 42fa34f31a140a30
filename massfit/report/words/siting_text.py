"""Which sites carry the answer, in words and tables of 80 columns."""

import textwrap
from collections.abc import Iterator, Mapping
from typing import Any

from massfit.report.words.names import fitted

SHOWN_SITES = 30
"""Sites of a table; those that move the answer least are left out."""

SHOWN_SIZES = 12
"""Sizes of a table, evenly spread."""

ROLE = (
    "These are diagnostics: they follow the phasors. Choose sites by quietness and by the quality of their records, "
    "never by how well they agree."
)


def siting_text(siting: Mapping[str, Any]) -> str:
    """Lay out which sites carry the answer for a terminal.

    Parameters
    ----------
    siting : mapping
        `siting` of `estimate.json`.

    Returns
    -------
    str
    """
    blocks = (_sites(siting), _groups(siting), _sizes(siting), _order(siting))
    lines = [_headline(siting), *textwrap.wrap(ROLE, 80)]
    return "\n\n".join(["\n".join(lines), *("\n".join(block) for block in (list(b) for b in blocks) if block)])


def _headline(siting: Mapping[str, Any]) -> str:
    whole, count = siting["whole"], len(siting["without_sites"])
    return "\n".join(
        textwrap.wrap(
            f"With all {count} sites the width is {whole['width_hpa']:.3f} hPa (root mean square of the two "
            f"components). {strongest(siting)}",
            80,
        )
    )


def strongest(siting: Mapping[str, Any]) -> str:
    """Name the site whose absence moves the answer most, and the one whose absence widens it most."""
    rows = siting["without_sites"]
    moves = max(rows, key=lambda row: abs(row["shift_sd"]))
    widens = max(rows, key=lambda row: row["width_hpa"])
    return (
        f"Without {moves['name']} the answer moves most, by {abs(moves['shift_sd']):.2f} of its standard deviation; "
        f"without {widens['name']} it is widest, {widens['width_hpa']:.3f} hPa."
    )


def _sites(siting: Mapping[str, Any]) -> Iterator[str]:
    yield f"{'without':<16}{'shift':>7}{'width':>7}{'information':>13}{'leverage':>10}{'wrong':>7}{'1 sd needs':>12}"
    yield f"{'':<16}{'sd':>7}{'ratio':>7}{'lost %':>13}{'%':>10}{'p':>7}{'hPa':>12}"
    rows = sorted(siting["without_sites"], key=lambda row: -abs(row["shift_sd"]))
    whole = siting["whole"]["width_hpa"]
    for row in rows[:SHOWN_SITES]:
        needed = row["needed_offset_hpa"]
        text = "none" if needed is None else f"{needed:+.2f}"
        shares = (100.0 * sum(row[key]) / 2.0 for key in ("information_share", "leverage"))
        information, leverage = shares
        yield (
            f"{fitted(row['name'], 15):<16}{row['shift_sd']:>7.2f}{row['width_hpa'] / whole:>7.3f}"
            f"{information:>13.1f}{leverage:>10.1f}{row['outlier_probability']:>7.2f}{text:>12}"
        )
    if len(rows) > SHOWN_SITES:
        yield f"... and {len(rows) - SHOWN_SITES} sites that move it less; all are in estimate.json"


def _groups(siting: Mapping[str, Any]) -> Iterator[str]:
    if not siting["without_groups"]:
        return
    yield f"{'without group':<28}{'sites left':>11}{'shift / sd':>12}{'width ratio':>13}"
    for row in sorted(siting["without_groups"], key=lambda row: -abs(row["shift_sd"])):
        ratio = row["width_hpa"] / siting["whole"]["width_hpa"]
        yield f"{fitted(row['name'], 27):<28}{row['sites']:>11}{row['shift_sd']:>12.2f}{ratio:>13.3f}"


def _sizes(siting: Mapping[str, Any]) -> Iterator[str]:
    rows = siting["sizes"]
    step = max(1, -(-len(rows) // SHOWN_SIZES))
    best = next(path["steps"] for path in siting["paths"] if path["criterion"] == "A")
    yield f"{'sites kept':<12}{'width of random subsets / hPa':>32}{'best by design / hPa':>24}"
    yield f"{'':<12}{'5 %':>12}{'median':>10}{'95 %':>10}{'':>14}"
    for row in [*rows[:-1:step], rows[-1]]:
        low, middle, high = row["width_hpa"]
        yield f"{row['sites']:<12}{low:>12.3f}{middle:>10.3f}{high:>10.3f}{best[row['sites'] - 1]['width_hpa']:>24.3f}"
    yield from textwrap.wrap(smallest_sentence(siting), 80)


def smallest_sentence(siting: Mapping[str, Any]) -> str:
    """Say how small a network may be for the width asked for."""
    found = siting["smallest"]
    target = found["target_width_hpa"]
    if found["chosen"] is None:
        return f"No subset keeps a width of {target:.3f} hPa."
    sizes = [
        f"{found[key]} for {text}"
        for key, text in (("half_of_subsets", "half of the random subsets"), ("most_subsets", "95 % of them"))
        if found[key] is not None
    ]
    random = f"; it takes {' and '.join(sizes)}" if sizes else ""
    count = found["chosen"]
    return (
        f"{count} site{'s' * (count != 1)} chosen by design keep{'s' * (count == 1)} a width of {target:.3f} hPa"
        f"{random}: {', '.join(found['chosen_sites'])}."
    )


def _order(siting: Mapping[str, Any]) -> Iterator[str]:
    rows, agreeable = siting["ordered"], siting["agreeable"]
    step = max(1, -(-len(rows) // SHOWN_SIZES))
    yield from textwrap.wrap(
        f"Keeping sites of small values first ({siting['ordered_by']}), and, as a warning only, those that agree:", 80
    )
    yield f"{'sites':<7}{'added':<16}{'amplitude':>11}{'peak day':>10}{'width':>8}{'agreeable: amp.':>20}{'width':>8}"
    chosen = sorted({*range(0, len(rows), step), len(rows) - 1})
    for n in chosen:
        row, other = rows[n], agreeable[n]
        yield (
            f"{row['sites']:<7}{fitted(row['added'], 15):<16}{row['amplitude_hpa']:>11.3f}{row['peak_day']:>10.1f}"
            f"{row['width_hpa']:>8.3f}{other['amplitude_hpa']:>20.3f}{other['width_hpa']:>8.3f}"
        )
