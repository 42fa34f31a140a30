"""Small CSV tables that users write by hand."""

import csv
from pathlib import Path

from massfit.errors import Fault, InputError


def csv_rows(path: Path) -> list[tuple[int, str, list[str]]]:
    """Read the rows of a table, its header among them.

    Parameters
    ----------
    path : pathlib.Path
        UTF-8; empty lines and lines that begin with ``#`` are passed over.

    Returns
    -------
    list of (int, str, list of str)
        Number of the line, the line, and its values without blanks around them.

    Raises
    ------
    InputError
        The file cannot be read.
    """
    try:
        lines = path.read_text(encoding="utf-8-sig").splitlines()
    except (OSError, UnicodeDecodeError) as error:
        why = error.strerror if isinstance(error, OSError) else "it is not text in UTF-8"
        raise InputError(Fault(str(path), "", f"the file cannot be read: {why}", "", "Check the path")) from error
    return [
        (number, line, [value.strip() for value in next(csv.reader([line]))])
        for number, line in enumerate(lines, 1)
        if line.strip() and not line.startswith("#")
    ]
