"""What differs between two runs, as plain text that fits 80 columns."""

import textwrap
from collections.abc import Mapping, Sequence
from typing import Any

from massfit.report.words.run_text import WIDTH

_LISTED = 12
"""Most names of one kind that are listed; the rest is counted."""


def contrast_text(differences: Mapping[str, Any], first: str, second: str) -> str:
    """Write what differs between two runs.

    Parameters
    ----------
    differences : mapping
        From `results.contrast.contrast`.
    first, second : str
        The two results folders.

    Returns
    -------
    str
        Lines of at most 80 columns.
    """
    blocks = [
        _runs([first, second], differences["networks"]),
        _answer(differences["answer"]),
        _sites(differences["sites"]),
        _names("Inputs", differences["inputs"]),
        _pairs("Settings", differences["settings"]),
        _pairs("Versions", differences["versions"]),
        _names("Warnings", differences["warnings"]),
    ]
    return "\n\n".join("\n".join(block) for block in blocks)


def _runs(folders: Sequence[str], networks: Sequence[str]) -> list[str]:
    named = [f"{mark}  {folder}: {network}" for mark, folder, network in zip("AB", folders, networks, strict=True)]
    return [line for text in named for line in textwrap.wrap(text, WIDTH, subsequent_indent="   ")]


def _answer(answer: Mapping[str, Any]) -> list[str]:
    a, b = answer["shift_hpa"]
    later = "later" if answer["peak_days"] >= 0 else "earlier"
    return [
        "Answer, B less A",
        f"  phasor     {a:+.3f} in phase, {b:+.3f} quadrature hPa: {answer['shift_sd']:.2f} sd",
        f"  amplitude  {answer['amplitude_hpa']:+.3f} hPa",
        f"  peak       {abs(answer['peak_days']):.1f} days {later} in B",
        f"  width      B's sd is {answer['sd_ratio']:.3f} times A's",
    ]


def _sites(sites: Mapping[str, Any]) -> list[str]:
    moved = sorted((site for site in sites["shared"] if site["shift_sd"] > 0.0), key=lambda site: -site["shift_sd"])
    lines = [f"Sites: {len(sites['shared'])} shared, the phasors of {len(moved)} differ"]
    for site in moved[:_LISTED]:
        a, b = site["shift_hpa"]
        lines.append(f"  {site['id'][:40]:<41}{a:>+8.3f}{b:>+8.3f} hPa{site['shift_sd']:>9.2f} sd")
    if len(moved) > _LISTED:
        lines.append(f"  and {len(moved) - _LISTED} that differ less")
    return lines + _listed("only in A", sites["only_first"]) + _listed("only in B", sites["only_second"])


def _names(title: str, names: Mapping[str, Sequence[str]]) -> list[str]:
    lines = [
        *_listed("changed", names.get("changed", [])),
        *_listed("only in A", names["only_first"]),
        *_listed("only in B", names["only_second"]),
    ]
    return [title, *lines] if lines else [f"{title}: the same"]


def _listed(label: str, names: Sequence[str]) -> list[str]:
    lines = [
        line
        for name in names[:_LISTED]
        for line in textwrap.wrap(f"{label:<10} {name}", WIDTH, initial_indent="  ", subsequent_indent=" " * 13)
    ]
    return lines + ([f"  {label:<10} and {len(names) - _LISTED} more"] if len(names) > _LISTED else [])


def _pairs(title: str, pairs: Mapping[str, Sequence[Any]]) -> list[str]:
    if not pairs:
        return [f"{title}: the same"]
    lines = [title]
    for name, (one, two) in pairs.items():
        lines += textwrap.wrap(f"{name}: {one} in A, {two} in B", WIDTH, initial_indent="  ", subsequent_indent="    ")
    return lines
