"""What is known while a network file is being read: its text, its lines and its faults so far."""

import hashlib
import os
import re
import tomllib
from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from difflib import get_close_matches
from pathlib import Path
from typing import Any, TypeVar

from massfit.errors import Fault, InputError
from massfit.io.network.locate import KeyPath, locate_keys, nearest_line
from massfit.io.network.network_limits import MOST_BYTES, check_document, check_keys, check_size, too_deep, unfit_texts

_T = TypeVar("_T")
_URL = re.compile(r"^[A-Za-z][A-Za-z0-9+.-]*://")
_SYNTAX = re.compile(r"^(?P<what>.*) \(at (?:line (?P<line>\d+), column (?P<column>\d+)|end of document)\)$", re.DOTALL)
_MANY_FILES = 5_000  # names looked through for a suggestion
_MOST_SUGGESTIONS = 20  # after so many faults the search, which takes its time, helps nobody


@dataclass
class Reading:
    """A network file that is being read.

    Parameters
    ----------
    source : str
        The file, as the analyst wrote it.
    folder : Path
        Where paths of the file start.
    outside : bool
        Whether paths may leave `folder`.
    document : dict
        The parsed TOML.
    lines : dict
        Line of every key.
    faults, warnings : list
        Found so far.
    inputs : dict
        SHA-256 of every file so far, by path relative to `folder`.
    """

    source: str
    folder: Path
    outside: bool
    document: dict[str, Any]
    lines: dict[KeyPath, int]
    faults: list[Fault] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)
    inputs: dict[str, str] = field(default_factory=dict)

    def fault(self, path: KeyPath, problem: str, allowed: str = "", action: str = "") -> None:
        """Note a fault of the key at `path`."""
        line = nearest_line(self.lines, path)
        self.faults.append(Fault(self.source, key_name(self.document, path), problem, allowed, action, line))

    def attempt(self, function: Callable[..., _T], *arguments: Any, **options: Any) -> _T | None:
        """Call a reader; its faults join the others and it gives None."""
        try:
            return function(*arguments, **options)
        except InputError as error:
            self.faults.extend(error.faults)
            return None

    def find(self, path: KeyPath, text: str, *, or_folder: bool = False) -> Path | None:
        """Find the file (or folder) that the key at `path` names, when it is there and may be opened."""
        found = self._resolve(path, text, or_folder)
        if found is not None:
            for each in sorted(found.iterdir()) if found.is_dir() else [found]:
                if each.is_file():
                    name = f"{text}/{each.name}" if found.is_dir() else text
                    with each.open("rb") as stream:
                        self.inputs[self.relative(name)] = hashlib.file_digest(stream, "sha256").hexdigest()
        return found

    def is_there(self, text: str) -> bool:
        """Whether something stands where a path of the network file points, or it is an address, to be refused."""
        return _URL.match(text) is not None or os.path.lexists(self.folder / text)

    def relative(self, text: str) -> str:
        """Give a path of the network file one spelling."""
        return Path(os.path.relpath(self.folder / text, self.folder)).as_posix()

    def _resolve(self, path: KeyPath, text: str, or_folder: bool) -> Path | None:
        if _URL.match(text):
            self.fault(path, f'"{text}" is an address', "Must be a file", "Download it and give its path")
            return None
        try:
            found, home = (self.folder / text).resolve(), self.folder.resolve()
            is_file, is_folder = found.is_file(), found.is_dir()
        except (OSError, ValueError, RuntimeError) as error:  # too long, a null character, links in a circle
            self.fault(path, f"{text!r} is not a path ({error})", "Must be a file", "Correct it")
            return None
        if not self.outside and not found.is_relative_to(home):
            self.fault(
                path,
                f'"{text}" lies outside the folder of the network file',
                "Must lie inside it",
                "Move the file, or allow paths outside (--outside; outside=True)",
            )
        elif is_folder and not or_folder:
            self.fault(path, f'"{text}" is a folder', "Must be a file")
        elif not is_file and not is_folder and found.exists():
            self.fault(path, f'"{text}" is a pipe or a device', "Must be a file", "Give the file itself")
        elif not is_file and not is_folder:
            self.fault(path, f'no file "{text}"', "Paths start at the network file's folder", self._suggest(text))
        else:
            return found
        return None

    def _suggest(self, text: str) -> str:
        if len(self.faults) > _MOST_SUGGESTIONS:
            return "Check the name"
        files = _names_below(self.folder)
        same_name = [name for name in files if Path(name).name == Path(text).name]
        near = nearest(self.relative(text), files) or next(iter(same_name), None)
        return did_you_mean(near, "Check the name")


def open_reading(path: str | os.PathLike[str], *, outside: bool) -> Reading:
    """Parse a network file.

    Raises
    ------
    InputError
        When there is no such file, or its syntax is wrong: the one fault reported alone.
    """
    file = Path(path)
    if file.is_dir():
        file = file / "network.toml"
    source = str(file)
    if file.is_dir():
        raise InputError(Fault(source, "", "it is a folder", "Must be a network file", "Rename the folder"))
    if not file.is_file():
        others = [str(found) for found in sorted(file.parent.glob("*.toml")) if found != file]
        action = did_you_mean(nearest(source, others) or next(iter(others), None), "Check the path")
        problem = "this is not a regular file" if file.exists() else "there is no such file"
        raise InputError(Fault(source, "", problem, "Must be a network file or its folder", action))
    with file.open("rb") as stream:
        content = stream.read(MOST_BYTES + 1)
    check_size(source, content)
    try:
        text = content.decode("utf-8-sig")
        check_keys(source, text)
        document = tomllib.loads(text)
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        problem = f"byte 0x{content[error.start]:02x} is not UTF-8"
        raise InputError(Fault(source, "", problem, "A network file is UTF-8 text", line=line)) from error
    except tomllib.TOMLDecodeError as error:
        raise InputError(_syntax_fault(source, text, str(error))) from error
    except RecursionError as error:
        raise too_deep(source) from error
    except ValueError as error:  # a whole number of thousands of digits
        problem = "a number has too many digits"
        raise InputError(Fault(source, "", problem, "Must be within 64 bits", "Shorten it")) from error
    check_document(source, document)
    reading = Reading(source, file.parent, outside, document, locate_keys(text))
    for path_of_text, problem, allowed, action in unfit_texts(document):
        reading.fault(path_of_text, problem, allowed, action)
    reading.inputs[file.name] = hashlib.sha256(content).hexdigest()
    return reading


def key_name(document: object, path: KeyPath) -> str:
    """Name a key for a reader; list elements by their id or name, else counted from 1.

    Examples
    --------
    >>> key_name({"site": [{"id": "A3", "exclude": [{}]}]}, ("site", 0, "exclude", 0, "to"))
    'site[A3].exclude[1].to'
    """
    text, value = "", document
    for part in path:
        value = _child(value, part)
        if isinstance(part, int):
            label = (value.get("id") or value.get("name")) if isinstance(value, dict) else None
            text += f"[{label if isinstance(label, str) else part + 1}]"
        else:
            text += f".{part}" if text else part
    return text


def nearest(word: str, known: Iterable[str]) -> str | None:
    """Find the known word most like a given one, or None when none is like it.

    Examples
    --------
    >>> nearest("lattitude", ["latitude", "longitude"])
    'latitude'
    """
    return next(iter(get_close_matches(word, list(known), n=1, cutoff=0.6)), None)


def did_you_mean(suggestion: str | None, otherwise: str) -> str:
    """Word the action of a fault that may have a likely cure."""
    return f'Did you mean "{suggestion}"?' if suggestion else otherwise


def _child(value: object, part: str | int) -> object:
    if isinstance(value, dict):
        return value.get(part)
    if isinstance(value, list) and isinstance(part, int) and part < len(value):
        return value[part]
    return None


def _names_below(folder: Path) -> list[str]:
    names: list[str] = []
    for root, folders, files in os.walk(folder):
        folders.sort()
        names += sorted(Path(root, name).relative_to(folder).as_posix() for name in files)
        if len(names) > _MANY_FILES:
            break
    return names


def _syntax_fault(source: str, text: str, message: str) -> Fault:
    match = _SYNTAX.match(message)
    line, column = len(text.splitlines()), None
    if match and match["line"]:
        line, column = int(match["line"]), int(match["column"])
    what = match["what"] if match else message
    place = "at the end of the file" if column is None else f"at column {column}"
    return Fault(source, "", f"{what} {place}", "A network file is TOML 1.0", "Correct this line", line)
