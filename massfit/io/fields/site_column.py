"""A column of values by which a user orders the sites."""

import csv
from pathlib import Path

from massfit.errors import Fault, InputError

_HEADER = ["site", "value"]


def read_site_column(path: Path) -> dict[str, float]:
    """Read a value for every site.

    Parameters
    ----------
    path : pathlib.Path
        CSV with the header ``site,value``; lines that begin with ``#`` are comments.

    Returns
    -------
    dict of str to float

    Raises
    ------
    InputError
        Every fault of the file, with lines.
    """
    source = str(path)
    try:
        lines = path.read_text(encoding="utf-8-sig").splitlines()
    except (OSError, UnicodeDecodeError) as error:
        why = error.strerror if isinstance(error, OSError) else "it is not text in UTF-8"
        raise InputError(Fault(source, "", f"the file cannot be read: {why}", "", "Check the path")) from error
    rows = [(number, line) for number, line in enumerate(lines, 1) if line.strip() and not line.startswith("#")]
    if not rows or [name.strip() for name in next(csv.reader([rows[0][1]]))] != _HEADER:
        raise InputError(Fault(source, "", "the header is not site,value", "Must be site,value", "Add it"))
    found: dict[str, float] = {}
    faults = []
    for number, line in rows[1:]:
        values = [value.strip() for value in next(csv.reader([line]))]
        try:
            site, value = values[0], float(values[1])
            if len(values) != len(_HEADER):
                raise ValueError
        except (IndexError, ValueError):
            faults.append(Fault(source, "value", f"the line is {line!r}", "Must be a site and a number", line=number))
            continue
        if site in found:
            faults.append(Fault(source, site, "the site stands there twice", "Once a site", line=number))
        found[site] = value
    if faults:
        raise InputError(faults)
    return found
