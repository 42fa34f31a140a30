"""Bounds on a network file that no network reaches, so that a hostile or broken one is refused at once."""

import re
from collections.abc import Iterator
from typing import Any

from massfit.errors import Fault, InputError, printable
from massfit.io.network.locate import KeyPath

MOST_BYTES = 2**20
LONGEST_LINE = 10_000
DEEPEST = 12
MOST_KEYS = 10_000
MOST_KEYS_OF_TABLE = 200

_WORD = r"""(?:[\w-]++|"[^"\n]*+"|'[^'\n]*+')"""
_LONG_KEY = re.compile(rf"(?<![\w-])(?:{_WORD}[ \t]*+\.[ \t]*+){{{2 * DEEPEST},}}+")
_LINES_ALLOWED = ("reason", "exclude")  # words to the reader, which may run over several lines
_TABS_ALLOWED = ("delimiter", "comment", *_LINES_ALLOWED)
_FORMULA = ("=", "+", "-", "@")


def check_size(source: str, content: bytes) -> None:
    """Refuse a text that would cost the parser more than a moment.

    Parameters
    ----------
    source : str
        The file, as the analyst wrote it.
    content : bytes

    Raises
    ------
    InputError
        Above 1 MiB, and for a line above 10,000 bytes.
    """
    if len(content) > MOST_BYTES:
        raise InputError(
            Fault(source, "", "the file is too long", f"Must have at most {MOST_BYTES} bytes", "Check the path")
        )
    for number, line in enumerate(content.splitlines(), start=1):
        if len(line) > LONGEST_LINE:
            problem, action = f"the line has {len(line)} bytes", "Break it into several lines"
            raise InputError(Fault(source, "", problem, f"Must be at most {LONGEST_LINE}", action, number))


def check_keys(source: str, text: str) -> None:
    """Refuse dotted keys that are longer than any table is deep.

    Raises
    ------
    InputError
    """
    match = _LONG_KEY.search(text)
    if match:
        line = text.count("\n", 0, match.start()) + 1
        problem = f"a key of more than {2 * DEEPEST} parts starts with {match.group()[:20]!r}"
        raise InputError(Fault(source, "", problem, f"Must be at most {DEEPEST} deep", "Remove it", line))


def too_deep(source: str) -> InputError:
    """Refuse tables and lists inside each other."""
    problem = f"tables or lists stand more than {DEEPEST} deep inside each other"
    return InputError(Fault(source, "", problem, f"Must be at most {DEEPEST} deep", "Remove them"))


def check_document(source: str, document: dict[str, Any]) -> None:
    """Refuse what is too deep or too much to be reported key by key.

    Parameters
    ----------
    source : str
        The file, as the analyst wrote it.
    document : dict
        The parsed text.

    Raises
    ------
    InputError
        Above 12 levels, 200 keys in one table or 10,000 in all.
    """
    count = 0
    for path, value in _values(document):
        if len(path) > DEEPEST:
            raise too_deep(source)
        size = len(value) if isinstance(value, dict) else 0
        count += size
        where, most = ("the file", MOST_KEYS) if size <= MOST_KEYS_OF_TABLE else ("one table", MOST_KEYS_OF_TABLE)
        if size > MOST_KEYS_OF_TABLE or count > MOST_KEYS:
            name = ".".join(part for part in path if isinstance(part, str))
            problem = f"{where} has more than {most} keys"
            raise InputError(Fault(source, name, problem, f"Must be at most {most}", "Check that this is the file"))


def unfit_texts(document: dict[str, Any]) -> Iterator[tuple[KeyPath, str, str, str]]:
    """Find texts that would steer a terminal, or that a spreadsheet would take for a formula.

    Parameters
    ----------
    document : dict
        The parsed network file.

    Yields
    ------
    path, problem, allowed, action
        As for a fault.
    """
    for path, value in _values(document):
        key = next((part for part in reversed(path) if isinstance(part, str)), "")
        if not isinstance(value, str):
            continue
        plain = value.replace("\t", " ") if key in _TABS_ALLOWED else value
        plain = plain.replace("\n", " ") if key in _LINES_ALLOWED else plain
        if printable(plain) != plain and "\0" not in plain:
            problem = f"the value {value[:40]!r} holds a control character"
            yield path, problem, "Must be printable text", "Remove it"
        elif key == "id" and value.startswith(_FORMULA):
            problem = f'the value is "{value[:40]}"'
            allowed = f"Must not begin with {', '.join(_FORMULA)}: a spreadsheet would take it for a formula"
            yield path, problem, allowed, "Begin it with a letter or a digit"


def _values(document: dict[str, Any]) -> Iterator[tuple[KeyPath, Any]]:
    """Every value with its path, parents first; without recursion, which a deep text would exhaust."""
    stack: list[tuple[KeyPath, Any]] = [((), document)]
    while stack:
        path, value = stack.pop()
        yield path, value
        if isinstance(value, dict):
            stack += [((*path, key), inner) for key, inner in reversed(value.items())]
        elif isinstance(value, list):
            stack += [((*path, place), inner) for place, inner in reversed(list(enumerate(value)))]
