"""A column of values by which a user orders the sites."""

from pathlib import Path

from massfit.errors import Fault, InputError
from massfit.io.fields.csv_rows import csv_rows

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
    rows = csv_rows(path)
    if not rows or rows[0][2] != _HEADER:
        raise InputError(Fault(source, "", "the header is not site,value", "Must be site,value", "Add it"))
    found: dict[str, float] = {}
    faults = []
    for number, line, values in rows[1:]:
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
