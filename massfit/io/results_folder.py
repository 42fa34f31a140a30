"""The results folder: written aside and moved into place, so that it is whole or not there."""

import csv
import io
import json
import shutil
import tempfile
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from massfit.errors import Fault, InputError

_CSV_COLUMNS = (
    "id", "in_phase_hpa", "quadrature_hpa", "variance_in_phase_hpa2", "covariance_hpa2", "variance_quadrature_hpa2",
    "admittance_real", "admittance_imaginary", "standardised_residual", "outlier_probability", "warnings",
)  # fmt: skip


def check_output(folder: Path, *, overwrite: bool) -> None:
    """Refuse an output folder that cannot or must not be written, before anything is computed.

    Parameters
    ----------
    folder : Path
        The results folder to be made.
    overwrite : bool
        Whether a finished one may be replaced.

    Raises
    ------
    InputError
        The folder exists and may not be replaced, is not a results folder, or its parent cannot be written.
    """
    here = str(folder)
    if folder.exists() and not folder.is_dir():
        raise InputError(Fault(here, "", "the output is a file", "Must be a folder", "Choose another with --output"))
    if folder.exists() and any(folder.iterdir()):
        if not (folder / "run.json").exists():
            problem = "the folder is not empty and holds no results of massfit, so it is left alone"
            raise InputError(Fault(here, "", problem, "", "Choose another with --output"))
        if not overwrite:
            problem = "the folder holds finished results"
            raise InputError(Fault(here, "", problem, "", "Give --overwrite to replace them, or --output to keep both"))
    parent = next(path for path in folder.absolute().parents if path.exists())
    try:  # trying is the only sure way: some file systems refuse what the permissions allow
        Path(tempfile.mkdtemp(prefix=".massfit-", dir=parent)).rmdir()
    except OSError as error:
        problem = f"the folder cannot be written ({error.strerror})"
        raise InputError(Fault(str(parent), "", problem, "", "Choose another with --output")) from error


def write_results(
    folder: Path,
    *,
    summary: Mapping[str, Any],
    run: Mapping[str, Any],
    datasets: Mapping[str, xr.Dataset],
    pictures: Mapping[str, bytes],
    page: str,
) -> None:
    """Write a results folder aside and move it into place.

    Parameters
    ----------
    folder : Path
        Where it shall be; an existing one is replaced only at the last moment.
    summary : mapping
        `estimate.json`.
    run : mapping
        `run.json`.
    datasets : mapping of str to xarray.Dataset
        By file name.
    pictures : mapping of str to bytes
        PNG images by file name, for `figures/`.
    page : str
        `report.html`.
    """
    folder.parent.mkdir(parents=True, exist_ok=True)
    partial = Path(tempfile.mkdtemp(prefix=f".{folder.name}-partial-", dir=folder.parent))
    try:
        _write_json(partial / "estimate.json", summary)
        _write_site_table(partial / "sites.csv", summary["sites"])
        for name, dataset in datasets.items():
            write_dataset(partial / name, dataset)
        (partial / "figures").mkdir()
        for name, picture in pictures.items():
            (partial / "figures" / name).write_bytes(picture)
        (partial / "report.html").write_text(page, encoding="utf-8")
        _write_json(partial / "run.json", run)
        partial.chmod(0o755)
        _move_into_place(partial, folder)
    finally:
        shutil.rmtree(partial, ignore_errors=True)


def write_dataset(path: Path, dataset: xr.Dataset) -> None:
    """Write a Dataset as compressed, checksummed NetCDF-4.

    Parameters
    ----------
    path : Path
    dataset : xarray.Dataset
    """
    encoding: dict[Any, dict[str, Any]] = {}
    for name, variable in dataset.variables.items():
        if variable.ndim and variable.dtype.kind in "fiuM":
            encoding[name] = {"zlib": True, "complevel": 4, "shuffle": True, "fletcher32": True}
            if variable.dtype.kind == "f" and name not in dataset.coords:
                encoding[name]["_FillValue"] = np.nan
    dataset.to_netcdf(path, engine="h5netcdf", encoding=encoding)


def _move_into_place(partial: Path, folder: Path) -> None:
    if folder.exists():
        old = Path(tempfile.mkdtemp(prefix=f".{folder.name}-old-", dir=folder.parent))
        folder.rename(old / "replaced")
        partial.rename(folder)
        shutil.rmtree(old)
    else:
        partial.rename(folder)


def _write_json(path: Path, content: Mapping[str, Any]) -> None:
    path.write_text(json.dumps(content, indent=2, allow_nan=False, ensure_ascii=False) + "\n", encoding="utf-8")


def _write_site_table(path: Path, sites: list[Mapping[str, Any]]) -> None:
    text = io.StringIO()
    table = csv.writer(text, lineterminator="\n")
    table.writerow(_CSV_COLUMNS)
    for site in sites:
        (variance_a, covariance), (_, variance_b) = site["phasor_covariance_hpa2"]
        numbers = [*site["phasor_hpa"], variance_a, covariance, variance_b, *site["admittance"]]
        numbers += [site["standardised_residual"], site["outlier_probability"]]
        table.writerow([site["id"], *(f"{number:.6g}" for number in numbers), " | ".join(site["warnings"])])
    path.write_text(text.getvalue(), encoding="utf-8")
