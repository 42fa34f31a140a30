"""What differs between two results folders."""

from pathlib import Path
from typing import Any

from massfit.errors import Fault, InputError, collect
from massfit.io.results.read_results import read_results
from massfit.results.contrast import contrast


def contrast_folders(first: Path, second: Path) -> dict[str, Any]:
    """Say what differs between two results folders.

    Parameters
    ----------
    first, second : Path

    Returns
    -------
    dict
        Of `results.contrast.contrast`.

    Raises
    ------
    InputError
        Every fault of both folders: no results, or a file that was changed.
    """
    faults: list[Fault] = []
    runs = []
    for folder in (first, second):
        with collect(faults):
            runs.append(read_results(folder))
    if faults:
        raise InputError(faults)
    return contrast(*runs)
