"""The results folder: written aside and moved into place, so that it is whole or not there."""

import csv
import hashlib
import io
import json
import shutil
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from massfit.errors import Fault, InputError
from massfit.io.results.partial_folder import PartialFolder
from massfit.phasor import COMPONENTS
from massfit.results.finished import FinishedRun

BLANK = "0" * 64
"""Stands for the digest of run.json inside run.json while that digest is taken."""

RUN_FILE = "run.json"

ESTIMATE_FILE = "estimate.json"

PHASORS_FILE = "phasors.json"
"""By it a folder of `massfit phasors` is known."""

_CSV_COLUMNS = (
    "id", "in_phase_hpa", "quadrature_hpa", "variance_in_phase_hpa2", "covariance_hpa2", "variance_quadrature_hpa2",
    "admittance_real", "admittance_imaginary", "standardised_residual", "outlier_probability", "warnings",
)  # fmt: skip

_CSV_SERIES = ("record", "long_period_tides", "pole_tide", "ocean_mean_atmosphere", "circulation", "calibrations")
"""Series whose phasors stand in the table too: the site's phasor and the others make up the first."""


def check_output(folder: Path, *, overwrite: bool, holds: str = ESTIMATE_FILE) -> None:
    """Refuse an output folder that must not be written, before anything is computed.

    Parameters
    ----------
    folder : Path
        The results folder to be made.
    overwrite : bool
        Whether a finished one may be replaced.
    holds : str
        File by which results of the same kind are known: those of another command are left alone.

    Raises
    ------
    InputError
        The folder exists and may not be replaced, or is not a results folder.
    """
    here = str(folder)
    if folder.exists() and not folder.is_dir():
        raise InputError(Fault(here, "", "the output is a file", "Must be a folder", "Choose another with --output"))
    if folder.exists() and any(folder.iterdir()):
        if not (folder / RUN_FILE).exists():
            problem = "the folder is not empty and holds no results of massfit, so it is left alone"
            raise InputError(Fault(here, "", problem, "", "Choose another with --output"))
        if not (folder / holds).exists():
            problem = f"the folder holds results of another command (there is no {holds}), so it is left alone"
            raise InputError(Fault(here, "", problem, "", "Choose another with --output"))
        if not overwrite:
            problem = "the folder holds finished results"
            raise InputError(Fault(here, "", problem, "", "Give --overwrite to replace them, or --output to keep both"))


def write_results(partial: PartialFolder, run: FinishedRun, *, pictures: Mapping[str, bytes], page: str) -> None:
    """Write a results folder aside and move it into place.

    Parameters
    ----------
    partial : PartialFolder
        Of the results folder; finished results are replaced only at the last moment.
    run : FinishedRun
        Its provenance is completed by the SHA-256 of every file, `outputs`.
    pictures : mapping of str to bytes
        PNG images by name, for `figures/`.
    page : str
        `report.html`.

    Raises
    ------
    InputError
        The folder cannot be written; results that were there before are untouched.
    """
    with partial.whole() as aside:
        _write_json(aside / ESTIMATE_FILE, run.summary)
        _write_site_table(aside / "sites.csv", run.summary["sites"])
        if "what_if" in run.summary:
            _write_rows(aside / "what_if.csv", run.summary["what_if"])
        for name, rows in run.tables.items():
            _write_rows(aside / name, rows)
        for name, groups in _by_file(run.datasets).items():
            write_groups(aside / name, groups) if "" not in groups else write_dataset(aside / name, groups[""])
        write_drawn(aside, pictures, page)
        write_run(aside, run.provenance, {path.relative_to(aside).as_posix() for path in aside.rglob("*.*")})
    partial.clear()


def redraw_results(
    partial: PartialFolder,
    run: FinishedRun,
    *,
    pictures: Mapping[str, bytes],
    page: str,
    page_file: str = "report.html",
) -> None:
    """Replace the figures and the page of finished results; every other file is kept as it is.

    Parameters
    ----------
    partial : PartialFolder
    run : FinishedRun
        As read from the results folder.
    pictures : mapping of str to bytes
    page, page_file : str
        HTML, and where it goes.

    Raises
    ------
    InputError
        The folder cannot be written; it is untouched then.
    """
    with partial.whole() as aside:
        shutil.copytree(partial.results, aside, symlinks=True, dirs_exist_ok=True)
        write_drawn(aside, pictures, page, name=page_file)
        drawn = {page_file, *(f"figures/{name}.png" for name in pictures)}
        # a file that someone laid beside the results is none of ours
        write_run(aside, run.provenance, drawn | set(run.provenance["outputs"]))


def write_folder(
    partial: PartialFolder,
    run: FinishedRun,
    *,
    summary_file: str,
    page_file: str,
    page: str,
    pictures: Mapping[str, bytes],
) -> None:
    """Write the folder of a single stage aside and move it into place.

    Parameters
    ----------
    partial : PartialFolder
    run : FinishedRun
        Its provenance is completed by the SHA-256 of every file, `outputs`.
    summary_file : str
        Where its summary goes.
    page_file, page : str
        Name and HTML of its page.
    pictures : mapping of str to bytes
        PNG images by name, for `figures/`.

    Raises
    ------
    InputError
        The folder cannot be written; what was there before is untouched.
    """
    with partial.whole() as aside:
        _write_json(aside / summary_file, run.summary)
        for name, rows in run.tables.items():
            _write_rows(aside / name, rows)
        for name, dataset in run.datasets.items():
            write_dataset(aside / name, dataset)
        write_drawn(aside, pictures, page, name=page_file)
        write_run(aside, run.provenance, {path.relative_to(aside).as_posix() for path in aside.rglob("*.*")})
    partial.clear()


def write_drawn(aside: Path, pictures: Mapping[str, bytes], page: str, *, name: str = "report.html") -> None:
    """Write figures and page.

    Parameters
    ----------
    aside : Path
    pictures : mapping of str to bytes
    page : str
    name : str
        File of the page.
    """
    (aside / "figures").mkdir(exist_ok=True)
    for picture, data in pictures.items():
        (aside / "figures" / f"{picture}.png").write_bytes(data)
    (aside / name).write_text(page, encoding="utf-8")


def write_run(aside: Path, provenance: Mapping[str, Any], names: Iterable[str]) -> None:
    """Write run.json with the digest of every file; its own is of its text with blanks in that place.

    Parameters
    ----------
    aside : Path
    provenance : mapping
    names : iterable of str
        Files of the folder, of which those that are there are listed.
    """
    outputs = {name: file_digest(aside / name) for name in sorted({*names} - {RUN_FILE}) if (aside / name).is_file()}
    content = {**provenance, "outputs": {**outputs, RUN_FILE: BLANK}}
    content["outputs"][RUN_FILE] = hashlib.sha256(_json(content).encode()).hexdigest()
    _write_json(aside / RUN_FILE, content)


def write_dataset(path: Path, dataset: xr.Dataset) -> None:
    """Write a Dataset as compressed, checksummed NetCDF-4.

    Parameters
    ----------
    path : Path
    dataset : xarray.Dataset
    """
    # made in memory: the library for HDF5 does not tell reliably when a disk is full
    path.write_bytes(dataset.to_netcdf(engine="h5netcdf", encoding=_encoding(dataset)))


def write_groups(path: Path, groups: Mapping[str, xr.Dataset]) -> None:
    """Write Datasets as the groups of one compressed, checksummed NetCDF-4 file.

    Parameters
    ----------
    path : Path
    groups : mapping of str to xarray.Dataset
        The attributes of the first stand at the head of the file too.
    """
    head = xr.Dataset(attrs=next(iter(groups.values())).attrs)
    tree = xr.DataTree.from_dict({"/": head, **{f"/{name}": group for name, group in groups.items()}})
    encoding = {f"/{name}": _encoding(group) for name, group in groups.items()}
    path.write_bytes(tree.to_netcdf(None, engine="h5netcdf", encoding=encoding))


def _by_file(datasets: Mapping[str, xr.Dataset]) -> dict[str, dict[str, xr.Dataset]]:
    """Datasets by file and group; the group of a file without any is empty text."""
    files: dict[str, dict[str, xr.Dataset]] = {}
    for name, dataset in datasets.items():
        file, _, group = name.partition("/")
        files.setdefault(file, {})[group] = dataset
    return files


def _encoding(dataset: xr.Dataset) -> dict[Any, dict[str, Any]]:
    encoding: dict[Any, dict[str, Any]] = {}
    for name, variable in dataset.variables.items():
        if variable.ndim and variable.dtype.kind in "fiuM":
            encoding[name] = {"zlib": True, "complevel": 4, "shuffle": True, "fletcher32": True}
            if variable.dtype.kind == "f":
                # coordinates and bounds of cells have no missing values (CF 1.13, 2.5.1 and 7.1)
                whole = name in dataset.coords or str(name).endswith("_bounds")
                encoding[name]["_FillValue"] = None if whole else np.nan
    return encoding


def file_digest(path: Path) -> str:
    """SHA-256 of a file's content.

    Parameters
    ----------
    path : Path

    Returns
    -------
    str
        64 hexadecimal digits.
    """
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def _write_json(path: Path, content: Mapping[str, Any]) -> None:
    path.write_text(_json(content), encoding="utf-8")


def _json(content: Mapping[str, Any]) -> str:
    return json.dumps(content, indent=2, allow_nan=False, ensure_ascii=False) + "\n"


def _write_site_table(path: Path, sites: list[Mapping[str, Any]]) -> None:
    text = io.StringIO()
    table = csv.writer(text, lineterminator="\n")
    table.writerow([*_CSV_COLUMNS, *(f"{name}_{part}_hpa" for name in _CSV_SERIES for part in COMPONENTS)])
    for site in sites:
        (variance_a, covariance), (_, variance_b) = site["phasor_covariance_hpa2"]
        numbers = [*site["phasor_hpa"], variance_a, covariance, variance_b, *site["admittance"]]
        numbers += [site["standardised_residual"], site["outlier_probability"]]
        texts = [site["id"], *(f"{number:.6g}" for number in numbers), " | ".join(site["warnings"])]
        table.writerow([*texts, *_series_phasors(site.get("corrections", []))])
    path.write_text(text.getvalue(), encoding="utf-8")


def _series_phasors(rows: Sequence[Mapping[str, Any]]) -> list[str]:
    """Spell the phasors of the record and of what was taken off it; empty where there is no record."""
    known = {row["series"]: row["phasor_hpa"] for row in rows if row["summand"] or row["series"] == "record"}
    nothing = [0.0, 0.0] if known else [None, None]
    values = [value for name in _CSV_SERIES for value in known.get(name, nothing)]
    return ["" if value is None else f"{value:.6g}" for value in values]


def _write_rows(path: Path, rows: Sequence[Mapping[str, Any]]) -> None:
    """Write rows that all have the same keys."""
    text = io.StringIO()
    table = csv.DictWriter(text, list(rows[0]), lineterminator="\n")
    table.writeheader()
    for row in rows:
        table.writerow({key: f"{item:.6g}" if isinstance(item, float) else item for key, item in row.items()})
    path.write_text(text.getvalue(), encoding="utf-8")
