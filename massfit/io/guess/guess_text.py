"""Guess how a text file of records is laid out: comments, delimiter, header and columns."""

import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

from massfit.io.guess.guess_words import meanings, unit_of_word

_COMMENTS = ("#", "%", "!", "//", "*", ">", "$")
_DELIMITERS = (";", "\t", ",", None)
_SAME_WIDTH = 0.9  # share of the rows that must have the same number of fields
_LEAST_ROWS = 3
_KNOWN_ROWS = 500  # rows by which columns are told

DECIMAL_COMMA = re.compile(r"[-+]?\d+,\d+")
DATE_ORDER = ("year", "month", "day", "hour", "minute", "second")
_RANGES = {
    "year": (1900.0, 2200.0), "month": (1, 12), "day": (1, 31), "hour": (0, 23), "minute": (0, 59),
    "second": (0, 60.99), "day_of_year": (1, 366.99999),
}  # fmt: skip


@dataclass(frozen=True)
class TextLayout:
    """How a text file is laid out.

    Parameters
    ----------
    comment : str
        Prefix of lines that are no data.
    delimiter : str or None
        None is white space.
    names : tuple of str
        Of the columns, from the header or made up.
    units : tuple of str or None
        By column, where a header says.
    meanings : tuple of str
        "year", ..., "date", "time", "kind", "flag", "pressure" or empty, by column; held against the values.
    rows : tuple of tuple of str
        Fields of the rows of data that were looked at.
    prose : tuple of str
        Header lines that are not names of columns.
    header : str
        The line of the names as it stands in the file; empty where there is none.
    first : bool
        Whether that line is the only one above the data that is no comment, as the reader wants it.
    """

    comment: str
    delimiter: str | None
    names: tuple[str, ...]
    units: tuple[str | None, ...]
    meanings: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    prose: tuple[str, ...]
    header: str
    first: bool

    def column(self, position: int) -> list[str]:
        """Texts of one column."""
        return [row[position] for row in self.rows]


def guess_layout(lines: Sequence[str]) -> TextLayout | None:
    """Tell how a text file is laid out from its first lines.

    Parameters
    ----------
    lines : sequence of str
        Without blank lines.

    Returns
    -------
    TextLayout or None
        None where the lines are no table of numbers.

    Examples
    --------
    >>> layout = guess_layout(["#YY MM DD hh P", "2016 01 02 03 5.5", "2016 01 02 04 5.6", "2016 01 02 05 5.7"])
    >>> layout.meanings
    ('year', 'month', 'day', 'hour', 'pressure')
    """
    comment = next((mark for mark in _COMMENTS if any(line.lstrip().startswith(mark) for line in lines[:200])), "#")
    above = [line for line in lines if line.lstrip().startswith(comment)]
    below = [line for line in lines if not line.lstrip().startswith(comment)]
    delimiter, width = _delimiter(below)
    if width < 2:
        return None
    fields = [split(line, delimiter) for line in below]
    start = next((k for k, row in enumerate(fields) if len(row) == width and any(map(_has_value, row))), len(fields))
    rows = tuple(row for row in fields[start:] if len(row) == width)
    if len(rows) < _LEAST_ROWS:
        return None
    commented = start == 0
    heads = [_bare(line, comment) for line in above] if commented else below[:start]
    names, units, header = _header(heads, delimiter, width)
    return TextLayout(
        comment=comment,
        delimiter=delimiter,
        names=names or tuple(f"column_{k + 1}" for k in range(width)),
        units=units,
        meanings=_checked(meanings(names), rows) if names else _by_values(rows),
        rows=rows,
        prose=tuple(_bare(line, comment) for line in (*above, *below[:start]) if _bare(line, comment) != header),
        header=header,
        first=start == 1 and bool(header),
    )


def split(line: str, delimiter: str | None) -> tuple[str, ...]:
    """Fields of a row, without blanks and quotes."""
    return tuple(field.strip().strip('"') for field in line.split(delimiter))


def is_number(text: str) -> bool:
    """Whether a field is a number."""
    try:
        float(text)
    except ValueError:
        return False
    return True


def _has_value(text: str) -> bool:
    return is_number(text) or DECIMAL_COMMA.fullmatch(text) is not None


def _bare(line: str, comment: str) -> str:
    return line.strip().removeprefix(comment).lstrip("#%!*/").strip()


def _delimiter(lines: Sequence[str]) -> tuple[str | None, int]:
    """Delimiter that splits nearly all rows into the same number of fields, and that number."""
    body = lines[-_KNOWN_ROWS:]
    for delimiter in _DELIMITERS:
        counts = Counter(len(line.split(delimiter)) for line in body)
        width, same = counts.most_common(1)[0] if counts else (0, 0)
        if width > 1 and same >= _SAME_WIDTH * len(body):
            return delimiter, width
    return None, 0


def _header(
    heads: Sequence[str], delimiter: str | None, width: int
) -> tuple[tuple[str, ...], tuple[str | None, ...], str]:
    """Names, units and the line of names: the line of the right width that knows most words."""
    fitting = [(line, split(line, delimiter)) for line in heads]
    fitting = [(line, row) for line, row in fitting if len(row) == width and not any(map(is_number, row))]
    if not fitting:
        return (), (None,) * width, ""
    best = max(fitting, key=lambda entry: sum(map(bool, meanings(entry[1]))))
    units: tuple[str | None, ...] = (None,) * width
    for line, row in fitting:
        found = tuple(unit_of_word(word) for word in row)
        if line != best[0] and any(found):
            units = found
    return best[1], units, best[0]


def _checked(named: Sequence[str], rows: Sequence[Sequence[str]]) -> tuple[str, ...]:
    """Drop a meaning that the values of its column contradict."""
    found = []
    for position, meaning in enumerate(named):
        texts = [row[position] for row in rows[:_KNOWN_ROWS]]
        found.append(meaning if _fits(meaning, texts) else "")
    return tuple(found)


def _fits(meaning: str, texts: Sequence[str]) -> bool:
    if meaning == "year" and all(text.isdigit() and len(text) == 2 for text in texts):
        return True  # two digits: read by a format
    if meaning in _RANGES:
        return _within(meaning, texts) or meaning == "day_of_year"  # may be a count of days, which is told later
    if meaning in ("kind", "flag"):
        return len(set(texts)) <= 9 and not any("." in text for text in texts)
    return meaning != "pressure" or any(is_number(text) for text in texts)


def _within(meaning: str, texts: Sequence[str]) -> bool:
    low, high = _RANGES[meaning]
    return all(is_number(text) and low <= float(text) <= high for text in texts)


def _by_values(rows: Sequence[Sequence[str]]) -> tuple[str, ...]:
    """Tell the columns of a file without header: a date from the left, then numbers."""
    columns = list(zip(*rows[:_KNOWN_ROWS], strict=True))
    found: list[str] = []
    for texts in columns:
        whole = all(text.isdigit() for text in texts)
        expected = DATE_ORDER[len(found)] if found == list(DATE_ORDER[: len(found)]) and len(found) < 6 else ""
        last = len(found) + 1 == len(columns)
        if found == ["year"] and whole and not _within("month", texts) and _within("day_of_year", texts):
            found.append("day_of_year")
        elif expected and not last and whole and _fits(expected, texts) and any(len(text) == 4 for text in columns[0]):
            found.append(expected)
        elif not found and not all(map(is_number, texts)):
            found.append("time")
        else:
            found.append("")
    return tuple(found)
