"""Guess how the columns of a text record give the time."""

import re
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from itertools import pairwise

from massfit.io.guess.described import Guess, fill_in
from massfit.io.guess.guess_text import DATE_ORDER, TextLayout, is_number

_ISO = re.compile(r"\d{4}-\d{2}-\d{2}([T ]\d{2}:\d{2}(:\d{2}(\.\d+)?)?)?\s*(Z|[+-]\d{2}:?\d{2})?")
_DATES = (
    "%Y/%m/%d", "%d/%m/%Y", "%m/%d/%Y", "%d.%m.%Y", "%d-%m-%Y", "%d-%b-%Y", "%d %b %Y", "%Y%m%d", "%Y %j", "%Y-%j",
)  # fmt: skip
_CLOCKS = (
    "", " %H:%M:%S", " %H:%M", "T%H:%M:%S", "T%H:%M", " %H%M", "%H", "%H%M", "%H%M%S", " %H:%M:%S.%f",
    "T%H%M%S", "T%H%M", " %I:%M %p", " %I:%M:%S %p",
)  # fmt: skip
_FORMATS = tuple(date + clock for date in _DATES for clock in _CLOCKS)
_TEXTS = 400  # different texts by which a format is told
_MODIFIED_JULIAN = (33_000.0, 88_000.0)  # 1949 to 2099
_MJD = "days since 1858-11-17"
_UNIX = (3.0e8, 4.0e9)  # 1979 to 2096


@dataclass(frozen=True)
class TimeGuess:
    """Where the time of a text record is.

    Parameters
    ----------
    names : tuple of str
        Names of all columns as the reader shall know them.
    used : tuple of int
        Positions of the columns that make the time.
    keys : dict of str to Guess
        `time_column` and `time_format`, where they are needed.
    evidence : str
    """

    names: tuple[str, ...]
    used: tuple[int, ...]
    keys: dict[str, Guess]
    evidence: str


def guess_time(layout: TextLayout) -> TimeGuess:
    """Tell the time columns and their format.

    Parameters
    ----------
    layout : TextLayout

    Returns
    -------
    TimeGuess
        A key without value where the columns leave it open.

    Examples
    --------
    >>> from massfit.io.guess.guess_text import guess_layout
    >>> rows = ["yr,jday,p"] + [f"2016,{day},5.5" for day in range(1, 9)]
    >>> guess_time(guess_layout(rows)).names
    ('year', 'day_of_year', 'p')
    """
    found = {meaning: position for position, meaning in enumerate(layout.meanings) if meaning}
    parts = _parts(found)
    if parts:
        return _in_parts(layout, parts)
    whole = [found[name] for name in ("date", "time") if name in found]
    if not whole:
        whole = [found[name] for name in ("day_of_year",) if name in found] or _texts_or_count(layout)
    if not whole:
        wanted = f"the column that holds the time: {', '.join(layout.names)}"
        return TimeGuess(layout.names, (), {"time_column": fill_in(wanted)}, "")
    return _in_columns(layout, whole)


def _parts(found: dict[str, int]) -> list[str]:
    """Parts of a date that are all there: a gap, such as hours missing under minutes, makes it none."""
    if "year" in found and "day_of_year" in found:
        clock = [part for part in DATE_ORDER[3:] if part in found]
        return ["year", "day_of_year", *clock]
    parts = [part for part in DATE_ORDER if part in found]
    return parts if len(parts) >= 3 and parts == list(DATE_ORDER[: len(parts)]) else []


def _in_parts(layout: TextLayout, parts: Sequence[str]) -> TimeGuess:
    place = {part: layout.meanings.index(part) for part in parts}
    used = tuple(place.values())
    headed = " ".join(layout.names[k] for k in used)
    evidence = f'header "{headed}"' if layout.header else "the ranges of their values"
    if all(len(text) == 2 for text in layout.column(place["year"])[:_TEXTS]):
        names = _unique(layout.names)
        signs = dict(zip((*DATE_ORDER, "day_of_year"), ("%y", "%m", "%d", "%H", "%M", "%S", "%j"), strict=True))
        keys = {
            "time_column": Guess(" ".join(names[k] for k in used), evidence),
            "time_format": Guess(" ".join(signs[part] for part in parts), "years of two digits"),
        }
        return TimeGuess(names, used, keys, evidence)
    renamed = list(layout.names)
    for part, position in place.items():
        renamed[position] = part
    return TimeGuess(_unique(renamed), used, {}, f"date parts by {evidence}")


def _in_columns(layout: TextLayout, positions: Sequence[int]) -> TimeGuess:
    names = _unique(layout.names)
    columns = [layout.column(position) for position in positions]
    texts = list(dict.fromkeys(" ".join(row) for row in zip(*columns, strict=True)))
    name = " ".join(names[position] for position in positions)
    form = Guess(_MJD, f"the name {name}") if name.casefold() == "mjd" else _format_of(texts)
    shown = f'such as "{texts[0]}"'
    keys = {"time_column": Guess(name, f"values {shown}"), "time_format": form}
    return TimeGuess(names, tuple(positions), keys, f"time {shown}")


def _format_of(texts: Sequence[str]) -> Guess:
    if all(_ISO.fullmatch(text) for text in texts):
        return Guess("iso", f"ISO 8601, {_shown(texts)}")
    fitting = _formats(texts)
    if len(fitting) == 1:
        return Guess(fitting[0], f"the only format of ours that reads {_shown(texts)}")
    if fitting:
        return fill_in(f"{' or '.join(fitting)}? Both read {_shown(texts)}")
    if all(map(is_number, texts)):
        return _count_of([float(text) for text in (texts[0], texts[-1])])
    return fill_in(f"a strptime format for {_shown(texts)}")


def _formats(texts: Sequence[str]) -> list[str]:
    picked = [*texts[: _TEXTS // 2], *texts[-_TEXTS // 2 :]]
    fitting = [form for form in _FORMATS if _reads(form, picked[0])]
    return [form for form in fitting if all(_reads(form, text) for text in picked)]


def _reads(form: str, text: str) -> bool:
    # strptime lets one digit stand for two, and would read a compact date in many ways
    compact = form.replace("T", "")
    if "%Y%m%d" in compact and len(text.replace("T", "").replace(" ", "").replace(":", "")) != _digits(form):
        return False
    try:
        return datetime.strptime(text, form).year >= 1900
    except ValueError:
        return False


def _digits(form: str) -> int:
    return 4 * form.count("%Y") + 2 * sum(form.count(sign) for sign in ("%m", "%d", "%H", "%M", "%S"))


def _count_of(ends: Sequence[float]) -> Guess:
    """Tell the origin of a count of days or seconds, where its size leaves one choice."""
    shown = f"{ends[0]:.10g} to {ends[-1]:.10g}"
    if all(_UNIX[0] < value < _UNIX[1] for value in ends):
        return Guess("seconds since 1970-01-01", f"values {shown} are seconds of this age")
    if all(_MODIFIED_JULIAN[0] < value < _MODIFIED_JULIAN[1] for value in ends):
        return fill_in(f'the origin of {shown}: "{_MJD}" if these are modified Julian days')
    if all(1_900.0 < value < 2_100.0 for value in ends):
        return fill_in(f"years with decimals, {shown}, are not read: write dates into the file")
    return fill_in(f'unit and origin of {shown}, like "days since 1950-01-01"')


def _texts_or_count(layout: TextLayout) -> list[int]:
    """Positions of the columns that are no numbers, or of a first one that rises throughout."""
    known = layout.rows[:_TEXTS]
    texts = [k for k in range(len(layout.names)) if not any(is_number(row[k]) for row in known)]
    digits = re.compile(r".*\d.*")
    texts = [k for k in texts if layout.meanings[k] in ("", "time") and all(digits.fullmatch(row[k]) for row in known)]
    if texts:
        return texts[:2]
    for position, meaning in enumerate(layout.meanings[:2]):
        values = [float(row[position]) for row in known if is_number(row[position])]
        rises = len(values) == len(known) and all(b > a for a, b in pairwise(values))
        if rises and not meaning:
            return [position]
    return []


def _unique(names: Sequence[str]) -> tuple[str, ...]:
    """Add numbers to names that repeat, so that each is one column."""
    return tuple(name if names.count(name) == 1 else f"{name}_{k + 1}" for k, name in enumerate(names))


def _shown(texts: Sequence[str]) -> str:
    return f'"{texts[0]}"' if len(texts) == 1 else f'"{texts[0]}" to "{texts[-1]}"'
