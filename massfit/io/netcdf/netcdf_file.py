"""Open NetCDF files with an explicit engine, refusing damaged ones."""

import struct
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import BinaryIO

import xarray as xr

from massfit.errors import Fault, InputError, printable
from massfit.io.netcdf.guard import examined_problem

_HDF5_MAGIC = b"\x89HDF\r\n\x1a\n"
_OFFSET_FORMAT = {1: ">i", 2: ">q"}
_TYPE_SIZE = {1: 1, 2: 1, 3: 2, 4: 4, 5: 4, 6: 8}
_STREAMING = -1


def is_netcdf(path: Path) -> bool:
    """Whether a file is NetCDF by its first bytes, whatever its name.

    Parameters
    ----------
    path : pathlib.Path

    Returns
    -------
    bool
        True for HDF5 and for every variant of the classic format.
    """
    with path.open("rb") as file:
        start = file.read(8)
    return start == _HDF5_MAGIC or start[:3] == b"CDF"


def open_netcdf(
    path: Path, *, source: str = "", decode: bool = True, examined: bool = False, mapped: bool = False
) -> xr.Dataset:
    """Open a NetCDF file lazily.

    Parameters
    ----------
    path : pathlib.Path
    source : str
        Name of the file in an error; the path when empty.
    decode : bool
        Whether fill values, packing and times are decoded.
    examined : bool
        Whether the file was opened before and found whole: it is not examined again.
    mapped : bool
        Whether a file of the classic format stays on disk; its values are else read at once.

    Returns
    -------
    xarray.Dataset
        To be closed by the caller (a context manager).

    Raises
    ------
    InputError
        For a file that is not NetCDF, is damaged, links to another file or declares much
        more than it holds; or is shorter than its header says: the reader of the classic
        format would fill in the missing end without a word.
    """
    source = source or str(path)
    with path.open("rb") as file:
        magic = file.read(8)
    allowed, action = "Must be NetCDF-3 or NetCDF-4", "Fetch it again"
    if magic[:3] == b"CDF" and not examined:
        require_complete(path, source=source)
    elif magic[:3] != b"CDF" and magic != _HDF5_MAGIC:
        problem = f"the file cannot be read as NetCDF (it starts with {magic!r})"
        raise InputError(Fault(source, "", problem, allowed, action))
    elif not examined and magic == _HDF5_MAGIC and (problem := examined_problem(path)):
        problem = f"the file cannot be read as NetCDF ({problem})"
        raise InputError(Fault(source, "", problem, allowed, action))
    engine, options = ("scipy", {"mmap": mapped}) if magic[:3] == b"CDF" else ("h5netcdf", {})
    with damage_as_fault(source):
        return xr.open_dataset(path, engine=engine, mask_and_scale=decode, decode_times=decode, backend_kwargs=options)


def as_text(value: object) -> str:
    """Text of a label in a file, bytes or not, fit for a terminal.

    Parameters
    ----------
    value : object

    Returns
    -------
    str

    Examples
    --------
    >>> as_text(b"north")
    'north'
    """
    return printable((value.decode("utf-8", "replace") if isinstance(value, bytes) else str(value)).strip(" \0"))


@contextmanager
def damage_as_fault(source: str, name: str = "", kind: str = "NetCDF") -> Iterator[None]:
    """Say of whatever a library raises on a file that the file cannot be read.

    The libraries meet numbers and attributes in damaged files that they never expected, and
    raise what happens to come: no list of exceptions would be complete.

    Parameters
    ----------
    source, name : str
        File and variable.
    kind : str
        "NetCDF" or "MATLAB".

    Raises
    ------
    InputError
        Those of the block as they are, any other exception as a fault.
    """
    try:
        yield
    except InputError:
        raise
    except Exception as error:
        shown = (str(error).splitlines() or [""])[0][:200]
        problem = f"the file cannot be read as {kind} ({type(error).__name__}: {shown})"
        allowed = "Must be NetCDF-3 or NetCDF-4" if kind == "NetCDF" else f"Must be a whole {kind} file"
        raise InputError(Fault(source, name, problem, allowed, "Fetch it again")) from error


def require_complete(path: Path, *, source: str = "") -> None:
    """Refuse a classic NetCDF file that is shorter than its header says.

    Parameters
    ----------
    path : pathlib.Path
    source : str
        Name of the file in an error; the path when empty.

    Raises
    ------
    InputError
        For a truncated or unreadable header, and for missing data.

    References
    ----------
    The NetCDF Classic Format Specification (Unidata; also OGC 10-092r3).
    """
    source = source or str(path)
    with path.open("rb") as file:
        try:
            needed = _needed_bytes(file)
        except (struct.error, LookupError, OSError) as error:
            problem = "the header of the classic NetCDF file is cut or of an unknown variant"
            allowed = "Must be the classic or the 64-bit offset format, or NetCDF-4"
            raise InputError(Fault(source, "", problem, allowed, "Fetch it again")) from error
    found = path.stat().st_size
    if found < needed:
        problem = f"the file is cut short: it has {found} bytes and its header announces {needed}"
        raise InputError(Fault(source, "", problem, action="Fetch it again"))


def _needed_bytes(file: BinaryIO) -> int:
    """Bytes up to the last value of the last variable."""
    version = file.read(4)[3]
    offset_format = _OFFSET_FORMAT[version]
    records = _integer(file)
    lengths = []
    for _ in range(_list_length(file)):
        _skip_name(file)
        lengths.append(_integer(file))
    _skip_attributes(file)
    fixed_end, record_start = 0, 0
    record_sizes: list[int] = []
    for _ in range(_list_length(file)):
        _skip_name(file)
        shape = [lengths[_integer(file)] for _ in range(_integer(file))]
        _skip_attributes(file)
        size = _TYPE_SIZE[_integer(file)]
        _integer(file)
        begin = struct.unpack(offset_format, file.read(struct.calcsize(offset_format)))[0]
        is_record = bool(shape) and shape[0] == 0
        for length in shape[is_record:]:
            size *= length
        if is_record:
            record_start = begin if not record_sizes else min(record_start, begin)
            record_sizes.append(size)
        else:
            fixed_end = max(fixed_end, begin + size)
    if not record_sizes or records in (0, _STREAMING):
        return max(fixed_end, file.tell())
    # a single record variable is packed without padding; the last one of several may lack it
    padding = -record_sizes[-1] % 4
    stride = record_sizes[0] if len(record_sizes) == 1 else sum(size + -size % 4 for size in record_sizes)
    last = stride if len(record_sizes) == 1 else stride - padding
    return int(max(fixed_end, record_start + (records - 1) * stride + last))


def _integer(file: BinaryIO) -> int:
    return int(struct.unpack(">i", file.read(4))[0])


def _list_length(file: BinaryIO) -> int:
    _integer(file)  # the tag; absent lists have length 0
    return _integer(file)


def _skip_name(file: BinaryIO) -> None:
    length = _integer(file)
    file.seek(length + -length % 4, 1)


def _skip_attributes(file: BinaryIO) -> None:
    for _ in range(_list_length(file)):
        _skip_name(file)
        size = _TYPE_SIZE[_integer(file)]
        length = size * _integer(file)
        file.seek(length + -length % 4, 1)
