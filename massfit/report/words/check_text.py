"""What `massfit check` prints: sites with their coverage, what will be assumed, and warnings, in 80 columns."""

import json
import textwrap
from collections.abc import Mapping, Sequence
from typing import Any

from massfit.errors import printable
from massfit.records.interval import spoken_interval

WIDTH = 80
YEARS_A_LINE = 5

BLOCKS = ("█", "▓", "░", "x", "·")
LETTERS = ("#", "+", "-", "x", ".")
"""At least 90 % of the days of a month, at least half, fewer, none of those there are, no data."""


def check_text(found: Mapping[str, Any], *, plain: bool = False) -> str:
    """Write what a run would use.

    Parameters
    ----------
    found : mapping
        From `pipeline.check`; without a network where it could not be read.
    plain : bool
        Only ASCII in the calendar.

    Returns
    -------
    str
        Lines of at most 80 columns.

    Examples
    --------
    >>> print(check_text({"network": "N", "reference_year": 2016, "window": [None, None], "sites": [], "loads": [],
    ...     "assumptions": ["Nothing."], "warnings": [], "faults": []}))
    N: 0 sites; phases count from 1 January 2016; window: all records
    <BLANKLINE>
    What will be assumed
      - Nothing.
    """
    if found["faults"] and not found["sites"]:
        return textwrap.fill(f"{found['source']} cannot be used as it is.", WIDTH)
    marks = LETTERS if plain else BLOCKS
    head = _head(found)
    if found["faults"]:
        head = textwrap.wrap(f"{found['source']} cannot be used as it is. This could be read of it:", WIDTH) + head
    if any(site["months"] for site in found["sites"]):
        head += textwrap.wrap(_legend(marks), WIDTH)
    blocks = [head, *(_site(site, marks) for site in found["sites"])]
    blocks += [_list("What will be assumed", found["assumptions"]), _list("Warnings", found["warnings"])]
    return "\n\n".join("\n".join(map(printable, block)) for block in blocks if block)


def in_json(found: Mapping[str, Any]) -> str:
    """Write what a run would use as JSON, in ASCII.

    Parameters
    ----------
    found : mapping
        From `pipeline.check`.

    Returns
    -------
    str
    """
    return json.dumps(found, indent=2, allow_nan=False)


def _head(found: Mapping[str, Any]) -> list[str]:
    first, last = found["window"]
    window = f"{first or 'first record'} to {last or 'last record'}" if first or last else "all records"
    count = len(found["sites"])
    rest = f"phases count from 1 January {found['reference_year']}; window: {window}"
    return textwrap.wrap(f"{found['network']}: {count} site{'s' if count != 1 else ''}; {rest}", WIDTH)


def _legend(marks: Sequence[str]) -> str:
    most, half, few, unused, none = marks
    return (
        f"One sign a month: {most} 90 % of its days or more, {half} half, {few} fewer, {unused} data but none used, "
        f"{none} no data"
    )


def _site(site: Mapping[str, Any], marks: Sequence[str]) -> list[str]:
    lines = [*_title(site), *_length(site), *_calendar(site["months"], marks)]
    for deployment in site["deployments"]:
        lines += _deployment(deployment)
    lines += _models(site)
    for note in site["notes"]:
        lines += _wrapped(f"! {note}")
    return lines


def _title(site: Mapping[str, Any]) -> list[str]:
    depth = "depth not given" if site["depth_m"] is None else f"{site['depth_m']:g} m deep"
    place = f"{_degrees(site['latitude'], 'NS')} {_degrees(site['longitude'], 'EW')}"
    group = f", {site['group']}" if site["group"] else ""
    text = f"{site['id']}: {place}, {depth}, {100 * site['ocean_fraction']:.0f} % ocean{group}"
    return textwrap.wrap(text, WIDTH, subsequent_indent="  ")


def _degrees(value: float, sides: str) -> str:
    if sides == "EW" and value > 180.0:
        value -= 360.0
    return f"{abs(value):.2f} {sides[0] if value >= 0 else sides[1]}"


def _length(site: Mapping[str, Any]) -> list[str]:
    if site["left_out"]:
        return _wrapped(f"LEFT OUT: {site['left_out']}")
    if site["reduced_elsewhere"]:
        first, last = site["reduced_elsewhere"]["years"]
        models = ", ".join(site["reduced_elsewhere"]["subtracted"]) or "no model"
        return _wrapped(f"reduced elsewhere, {first} to {last}, with {models} subtracted")
    verdict = "" if site["long_enough"] else "; SHORT: drift and annual cycle part only beyond 1.5 years"
    return _wrapped(f"{site['days']} days well covered, {site['years']:.2f} years{verdict}")


def _calendar(months: Mapping[str, Sequence[float | None]], marks: Sequence[str]) -> list[str]:
    years = list(months)
    lines = []
    for start in range(0, len(years), YEARS_A_LINE):
        row = years[start : start + YEARS_A_LINE]
        lines.append("  " + " ".join(f"{year:<12}" for year in row).rstrip())
        lines.append("  " + " ".join("".join(_mark(share, marks) for share in months[year]) for year in row))
    return lines


def _mark(share: float | None, marks: Sequence[str]) -> str:
    most, half, few, unused, none = marks
    if share is None:
        return none
    if share == 0.0:
        return unused
    return most if share >= 0.9 else half if share >= 0.5 else few


def _deployment(deployment: Mapping[str, Any]) -> list[str]:
    number = deployment["label"].rpartition("/")[2]
    span = f"{str(deployment['start'])[:10]} to {str(deployment['end'])[:10]}"
    steps = deployment["steps"]
    declared = f"{len(steps)} declared" if isinstance(steps, list) else {"find": "searched for"}.get(steps, steps)
    missing = f", {deployment['missing']} missing" if deployment["missing"] else ""
    every = spoken_interval(deployment["sampling_s"])
    text = (
        f"{number}. {span}, every {every}, {deployment['samples']} samples{missing}; "
        f"{deployment['units'] or 'Pa'}, median {deployment['median_hpa']:.6g} hPa; drift {deployment['drift']}, "
        f"steps {declared}{_first_days(deployment)}; {deployment['file'] or 'in memory'}"
    )
    lines = _wrapped(text)
    for note in deployment["notes"]:
        lines += textwrap.wrap(note, WIDTH, initial_indent="     ", subsequent_indent="       ")
    return lines


def _first_days(deployment: Mapping[str, Any]) -> str:
    """Say which ramps are declared, what is done about settling, and what calibrations there are, if not the usual."""
    ramps, settling, readings = deployment["ramps"], deployment["settling"], deployment["calibrations"]
    days = settling if isinstance(settling, str) else f"{settling:g} days left out"
    words = [f", {len(ramps)} ramps declared"] * bool(ramps) + [f", settling: {days}"] * (settling != "model")
    return "".join(words + [f", {readings} calibrations"] * bool(readings))


def _models(site: Mapping[str, Any]) -> list[str]:
    if site["left_out"]:
        return []
    words = []
    for model in site["models"]:
        span = f"{str(model['start'])[:10]} to {str(model['end'])[:10]}" if model["start"] else "no value"
        absent = "" if model["present"] else f" MISSING HERE ({100 * model['covered']:.0f} % of the days)"
        words.append(f"{model['name']}{absent} {span}")
    return _wrapped("models: " + "; ".join(words)) if words else []


def _wrapped(text: str) -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent="  ", subsequent_indent="     ")


def _list(title: str, texts: Sequence[str]) -> list[str]:
    lines = []
    for text in texts:
        lines += textwrap.wrap(text, WIDTH, initial_indent="  - ", subsequent_indent="    ")
    return [title, *lines] if lines else []
