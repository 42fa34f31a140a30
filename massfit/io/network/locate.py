"""Lines of the keys of a TOML text, which the standard parser does not keep."""

import re
import tomllib
from bisect import bisect_left
from collections.abc import Mapping

KeyPath = tuple[str | int, ...]
"""Keys and list positions from the top of the document, for example ("site", 1, "latitude")."""

# the text is valid TOML when it comes here, so a token needs no further checks (TOML 1.0, toml.io)
_BLANK = re.compile(r"(?:[ \t\r\n]+|#[^\n]*)*")
_SPACE = re.compile(r"[ \t]*")
_KEY = re.compile(r'"(?:[^"\\\n]|\\.)*"|\'[^\'\n]*\'|[A-Za-z0-9_-]+')
_STRING = re.compile(
    # the first three quotes that no further quote follows end a multi-line string
    r'"""(?:\\.|[^\\])*?"""(?!")|' r"'''.*?'''(?!')|" r'"(?:[^"\\\n]|\\.)*"|' r"'[^'\n]*'",
    re.DOTALL,
)
_BARE = re.compile(r"[^,\]}#\n]+")


def locate_keys(text: str) -> dict[KeyPath, int]:
    r"""Find the line of every table, key and list element of a TOML document.

    Parameters
    ----------
    text : str
        A document that `tomllib` reads without error.

    Returns
    -------
    dict
        Line, counted from 1, by path. A table that is opened more than once, or only
        implied by its children, has the line where it is first seen.

    Examples
    --------
    >>> locate_keys('[a]\nb.c = 1\n[[d]]\ne = [1,\n 2]')[("d", 0, "e", 1)]
    5
    """
    return _Scanner(text).document()


def nearest_line(lines: Mapping[KeyPath, int], path: KeyPath) -> int | None:
    """Find the line of the deepest part of a path that stands in the document.

    Examples
    --------
    >>> nearest_line({("a",): 3}, ("a", "missing"))
    3
    """
    for length in range(len(path), 0, -1):
        if path[:length] in lines:
            return lines[path[:length]]
    return None


class _Scanner:
    """A walk through the text; `at` is the position of the next character."""

    def __init__(self, text: str) -> None:
        self.text, self.at = text, 0
        self.lines: dict[KeyPath, int] = {}
        self.ends = [match.start() for match in re.finditer("\n", text)]
        self.counts: dict[KeyPath, int] = {}  # elements so far of each array of tables

    def document(self) -> dict[KeyPath, int]:
        table: KeyPath = ()
        self.skip(_BLANK)
        while self.at < len(self.text):
            if self.text[self.at] == "[":
                table = self.header()
            else:
                self.pair(table)
            self.skip(_BLANK)
        return self.lines

    def skip(self, pattern: re.Pattern[str]) -> str:
        match = pattern.match(self.text, self.at)
        if match is None:
            raise ValueError(f"not TOML at character {self.at}")
        self.at = match.end()
        return match.group()

    def mark(self, path: KeyPath, position: int) -> None:
        self.lines.setdefault(path, bisect_left(self.ends, position) + 1)

    def dotted_key(self) -> list[str]:
        parts = []
        while True:
            self.skip(_SPACE)
            token = self.skip(_KEY)
            parts.append(next(iter(tomllib.loads(f"{token} = 0"))))
            self.skip(_SPACE)
            if not self.text.startswith(".", self.at):
                return parts
            self.at += 1

    def header(self) -> KeyPath:
        start, is_array = self.at, self.text.startswith("[[", self.at)
        self.at += 2 if is_array else 1
        *parents, last = self.dotted_key()
        self.at += 2 if is_array else 1
        path = self.descend((), parents, start)
        if not is_array:
            return self.descend(path, [last], start)
        path = (*path, last)
        self.mark(path, start)
        self.counts[path] = self.counts.get(path, 0) + 1
        path = (*path, self.counts[path] - 1)
        self.mark(path, start)
        return path

    def descend(self, path: KeyPath, parts: list[str], start: int) -> KeyPath:
        """Walk down named tables; of an array of tables the last element is meant."""
        for part in parts:
            path = (*path, part)
            self.mark(path, start)
            if path in self.counts:
                path = (*path, self.counts[path] - 1)
        return path

    def pair(self, table: KeyPath) -> None:
        start = self.at
        path = self.descend(table, self.dotted_key(), start)
        self.at += 1  # the equals sign
        self.skip(_SPACE)
        self.value(path)

    def value(self, path: KeyPath) -> None:
        opening = self.text[self.at]
        if opening == "[":
            self.items("]", path)
        elif opening == "{":
            self.items("}", path)
        else:
            self.skip(_STRING if opening in "\"'" else _BARE)

    def items(self, closing: str, path: KeyPath) -> None:
        self.at += 1
        self.skip(_BLANK)
        position = 0
        while self.text[self.at] != closing:
            if closing == "}":
                self.pair(path)
            else:
                self.mark((*path, position), self.at)
                self.value((*path, position))
            position += 1
            self.skip(_BLANK)
            if self.text[self.at] == ",":
                self.at += 1
                self.skip(_BLANK)
        self.at += 1
