"""The partial folder beside the results: one run at a time, its parts, and the results until they are whole."""

import fcntl
import hashlib
import json
import os
import platform
import shutil
import socket
import string
import zipfile
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from datetime import UTC, datetime
from functools import cache
from importlib import metadata
from pathlib import Path
from typing import Any, TextIO

from massfit.errors import Fault, InputError
from massfit.io.results.codec import decode, encode

_DIGEST_BYTES = 32
_NAME = string.ascii_letters + string.digits + "-_."


class PartialFolder:
    """Finished parts of a run, each under a key and a checksum; holds the only right to write the results.

    Parameters
    ----------
    results : Path
        The results folder to be made, absolute.
    """

    def __init__(self, results: Path) -> None:
        self.results = results
        self.place = results.parent / f".{results.name}-partial"
        self._parts = self.place / "parts"

    def get(self, key: str) -> Any | None:
        """Give what was kept under a key, or None where nothing is or what is there is damaged or foreign.

        Parameters
        ----------
        key : str

        Returns
        -------
        object or None
        """
        try:
            data = (self._parts / key).read_bytes()
            content = data[_DIGEST_BYTES:]
            return decode(content) if data[:_DIGEST_BYTES] == _checksum(key, content) else None
        except (OSError, ValueError, LookupError, TypeError, zipfile.BadZipFile):
            return None

    def put(self, key: str, value: Any) -> Any:
        """Keep a value under a key; it is there whole or not at all.

        Parameters
        ----------
        key : str
        value : object
            As `codec.encode` knows it.

        Returns
        -------
        object
            The value as `get` will give it.

        Raises
        ------
        InputError
            The folder cannot be written.
        """
        content = encode(value)
        aside = self.place / "new"
        with writing(self.results):
            self._parts.mkdir(exist_ok=True)
            aside.write_bytes(_checksum(key, content) + content)
            aside.replace(self._parts / key)
        return decode(content)

    @contextmanager
    def whole(self) -> Iterator[Path]:
        """Give an empty folder and move it to where the results go when the block ends well.

        Yields
        ------
        Path

        Raises
        ------
        InputError
            The folder cannot be written; results that were there before are untouched.
        """
        aside = self.place / "whole"
        try:
            with writing(self.results):
                shutil.rmtree(aside, ignore_errors=True)
                aside.mkdir()
                yield aside
                self._move_into_place(aside)
        finally:
            shutil.rmtree(aside, ignore_errors=True)

    def clear(self) -> None:
        """Forget the parts: the results are in place."""
        shutil.rmtree(self._parts, ignore_errors=True)

    def repair(self) -> None:
        """Bring back old results if a run was killed between the two moves that replace them."""
        old = self.place / "replaced"
        if old.exists() and not self.results.exists():
            old.rename(self.results)
        shutil.rmtree(old, ignore_errors=True)

    def leave(self) -> None:
        """Remove the folder unless it holds finished parts."""
        if not self._parts.is_dir() or not any(self._parts.iterdir()):
            shutil.rmtree(self.place, ignore_errors=True)

    def _move_into_place(self, aside: Path) -> None:
        old = self.place / "replaced"
        if self.results.exists():
            self.results.rename(old)
        aside.rename(self.results)
        shutil.rmtree(old, ignore_errors=True)


@contextmanager
def claimed(folder: Path) -> Iterator[PartialFolder]:
    """Hold the only right to write a results folder.

    The right ends with the process, however it ends: the kernel holds it (flock), and the file says who has it.

    Parameters
    ----------
    folder : Path
        The results folder.

    Yields
    ------
    PartialFolder
        Removed at the end unless it holds parts that another run can use.

    Raises
    ------
    InputError
        Another run has it, or the folder around the results cannot be written.
    """
    results = Path(os.path.abspath(folder))
    made = [parent for parent in results.parents if not parent.exists()]
    partial = PartialFolder(results)
    with _lock(partial):
        try:
            partial.repair()
            yield partial
        finally:
            partial.leave()
            with suppress(OSError):  # folders that are no longer needed; a full one stays
                for parent in made:
                    parent.rmdir()


@contextmanager
def writing(folder: Path) -> Iterator[None]:
    """Turn a disk that is full, or a folder that may not be written, into one plain fault.

    Parameters
    ----------
    folder : Path
        Named in the fault.

    Raises
    ------
    InputError
    """
    try:
        yield
    except OSError as error:
        problem = f"the folder cannot be written ({error.strerror or error})"
        action = "Make room or give it the right to be written, or choose another with --output"
        raise InputError(Fault(str(folder), "", problem, "", action)) from error


@contextmanager
def _lock(partial: PartialFolder) -> Iterator[None]:
    file = None
    while file is None:
        with writing(partial.results.parent):
            partial.place.mkdir(parents=True, exist_ok=True)
            with suppress(FileNotFoundError):  # another run ended just now and removed the folder
                file = _try_lock(partial)
    with file:
        yield


def _try_lock(partial: PartialFolder) -> TextIO | None:
    """Lock and sign the lock file; None where it was removed by its last owner in the meantime."""
    path = partial.place / "lock"
    file = path.open("a+", encoding="utf-8")
    try:
        fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError as error:
        file.close()
        problem = f"another run is writing here ({_owner(path)})"
        action = "Wait until it ends, or choose another folder with --output"
        raise InputError(Fault(str(partial.results), "", problem, "", action)) from error
    if not path.exists() or not os.path.samestat(os.fstat(file.fileno()), path.stat()):
        file.close()
        return None
    file.truncate(0)
    since = datetime.now(UTC).isoformat(timespec="seconds")
    file.write(json.dumps({"process": os.getpid(), "host": socket.gethostname(), "since": since}))
    file.flush()
    return file


def _owner(path: Path) -> str:
    try:
        said = json.loads(path.read_text(encoding="utf-8"))
        return f"process {said['process']} on {said['host']} since {said['since']}"
    except (OSError, ValueError, LookupError, TypeError):
        return "it has just begun"


def _checksum(key: str, content: bytes) -> bytes:
    return hashlib.sha256(b"\0".join([key.encode(), _program(), content])).digest()


@cache
def _program() -> bytes:
    """Digest of this program's own text and of the libraries under it: what others made is not taken."""
    root = Path(__file__).parents[1]
    total = hashlib.sha256(platform.python_version().encode())
    for path in sorted(root.rglob("*.py")):
        total.update(hashlib.sha256(path.read_bytes()).digest())
    for requirement in metadata.requires("massfit") or []:
        if "extra ==" not in requirement:
            name = requirement[: len(requirement) - len(requirement.lstrip(_NAME))]
            total.update(f"{name} {metadata.version(name)}".encode())
    return total.digest()
