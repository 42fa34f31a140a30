"""From what the user names on the command line to the fields of the ocean models."""

import glob
from collections.abc import Sequence
from pathlib import Path

from massfit.errors import Fault, InputError, collect
from massfit.io.fields.sea_floor_field import is_field_file, is_zarr, sea_floor_field
from massfit.screening.field import OCEAN_MEAN_CHOICES, ModelField, OceanMeanChoice, ocean_mean_fault

_PATTERN = set("*?[")


def read_model_fields(
    named: Sequence[str], *, ocean_mean: Sequence[str] = (), variable: str | None = None
) -> list[ModelField]:
    """Look into the files of every model; what they hold is read block by block, later.

    Parameters
    ----------
    named : sequence of str
        One model each, ``PATH`` or ``NAME=PATH``: a NetCDF file, a Zarr store, a folder of NetCDF files, or a pattern
        such as ``fields/north_*.nc``.
    ocean_mean : sequence of str
        ``subtract`` or ``removed`` for all models, ``NAME=subtract`` or ``NAME=removed`` for one.
    variable : str, optional
        Which variable; optional where unambiguous.

    Returns
    -------
    list of ModelField

    Raises
    ------
    InputError
        Every fault of every model.
    """
    faults: list[Fault] = []
    models = dict.fromkeys(_name(text) for text in named)
    choices = _choices(ocean_mean, list(models), faults)
    fields = []
    for text in named:
        name = _name(text)
        if name not in choices:
            faults.append(ocean_mean_fault(name, None))
        with collect(faults):
            source = sea_floor_field(_files(_path(text)), variable=variable)
            fields.append(ModelField(name, source, choices.get(name, "removed")))
    if faults:
        raise InputError(faults)
    return fields


def _choices(texts: Sequence[str], models: list[str], faults: list[Fault]) -> dict[str, OceanMeanChoice]:
    """Choice by model; what is said of one goes before what is said of all."""
    for_all: dict[str, OceanMeanChoice] = {}
    for_one: dict[str, OceanMeanChoice] = {}
    for text in texts:
        name, _, choice = text.rpartition("=")
        if choice not in OCEAN_MEAN_CHOICES:
            faults.append(ocean_mean_fault(name or "--ocean-mean", choice))
        elif name and name not in models:
            problem = f"no model is called {name!r}"
            faults.append(Fault("--ocean-mean", text, problem, "Must be one of " + ", ".join(models)))
        elif name:
            for_one[name] = choice  # type: ignore[assignment]
        else:
            for_all = dict.fromkeys(models, choice)  # type: ignore[arg-type]
    return {**for_all, **for_one}


def _name(text: str) -> str:
    """Name of a model: as stated, else the name of its file without the ending."""
    name, stated, _ = text.partition("=")
    if stated and "/" not in name:
        return name
    stem = Path(text).name.split(".")[0].rstrip("*?_-")
    return stem or Path(text).parent.name or "model"


def _path(text: str) -> str:
    name, stated, path = text.partition("=")
    return path if stated and "/" not in name else text


def _files(text: str) -> list[Path]:
    """Files of a model, in the order of their names."""
    if "://" in text:
        raise InputError(Fault(text, "", "it is an address", "Must be a file: no address is ever opened", "Fetch it"))
    path = Path(text)
    if _PATTERN & set(text) and not path.exists():
        found = [Path(match) for match in sorted(glob.glob(text))]
        if not found:
            raise InputError(Fault(text, "", "the pattern fits no file", "At least one", "Check the pattern"))
        return found
    if path.is_dir() and not is_zarr(path):
        found = [entry for entry in sorted(path.iterdir()) if is_field_file(entry)]
        if not found:
            problem = "the folder holds no NetCDF file and no Zarr store"
            raise InputError(Fault(text, "", problem, "At least one", "Check the path"))
        return found
    return [path]
