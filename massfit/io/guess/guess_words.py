"""What the headers of record files call their columns, units and places."""

import re
from collections.abc import Sequence

from massfit.io.guess.guess_position import angles_by_side, named_angle
from massfit.io.records.units import PRESSURE_UNITS, SPOKEN_UNITS

_WORDS = {
    "year": "year years yyyy yy yr",
    "month": "month months mon mo mth",
    "day": "day days dd dy dom",
    "hour": "hour hours hh hr hrs",
    "minute": "minute minutes min mn mi mins",
    "second": "second seconds sec secs ss sc",
    "day_of_year": "day_of_year dayofyear doy jday jd yday ddd julday julianday julian_day",
    "date": "date date_utc utc_date utcdate",
    "time": "time datetime date_time timestamp utc time_utc utc_time datetime_utc date_time_utc iso_time mjd",
    "kind": "kind t typ type mode",
    "flag": "flag flags qc qf quality qcflag qc_flag quality_flag",
}
_MEANING = {word: meaning for meaning, words in _WORDS.items() for word in words.split()}
_PRESSURE = {
    "pressure", "press", "pres", "prs", "p", "bpr", "bp", "obp", "height", "hgt", "depth", "bottompressure", "pbot",
    "bottom", "seafloor",
}  # fmt: skip
_NO_PRESSURE = {"differential", "difference", "diff", "temperature", "temp", "sd", "std", "error", "sigma", "residual"}
"""Words of columns that are not the pressure itself, even where one of its words stands beside them."""
_QUANTITY = _PRESSURE | {"sea", "floor", "water", "absolute", "abs", "anomaly", "daily", "hourly", "mean"}
_FOLDED_UNITS = SPOKEN_UNITS | {unit.casefold(): unit for unit in PRESSURE_UNITS} | {"decibar": "dbar"}
_PROSE_UNIT = re.compile(r"\b(?:in|units?)\b\s*(?:are|is|of|[:=])?\s*[\[(]?([A-Za-z0-9]+)", re.IGNORECASE)
_NUMBER = r"([-+]?\d+(?:\.\d+)?)"
_DEPTH = re.compile(rf"\bdepth\b[^\d+-]{{0,12}}{_NUMBER}\s*m(?:et(?:er|re)s?)?\b", re.IGNORECASE)
_STATION = re.compile(r"\b(?:station|site|mooring)(?:[ _](?:id|name))?\s*[:=]\s*([A-Za-z0-9_.+-]+)", re.IGNORECASE)


def words_of(name: str) -> list[str]:
    """Split a name into its words, in lower case.

    Examples
    --------
    >>> words_of("Depth_MJ03E [m]")
    ['depth', 'mj03e', 'm']
    """
    return [word for word in re.split(r"[^A-Za-z0-9]+", name.casefold()) if word]


def meanings(names: Sequence[str]) -> list[str]:
    """Tell what each column is from its name; an empty text where the name says nothing.

    "mm" is the month after a year and the minute after an hour.

    Examples
    --------
    >>> meanings(["YY", "MM", "DD", "hh", "mm", "ss", "T", "HEIGHT"])
    ['year', 'month', 'day', 'hour', 'minute', 'second', 'kind', 'pressure']
    """
    found: list[str] = []
    for name in names:
        word = "_".join(words_of(name))
        meaning = _MEANING.get(word, "")
        if word == "mm":
            meaning = "month" if "month" not in found and "hour" not in found else "minute"
        if not meaning and is_pressure(name):
            meaning = "pressure"
        # a second column of the same date part means something else
        found.append("" if meaning in found and meaning != "pressure" else meaning)
    return found


def is_pressure(name: str) -> bool:
    """Whether a name speaks of pressure, height or depth of water."""
    words = set(words_of(name))
    return bool(words & _PRESSURE) and not words & _NO_PRESSURE


def unit_of_name(name: str) -> str | None:
    """Give the unit that a column's name ends with, in the reader's spelling.

    Examples
    --------
    >>> unit_of_name("depth_mj03e_m"), unit_of_name("Pressure (dbar)"), unit_of_name("pressure")
    ('m', 'dbar', None)
    """
    words = words_of(name)
    return _FOLDED_UNITS.get(words[-1]) if len(words) > 1 else None


def unit_of_word(word: str) -> str | None:
    """Reader's spelling of a unit, or None for another word.

    Examples
    --------
    >>> unit_of_word("(dbar)"), unit_of_word("hr")
    ('dbar', None)
    """
    words = words_of(word)
    return _FOLDED_UNITS.get(words[0]) if len(words) == 1 else None


def unit_of_prose(lines: Sequence[str]) -> tuple[str, str] | None:
    """Find the unit that a header line states in words, with that line.

    Examples
    --------
    >>> unit_of_prose(["UTC, absolute pressure in dbar"])
    ('dbar', 'UTC, absolute pressure in dbar')
    """
    for line in lines:
        for match in _PROSE_UNIT.finditer(line):
            unit = _FOLDED_UNITS.get(match[1].casefold())
            if unit:
                return unit, line.strip()
    return None


def own_name(name: str) -> str:
    """Leave of a column's name what is neither quantity nor unit: the instrument, if anything.

    Examples
    --------
    >>> own_name("depth_mj03e_m"), own_name("pressure")
    ('mj03e', '')
    """
    words = words_of(name)
    if unit_of_name(name):
        words = words[:-1]
    return "_".join(word for word in words if word not in _QUANTITY)


def place_of_prose(lines: Sequence[str]) -> dict[str, tuple[float | str, str]]:
    """Position, depth and station that header lines state, each with its line.

    Examples
    --------
    >>> found = place_of_prose(["Station: Q7", "Lat: 12 30' S  Lon = 200.5"])
    >>> found["latitude"][0], found["longitude"][0], found["id"][0]
    (-12.5, 200.5, 'Q7')
    >>> found = place_of_prose(["Position: 30.6 N 153.57 W"])
    >>> found["latitude"][0], found["longitude"][0]
    (30.6, -153.57)
    """
    found: dict[str, tuple[float | str, str]] = {}
    for line in lines:
        for key in ("latitude", "longitude"):
            angle = named_angle(line, key)
            if angle is not None:
                found.setdefault(key, (angle, line.strip()))
        sides = angles_by_side(line)
        if sides and "latitude" not in found and "longitude" not in found:
            found["latitude"], found["longitude"] = ((angle, line.strip()) for angle in sides)
        depth = _DEPTH.search(line)
        if depth:
            found.setdefault("depth_m", (float(depth[1]), line.strip()))
        station = _STATION.search(line)
        if station and "id" not in found:
            found["id"] = (station[1], line.strip())
    return found
