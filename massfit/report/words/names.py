"""Names and text that have to fit: counted in columns of a terminal, where some characters take two."""

import unicodedata


def columns(text: str) -> int:
    """Columns that a text takes on a terminal.

    Examples
    --------
    >>> columns("Kermadec"), columns("深海")
    (8, 4)
    """
    wide = sum(unicodedata.east_asian_width(letter) in "WF" for letter in text)
    bare = sum(unicodedata.combining(letter) > 0 for letter in text)
    return len(text) + wide - bare


def fitted(text: str, width: int) -> str:
    """Shorten a text in its middle, so that names that begin or end alike still differ.

    Parameters
    ----------
    text : str
    width : int
        Most columns it may take, at least 3.

    Returns
    -------
    str

    Examples
    --------
    >>> fitted("North-Array-Station-03", 13)
    'North-…ion-03'
    >>> fitted("North", 13)
    'North'
    """
    if columns(text) <= width:
        return text
    head, tail = "", ""
    for first, last in zip(text, reversed(text), strict=True):
        if columns(head + first + tail) >= width:
            break
        head += first
        if columns(head + last + tail) >= width:
            break
        tail = last + tail
    return f"{head}…{tail}"


def padded(text: str, width: int) -> str:
    """Fit a text to a column of a table, filled up on the right.

    Examples
    --------
    >>> padded("深海", 6) + "|"
    '深海  |'
    """
    shown = fitted(text, width)
    return shown + " " * (width - columns(shown))


def wrapped(text: str, width: int, *, first: str = "", rest: str = "") -> list[str]:
    """Break a text into lines at its spaces; a longer word is cut.

    Parameters
    ----------
    text : str
    width : int
        Columns of a line.
    first, rest : str
        What the first line and the others begin with.

    Returns
    -------
    list of str

    Examples
    --------
    >>> wrapped("one two three", 9, first="- ", rest="  ")
    ['- one two', '  three']
    """
    lines, line, empty = [], first, True
    for word in text.split():
        if not empty and columns(line) + 1 + columns(word) > width:
            lines.append(line)
            line, empty = rest, True
        line += word if empty else f" {word}"
        empty = False
        while columns(line) > width:
            cut = next(n for n in range(len(line), 0, -1) if columns(line[:n]) <= width)
            lines.append(line[:cut])
            line = rest + line[cut:]
    return [*lines, line] if not empty else lines
