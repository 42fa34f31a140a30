"""Which files of a folder may be records, and the first lines of those that are text."""

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

NETCDF_SUFFIXES = (".nc", ".nc4", ".cdf", ".netcdf")
MATLAB_SUFFIX = ".mat"
TEXT_SUFFIXES = (".txt", ".csv", ".tsv", ".dat", ".asc", ".tab", ".prn")
HEAD_LINES = 20_000
_TAIL_BYTES = 8_192
_LONGEST_LINE = 10_000
_MOST_FILES = 2_000
_SERIES_HEAD = 30  # lines in which the header of a series is looked for


@dataclass(frozen=True)
class FoundFile:
    """A file of the folder.

    Parameters
    ----------
    path : pathlib.Path
    name : str
        Relative to the folder, with forward slashes.
    skipped : str
        Why it is not opened; empty where it may be a record.
    """

    path: Path
    name: str
    skipped: str = ""


def files_of(folder: Path) -> list[FoundFile]:
    """List the files of a folder and of the folders in it, in the order of their names.

    Hidden files and folders are passed over, and so is `results`.

    Parameters
    ----------
    folder : pathlib.Path

    Returns
    -------
    list of FoundFile
        Only regular files inside the folder whose ending is that of NetCDF, MATLAB or text may be opened.
    """
    return [FoundFile(path, path.relative_to(folder).as_posix(), _skipped(path, folder)) for path in _walk(folder)]


def _walk(folder: Path) -> Iterator[Path]:
    count = 0
    for child in sorted(folder.iterdir()):
        own = not child.name.startswith(".") and child.name not in ("results", "network.toml")
        inner = sorted(child.iterdir()) if own and child.is_dir() and not child.is_symlink() else [child]
        for path in inner:
            if own and not path.name.startswith(".") and not (path.is_dir() and not path.is_symlink()):
                count += 1
                if count > _MOST_FILES:
                    return
                yield path


def _skipped(path: Path, folder: Path) -> str:
    if not path.resolve().is_relative_to(folder.resolve()):
        return "it is a link that leads out of the folder"
    if not path.is_file():
        return "it is not a regular file"
    if path.suffix.casefold() not in (*NETCDF_SUFFIXES, MATLAB_SUFFIX, *TEXT_SUFFIXES):
        return f"records end with {', '.join((*NETCDF_SUFFIXES[:1], MATLAB_SUFFIX, *TEXT_SUFFIXES))}"
    return "the file is empty" if path.stat().st_size == 0 else ""


def is_series(path: Path) -> bool:
    """Whether a file has the form of an ocean-mean series: comments, and the header ``time,value``.

    Parameters
    ----------
    path : pathlib.Path

    Returns
    -------
    bool
    """
    if path.suffix.casefold() not in TEXT_SUFFIXES:
        return False
    with path.open("rb") as file:
        lines = [file.readline(_LONGEST_LINE) for _ in range(_SERIES_HEAD)]
    head = next((line for line in lines if line.strip() and not line.lstrip().startswith(b"#")), b"")
    return head.strip().removeprefix(b"\xef\xbb\xbf").lower() == b"time,value"


def text_lines(path: Path) -> list[str]:
    """Read the first lines of a text file, and the last few of a long one.

    Parameters
    ----------
    path : pathlib.Path

    Returns
    -------
    list of str
        Without line ends and blank lines; empty where the file is not text.
    """
    lines: list[str] = []
    with path.open("rb") as file:
        for raw in iter(lambda: file.readline(_LONGEST_LINE), b""):
            if len(raw) == _LONGEST_LINE or b"\0" in raw:
                return []
            lines.append(raw.decode("utf-8-sig" if not lines else "utf-8", errors="replace").rstrip("\r\n"))
            if len(lines) == HEAD_LINES:
                here, size = file.tell(), path.stat().st_size
                file.seek(max(here, size - _TAIL_BYTES))
                tail = file.read().decode("utf-8", errors="replace").splitlines()
                lines += tail if here >= size - _TAIL_BYTES else tail[1:]
                break
    return [line for line in lines if line.strip()]
