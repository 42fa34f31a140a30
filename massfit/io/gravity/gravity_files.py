"""All ICGEM files of a folder, an archive or a single file."""

import bz2
import gzip
import io
import lzma
import re
import tarfile
import zipfile
import zlib
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import IO, Any

from massfit.errors import Fault, InputError, collect
from massfit.gravity.field import GravityField, GravityModel
from massfit.io.gravity.icgem import MOST_BYTES, parse_icgem

_MOST_FILES = 5000
_COMPRESSED: dict[str, Callable[[Any], Any]] = {
    ".gz": lambda stream: gzip.GzipFile(fileobj=stream),
    ".bz2": bz2.BZ2File,
    ".xz": lzma.LZMAFile,
}
_DAMAGE = (
    tarfile.TarError,
    zipfile.BadZipFile,
    lzma.LZMAError,
    zlib.error,
    EOFError,
    OSError,
    ValueError,
    RuntimeError,
)
_DAMAGED = "the file is damaged or cut"

Found = GravityField | tuple[GravityModel, ...]


def read_gravity_files(path: Path, *, source: str) -> tuple[Found, ...]:
    """Read every ICGEM file (``.gfc``) of a folder or archive.

    Parameters
    ----------
    path : pathlib.Path
        A folder (its own files, not those of folders in it), a tar archive (plain or compressed), a zip archive, or
        one file, plain or compressed with gzip, bzip2 or xz.
    source : str
        As the analyst wrote it.

    Returns
    -------
    tuple of GravityField or tuple of GravityModel
        In the order of their names.

    Raises
    ------
    InputError
        The faults of all files, and archives that are damaged or hold no such file. Members of an archive are read
        in memory; their paths are never used.
    """
    faults: list[Fault] = []
    found: list[tuple[str, Found]] = []
    try:
        for name, data in _files(path, source):
            inside = source if name == path.name and path.is_file() else f"{source}/{name}"
            with collect(faults):
                found.append((name, parse_icgem(data, name=name, source=inside)))
    except _DAMAGE as error:
        detail = f"{_DAMAGED}: {str(error) or type(error).__name__}"
        faults.append(Fault(source, "", detail, action="Fetch it again"))
    if not faults and not found:
        allowed = "Must hold files whose names end in .gfc"
        faults.append(Fault(source, "", "there is no gravity field in it", allowed, "Check the path"))
    if faults:
        raise InputError(faults)
    return tuple(field for _, field in sorted(found, key=lambda pair: pair[0]))


def _files(path: Path, source: str) -> Iterator[tuple[str, bytes]]:
    """Name and content of each gravity file."""
    if path.is_dir():
        for count, each in enumerate(sorted(each for each in path.iterdir() if is_field(each.name))):
            _limit(count, source)
            yield each.name, _opened(each)
    elif tarfile.is_tarfile(path):
        yield from _tar_members(path, source)
    elif zipfile.is_zipfile(path):
        yield from _zip_members(path, source)
    else:
        yield path.name, _opened(path)


def is_field(name: str) -> bool:
    """Say whether a name is that of a gravity field, plain or compressed."""
    return name.lower().removesuffix(".gz").removesuffix(".bz2").removesuffix(".xz").endswith(".gfc")


def is_archive(path: Path) -> bool:
    """Say whether a file is a tar or zip archive."""
    return tarfile.is_tarfile(path) or zipfile.is_zipfile(path)


def holds_model(path: Path) -> bool:
    """Say whether a file has terms that change with time; one that cannot be opened is left to the reader."""
    try:
        return re.search(rb"^gfct\s", _opened(path), re.MULTILINE) is not None
    except _DAMAGE:
        return False


def _opened(path: Path) -> bytes:
    with path.open("rb") as stream:
        return _unpacked(_bounded(stream, path.name), path.name)


def _tar_members(path: Path, source: str) -> Iterator[tuple[str, bytes]]:
    count = 0
    with tarfile.open(path) as archive:
        for member in archive:
            if member.isfile() and is_field(member.name):
                _limit(count, source)
                stream = archive.extractfile(member)
                if stream is not None:
                    count += 1
                    yield member.name.rsplit("/", 1)[-1], _unpacked(_bounded(stream, member.name), member.name)


def _zip_members(path: Path, source: str) -> Iterator[tuple[str, bytes]]:
    with zipfile.ZipFile(path) as archive:
        members = [each for each in archive.infolist() if not each.is_dir() and is_field(each.filename)]
        for count, member in enumerate(members):
            _limit(count, source)
            with archive.open(member) as stream:
                yield member.filename.rsplit("/", 1)[-1], _unpacked(_bounded(stream, member.filename), member.filename)


def _unpacked(data: bytes, name: str) -> bytes:
    """Take off the compression a file or a member of an archive has of its own."""
    suffix = Path(name).suffix.lower()
    if suffix not in _COMPRESSED:
        return data
    with _COMPRESSED[suffix](io.BytesIO(data)) as stream:
        return _bounded(stream, name)


def _bounded(stream: IO[bytes], name: str) -> bytes:
    """Read a stream that may unpack to far more than it takes on disk."""
    data = stream.read(MOST_BYTES + 1)
    if len(data) > MOST_BYTES:
        raise ValueError(f"{name} has more than {MOST_BYTES} bytes")
    return data


def _limit(count: int, source: str) -> None:
    if count >= _MOST_FILES:
        problem = f"there are more than {_MOST_FILES} gravity fields in it"
        raise InputError(Fault(source, "", problem, f"Must be at most {_MOST_FILES}", "Divide it"))
