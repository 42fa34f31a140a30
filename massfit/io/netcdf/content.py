"""What a file is, told by its first bytes and not by its name."""

import re
from pathlib import Path
from typing import Literal

from massfit.errors import Fault, InputError
from massfit.io.netcdf.netcdf_file import is_netcdf

Format = Literal["NetCDF", "MATLAB", "text"]

_MATLAB = re.compile(rb"MATLAB (5\.0|7\.3) MAT-file")
_FOREIGN = {
    b"\x1f\x8b": "a gzip archive", b"PK\x03\x04": "a zip archive or a spreadsheet", b"BZh": "a bzip2 archive",
    b"\xfd7zXZ\0": "an xz archive", b"\x0e\x03\x13\x01": "HDF4", b"GRIB": "GRIB", b"BUFR": "BUFR", b"%PDF": "a PDF",
    b"\xd0\xcf\x11\xe0": "a spreadsheet or document of an office program", b"\x89PNG": "a picture",
}  # fmt: skip
_LOOKED_AT = 16_384
_MOST_STRANGE = 0.1
"""Share of bytes that are no text, above which a file is none: a stray one is the fault of its line."""
_TEXT_BYTES = bytes(range(0x20, 0x7F)) + b"\t\n\r\f"


def format_of(path: Path, *, source: str) -> Format:
    """Tell what a record file is.

    Parameters
    ----------
    path : pathlib.Path
    source : str
        File as the analyst wrote it.

    Returns
    -------
    str
        "NetCDF", "MATLAB" or "text".

    Raises
    ------
    InputError
        It is none of them.
    """
    if is_netcdf(path):
        return "NetCDF"
    with path.open("rb") as file:
        start = file.read(_LOOKED_AT)
    if _MATLAB.match(start):
        return "MATLAB"
    allowed, action = "Must be NetCDF, MATLAB or text", "Check the path, or fetch it again"
    for magic, name in _FOREIGN.items():
        if start.startswith(magic):
            known = "Unpack it" if "archive" in name else "Write it as one of these"
            raise InputError(Fault(source, "", f"the file is {name}", allowed, known))
    if start.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise InputError(Fault(source, "", "the file is text in UTF-16", "Must be UTF-8 or ASCII", "Save it as UTF-8"))
    if _strange(start) > _MOST_STRANGE * len(start):
        problem = f"the file is neither NetCDF, MATLAB nor text (it starts with {start[:8]!r})"
        raise InputError(Fault(source, "", problem, allowed, action))
    return "text"


def _strange(start: bytes) -> int:
    """Bytes that are neither plain text nor part of a letter in UTF-8."""
    letters = start.decode("utf-8", errors="ignore").encode()
    plain = letters.translate(None, delete=bytes(byte for byte in range(0x80) if byte not in _TEXT_BYTES))
    return len(start) - len(plain)
