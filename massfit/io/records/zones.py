"""Time zones that files name: only UTC is read without being told the offset."""

import re
from collections.abc import Iterable

from massfit.errors import Fault, InputError
from massfit.io.records.deployment import DeploymentFile

_UTC = {"utc", "gmt", "etc/utc", "etc/gmt", "z", "ut", "ut1", "zulu", "universal", "uct", "utc0"}
_HOURS = {
    "hst": -10, "akst": -9, "akdt": -8, "pst": -8, "pdt": -7, "mst": -7, "mdt": -6, "cdt": -5, "est": -5, "edt": -4,
    "cet": 1, "cest": 2, "eet": 2, "eest": 3, "msk": 3, "jst": 9, "kst": 9, "aest": 10, "aedt": 11, "nzst": 12,
    "nzdt": 13,
}  # fmt: skip
"""Abbreviations that mean one zone (common practice; those that mean several are not here)."""
_UTC_FIRST = re.compile(r"(utc|gmt|zulu|universal|greenwich|coordinateduniversal)")
_OFFSET = re.compile(r"(?:utc|gmt)?\s*([+-])\s*(\d{1,2})(?::?(\d{2}))?", re.IGNORECASE)
_ZONE = rf"((?:utc|gmt)\s*[+-]\s*\d{{1,2}}(?::?\d{{2}})?|[+-]\d{{1,2}}:?\d{{2}}|{'|'.join(sorted(_HOURS))}|utc|gmt)"
_CAPITALS = rf"((?:UTC|GMT)\s*[+-]\s*\d{{1,2}}(?::?\d{{2}})?|{'|'.join(sorted(_HOURS)).upper()})"
_SAID = re.compile(
    rf"\btime ?zone\b\W*{_ZONE}\b|\btimes?\b[^.;,]{{0,25}}?\bin {_ZONE}\b|\btime\w*\s*[\[(]\s*{_ZONE}\s*[\])]"
    r"|\b(local (?:standard |civil )?time)\b"
    rf"|(?:\b|_)(?:time|date)s?[\s_:=]+(?:are |is )?(?-i:{_CAPITALS})\b",  # "time est." may be an estimate
    re.IGNORECASE,
)
_SUFFIX = re.compile(r"[\d.]\s*([A-Za-z]{2,5})$")


def zone_of_text(line: str) -> str:
    """Zone that a line of a header gives to the times; empty where it gives none.

    Examples
    --------
    >>> zone_of_text("# Time zone: HST"), zone_of_text("date time (UTC-10) pressure"), zone_of_text("by Est Ltd")
    ('HST', 'UTC-10', '')
    >>> zone_of_text("# operator sheet; times HST"), zone_of_text("date_time_JST;p"), zone_of_text("mean time est. 5 s")
    ('HST', 'JST', '')
    """
    match = _SAID.search(line)
    return "" if match is None else next(group for group in match.groups() if group)


def zone_of_stamp(text: str) -> str:
    """Letters after a stamp that name a zone; empty where there are none.

    Examples
    --------
    >>> zone_of_stamp("2016-01-01 00:30 HST"), zone_of_stamp("2016-01-01T00:30:00Z")
    ('HST', '')
    """
    match = _SUFFIX.search(text)
    return match[1] if match and match[1].casefold() in {*_HOURS, *_UTC} else ""


def zone_hours(zone: str) -> float | None:
    """Hours of a zone ahead of UTC; None where the name does not tell.

    Examples
    --------
    >>> zone_hours("UTC"), zone_hours("HST"), zone_hours("UTC+05:30"), zone_hours("local time")
    (0.0, -10.0, 5.5, None)
    """
    name = re.sub(r"\s+", "", zone).casefold()
    if name in _UTC or (_UTC_FIRST.match(name) and not any(letter.isdigit() for letter in name)):
        return 0.0
    if name in _HOURS:
        return float(_HOURS[name])
    match = _OFFSET.fullmatch(zone.strip())
    if match is None:
        return None
    return float(f"{match[1]}1") * (int(match[2]) + int(match[3] or 0) / 60.0)


def zones_of_header(lines: Iterable[tuple[int, str]]) -> list[tuple[str, int | None]]:
    """Zones that the lines above the data give to the times, each with its line.

    "Local time" alone may be that of the deployment, where the header speaks of UTC too.

    Parameters
    ----------
    lines : iterable of (int, str)
        Line numbers and lines.
    """
    lines = list(lines)
    utc = any(re.search(r"\b(utc|gmt)\b", line, re.IGNORECASE) for _, line in lines)
    found = [(zone_of_text(line), number) for number, line in lines]
    return [(zone, number) for zone, number in found if zone and not (utc and zone.casefold().startswith("local"))]


def require_utc(zones: Iterable[tuple[str, int | None]], entry: DeploymentFile) -> None:
    """Refuse a file that gives its times in another zone than the network file says.

    Parameters
    ----------
    zones : iterable of (str, int or None)
        Zones that the file names, each with its line.
    entry : DeploymentFile
        Its `utc_offset_hours`; where that is stated and the file's name tells no hours, it is believed.

    Raises
    ------
    InputError
    """
    for zone, line in zones:
        hours, stated = zone_hours(zone), entry.utc_offset_hours
        if stated is None and hours != 0.0:
            known = ", the hours by which they are ahead of UTC" if hours is None else f" = {hours:g}"
            problem = f"the file says that its times are in {zone!r}"
            action = f"State utc_offset_hours{known}; 0 if they are UTC"
            raise InputError(Fault(entry.file, "time", problem, "Must be UTC", action, line))
        if stated and hours is not None and hours != stated:
            problem = f"the file says that its times are in {zone!r} and utc_offset_hours is {stated:g}"
            raise InputError(Fault(entry.file, "time", problem, "Must agree", "Correct it; 0 if they are UTC", line))
