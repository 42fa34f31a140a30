"""Read a results folder, refusing one that was changed since it was made."""

import csv
import hashlib
import json
from pathlib import Path, PurePosixPath
from typing import Any

import xarray as xr

from massfit.errors import Fault, InputError
from massfit.io.results.fingerprint_folder import FINGERPRINT_TABLE
from massfit.io.results.results_folder import BLANK, ESTIMATE_FILE, PHASORS_FILE, RUN_FILE, file_digest
from massfit.results.finished import FinishedRun
from massfit.results.screening import SCREENING_FILE

_REDRAWN = (".html", ".png")
_FROM_SUMMARY = {"sites.csv", "what_if.csv"}  # written from estimate.json each time


def read_results(folder: Path) -> FinishedRun:
    """Read what a run left in its results folder.

    Parameters
    ----------
    folder : Path

    Returns
    -------
    FinishedRun

    Raises
    ------
    InputError
        It is no results folder; or one fault for every file that is missing or whose SHA-256 is not that of
        run.json. A missing figure or page is none: `massfit report` draws them anew.
    """
    return _read_verified(folder, _read_run(folder), ESTIMATE_FILE)


def read_site_run(folder: Path) -> FinishedRun:
    """Read what `massfit phasors` left in its folder.

    Parameters
    ----------
    folder : Path

    Returns
    -------
    FinishedRun

    Raises
    ------
    InputError
        As for `read_results`.
    """
    return _read_verified(folder, _read_run(folder, holds=PHASORS_FILE), PHASORS_FILE)


def is_site_run(folder: Path) -> bool:
    """Whether a folder is one that `massfit phasors` wrote, as far as its run.json says."""
    try:
        return PHASORS_FILE in json.loads((folder / RUN_FILE).read_text(encoding="utf-8"))["outputs"]
    except (OSError, ValueError, LookupError, TypeError):
        return False  # whoever reads it says what is wrong


def _read_verified(folder: Path, provenance: dict[str, Any], summary_file: str) -> FinishedRun:
    outputs = provenance["outputs"]
    faults = [fault for name in outputs for fault in _faults(folder, name, outputs[name])]
    if faults:
        raise InputError(faults)
    summary = json.loads((folder / summary_file).read_text(encoding="utf-8"))
    files = {name: _read_groups(folder / name) for name in outputs if name.endswith(".nc")}
    datasets = {name + group: dataset for name, groups in files.items() for group, dataset in groups.items()}
    apart = [name for name in outputs if name.endswith(".csv") and name not in _FROM_SUMMARY]
    tables = {name: _read_rows(folder / name) for name in apart}
    return FinishedRun(summary, provenance, datasets, tables)


def _read_run(folder: Path, *, holds: str = ESTIMATE_FILE) -> dict[str, Any]:
    path = folder / RUN_FILE
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
        outputs = content["outputs"]
        for command, own in (("fingerprint", FINGERPRINT_TABLE), ("phasors", PHASORS_FILE), ("screen", SCREENING_FILE)):
            if own in outputs and own != holds:
                raise InputError(_another_command(folder, command))
        outputs[RUN_FILE], outputs[holds]
        if not all(_inside(name) for name in outputs):
            raise ValueError("a name leads out of the folder")
    except OSError as error:
        problem = f"it is no results folder of massfit: {RUN_FILE} cannot be read ({error.strerror})"
        raise InputError(Fault(str(folder), "", problem, "", "Name the folder that massfit estimate wrote")) from error
    except (ValueError, LookupError, TypeError) as error:
        raise InputError(_damaged(folder, RUN_FILE, "the file is damaged or of another version")) from error
    return dict(content)


def _another_command(folder: Path, command: str) -> Fault:
    problem = f"it holds what massfit {command} wrote, without an answer"
    return Fault(str(folder), "", problem, "", "Name the folder that massfit estimate wrote")


def _inside(name: str) -> bool:
    path = PurePosixPath(name)
    return not path.is_absolute() and ".." not in path.parts


def _faults(folder: Path, name: str, expected: str) -> list[Fault]:
    path = folder / name
    if not path.is_file():
        return [] if path.suffix in _REDRAWN else [_damaged(folder, name, "the file is missing")]
    found = _own_digest(path, expected) if name == RUN_FILE else file_digest(path)
    if found == expected:
        return []
    problem = f"the file was changed since it was made: its SHA-256 begins {found[:12]}, run.json says {expected[:12]}"
    return [_damaged(folder, name, problem)]


def _own_digest(path: Path, expected: str) -> str:
    text = path.read_bytes().replace(expected.encode(), BLANK.encode(), 1)
    return hashlib.sha256(text).hexdigest()


def _damaged(folder: Path, name: str, problem: str) -> Fault:
    action = "Make the results anew with massfit estimate --overwrite"
    if name.endswith(_REDRAWN):
        action = "Remove the file; massfit report draws it anew"
    return Fault(str(folder / name), "", problem, "", action)


def _read_groups(path: Path) -> dict[str, xr.Dataset]:
    """Every Dataset of a file, under "/" and the name of its group; a file without groups has one, under ""."""
    with xr.open_datatree(path, engine="h5netcdf") as tree:
        if not tree.children:
            return {"": tree.to_dataset().load()}
        return {f"/{name}": node.to_dataset(inherit=False).load() for name, node in tree.children.items()}


def _read_rows(path: Path) -> list[dict[str, str]]:
    """Rows as they are spelled, so that they are written again as they were."""
    with path.open(encoding="utf-8", newline="") as text:
        return list(csv.DictReader(text))
