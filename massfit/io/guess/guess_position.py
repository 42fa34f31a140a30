"""Positions as people write them: whole or not at all, for half of one is another place."""

import re

_NUMBER = r"\d+(?:[.,]\d+)?"


def _angle(name: str, sides: str) -> str:
    """Pattern of degrees, perhaps minutes and seconds, with a side before, behind or nowhere."""
    side = rf"(?:{sides})\b"
    return (
        rf"(?P<{name}_before>{side}\s*)?(?P<{name}>[-+]?{_NUMBER})\s*(?:°|º|deg(?:rees?|s)?\b\.?|:|-(?=\d))?\s*"
        rf"(?:(?P<{name}_minutes>{_NUMBER})\s*(?:['′]|min(?:utes?|s)?\b\.?|:)?\s*"  # noqa: RUF001 - a prime
        rf"(?:(?P<{name}_seconds>{_NUMBER})\s*(?:\"|″|''|sec(?:onds?|s)?\b\.?)?\s*)?)?"
        rf"(?P<{name}_behind>{side})?"
    )


_NORTH, _EAST = "[NS]|north|south", "[EW]|east|west"
_SIDES = {"latitude": _NORTH, "longitude": _EAST}
_LIMIT = {"latitude": 90.0, "longitude": 360.0}
_UNIT = r"(?:in\s+)?(?:decimal\s+)?deg(?:rees?)?\b(?:[\s_]*(?:north|east)\b)?"
_NAMED = {
    key: re.compile(
        rf"\b{word}\b\.?\s*(?:{_UNIT})?\s*"
        rf"(?:[\[(]\s*(?:{_UNIT}|°)?[\s_]*(?P<stated>{_SIDES[key]})?\s*[\])])?"
        rf"[\s:=,;]*{_angle('a', _SIDES[key])}",
        re.IGNORECASE,
    )
    for key, word in (("latitude", "lat(?:itude)?"), ("longitude", "lon(?:g|gitude)?"))
}
_BY_SIDE = re.compile(
    rf"(?<![\w.,]){_angle('a', _NORTH)}(?:(?<=[NS])|(?=[\s,;/|\"]))[\s,;/|\"]*{_angle('b', _EAST)}", re.IGNORECASE
)
_NEXT = re.compile(r"\b(?:lat|lon|long|latitude|longitude|depth|water|station|site|mooring)\b", re.IGNORECASE)
_UNREAD = re.compile(r"\d|\b(?:[NSEW]|north|south|east|west)\b", re.IGNORECASE)


def named_angle(line: str, key: str) -> float | None:
    """Degrees that a line states after the word latitude or longitude; None unless all of it was understood.

    Examples
    --------
    >>> named_angle("# Latitude: 12 30.6 S", "latitude"), named_angle("lat 12 30.6 and a bit 7", "latitude")
    (-12.51, None)
    """
    match = _NAMED[key].search(line)
    if match is None:
        return None
    rest = line[match.end() :]
    following = _NEXT.search(rest)
    rest = re.sub(r"\([^)]*\)", "", rest[: following.start()] if following else rest)
    return None if _UNREAD.search(rest) else _degrees(match, "a", _LIMIT[key], match["stated"])


def angles_by_side(line: str) -> tuple[float, float] | None:
    """Latitude and longitude that a line gives by their sides alone.

    Examples
    --------
    >>> angles_by_side("POSITION 12-30.6S 140-15.0W")
    (-12.51, -140.25)
    """
    for match in _BY_SIDE.finditer(line):
        if all(match[f"{name}_before"] or match[f"{name}_behind"] for name in "ab"):
            latitude, longitude = _degrees(match, "a", 90.0), _degrees(match, "b", 360.0)
            return None if latitude is None or longitude is None else (latitude, longitude)
    return None


def _degrees(match: re.Match[str], name: str, limit: float, stated: str | None = None) -> float | None:
    whole, *smaller = (match[name + part] for part in ("", "_minutes", "_seconds"))
    values = [abs(float(part.replace(",", "."))) if part else 0.0 for part in (whole, *smaller)]
    value = values[0] + values[1] / 60.0 + values[2] / 3600.0
    parted = any(smaller) and values[0] % 1.0 != 0.0
    sides = {side.strip()[0].upper() for side in (match[f"{name}_before"], match[f"{name}_behind"], stated) if side}
    if parted or max(values[1:]) >= 60.0 or value > limit or len(sides) > 1:
        return None
    negative = whole.startswith("-") or bool(sides & {"S", "W"})
    return round(-value if negative else value, 9)
