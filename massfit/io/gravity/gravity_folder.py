"""Satellite gravity from one folder, each file told apart by its name and content."""

import re
from collections.abc import Iterator
from dataclasses import dataclass, field, replace
from pathlib import Path

from massfit.errors import Fault, InputError
from massfit.gravity.inputs import GravityInputs
from massfit.io.gravity.coefficient_table import NO_LAYOUT, read_coefficient_table
from massfit.io.gravity.gravity_files import holds_model, is_archive, is_field
from massfit.io.gravity.read_gravity import DETERMINATION_COLUMNS, gravity_inputs, gravity_settings
from massfit.io.network.reading import Reading
from massfit.settings import Gravity

_PRODUCTS = {
    "atmosphere": re.compile(r"atmosphere|(?<![A-Za-z])GAA(?![A-Za-z])", re.IGNORECASE),
    "dealiasing": re.compile(r"dealiasing|(?<![A-Za-z])GAD(?![A-Za-z])", re.IGNORECASE),
}
"""Names of folders and archives that hold products, not solutions; three letters are what the centres call them."""


@dataclass
class _Found:
    """What a folder holds: paths below it, by the key of [gravity] they belong to."""

    fields: list[str] = field(default_factory=list)
    single: dict[str, list[str]] = field(default_factory=dict)
    others: list[str] = field(default_factory=list)

    def add(self, key: str, text: str) -> None:
        self.single.setdefault(key, []).append(text)


def read_gravity_folder(path: Path, *, network: Path, outside: bool = False) -> GravityInputs:
    """Read satellite gravity from a folder, an archive or a file, with the switches of a network file.

    Parameters
    ----------
    path : pathlib.Path
        An archive or a file of fields; or a folder of any of: monthly fields (one solution), model files (each a
        solution), folders and archives of fields (each a solution; a product where the name says atmosphere or GAA,
        dealiasing or GAD), a table of degree 1, a table of C20 and C30, a list of other determinations.
    network : pathlib.Path
        A network.toml or its folder: what its [gravity] says of the processing holds, what it says of files
        does not. Without [gravity] the defaults hold, with degrees as far as the fields reach.
    outside : bool
        Whether paths of the network file may leave its folder.

    Returns
    -------
    GravityInputs
        Files that are none of these are named in a warning.

    Raises
    ------
    InputError
        Two tables of one kind, nothing of use, or a file with a fault.
    """
    given, assimilating = gravity_settings(network, outside=outside)
    home, found = (path, _sorted_out(path)) if path.is_dir() else (path.parent, _Found(fields=[path.name]))
    faults = [
        Fault(str(path), key, f"there are {len(texts)}: {', '.join(texts)}", "Must be one", "Leave the others out")
        for key, texts in found.single.items() if len(texts) > 1
    ]  # fmt: skip
    if not found.fields:
        allowed = "Must hold monthly fields (.gfc), a model, or folders or archives of them"
        faults.append(Fault(str(path), "fields", "there is no gravity field in it", allowed, "Check the path"))
    if faults:
        raise InputError(faults)
    names = ("degree_one", "low_degree", "atmosphere", "dealiasing", "determinations")
    files = {name: next(iter(found.single.get(name, ())), None) for name in names}
    settings = replace(given or Gravity(fields=("",)), fields=tuple(found.fields), **files)  # type: ignore[arg-type]
    reading = Reading(str(path), home, True, {}, {})
    reading.warnings += [
        f"{text} is none of fields, tables and determinations, and is not used" for text in found.others
    ]
    inputs = gravity_inputs(reading, settings, assimilating)
    inputs = replace(inputs, inputs={f"{home.as_posix()}/{name}": digest for name, digest in inputs.inputs.items()})
    return inputs if given is not None else replace(inputs, settings=_within_reach(inputs))


def _within_reach(inputs: GravityInputs) -> Gravity:
    """Lower the default degree to that of the fields."""
    every = [each.max_degree for solution in inputs.solutions for each in solution.fields]
    every += [model.field.max_degree for solution in inputs.solutions for model in solution.models]
    return replace(inputs.settings, max_degree=max(5, min([inputs.settings.max_degree, *every])))


def _sorted_out(folder: Path) -> _Found:
    found = _Found()
    fields = []
    for each in sorted(folder.iterdir()):
        if each.name.startswith("."):
            continue
        if each.is_dir():
            _place_fields(found, each.name) if any(is_field(file.name) for file in each.iterdir()) else None
        elif is_field(each.name):
            fields.append(each)
        elif is_archive(each):
            _place_fields(found, each.name)
        else:
            found.add(kind, each.name) if (kind := _kind_of_table(each)) else found.others.append(each.name)
    models = [each.name for each in fields if holds_model(each)]
    if models and len(models) < len(fields):
        problem = f"it holds months and models side by side: {', '.join(models)}"
        raise InputError(Fault(str(folder), "fields", problem, "Must be one or the other", "Give months a folder"))
    found.fields += models or (["."] if fields else [])
    return found


def _place_fields(found: _Found, name: str) -> None:
    key = next((key for key, pattern in _PRODUCTS.items() if pattern.search(name)), None)
    if key is None:
        found.fields.append(name)
    else:
        found.add(key, name)


def _kind_of_table(path: Path) -> str | None:
    """Key of [gravity] that a text file belongs to; a table of a known layout with a fault in it is refused."""
    with path.open("rb") as stream:
        head = stream.read(4096).decode("utf-8", "replace").lstrip("\ufeff")
    first = next(_content(head), "")
    if tuple(word.strip() for word in first.split(",")) == DETERMINATION_COLUMNS:
        return "determinations"
    try:
        table = read_coefficient_table(path, source=path.name)
    except InputError as error:
        if any(NO_LAYOUT in fault.problem for fault in error.faults):
            return None
        raise
    return "degree_one" if {degree for _, degree, _ in table.coefficients} == {1} else "low_degree"


def _content(text: str) -> Iterator[str]:
    return (line for line in text.splitlines() if line.strip() and not line.startswith("#"))
