"""Read the [gravity] table of a network file and everything it names."""

import csv
import os
from collections.abc import Callable, Sequence
from io import StringIO
from pathlib import Path
from typing import Any

import numpy as np

from massfit.constants import PASCAL_PER_HPA
from massfit.errors import Fault, InputError
from massfit.gravity.field import GravityField
from massfit.gravity.inputs import Determination, GravityInputs, Solution
from massfit.gravity.model import annual_degree
from massfit.gravity.tables import CoefficientTable
from massfit.io.gravity.coefficient_table import read_coefficient_table
from massfit.io.gravity.gravity_files import Found, read_gravity_files
from massfit.io.network.locate import KeyPath
from massfit.io.network.reading import Reading, open_reading
from massfit.io.network.sections import parse_sections
from massfit.phasor import phasor_from_peak, polar_covariance
from massfit.settings import Gravity

DETERMINATION_COLUMNS = ("label", "method", "amplitude_hpa", "amplitude_sd_hpa", "peak_day", "peak_day_sd")
_MOST_BYTES = 2**20


def read_gravity(path: str | os.PathLike[str], *, outside: bool = False) -> GravityInputs | None:
    r"""Read what a network file says of satellite gravity.

    Parameters
    ----------
    path : path
        A network.toml, or the folder that holds one.
    outside : bool
        Whether its paths may leave its folder. No address is ever opened.

    Returns
    -------
    GravityInputs or None
        None where the file has no [gravity].

    Raises
    ------
    InputError
        With every fault of the table and of the files it names.

    Examples
    --------
    >>> from tempfile import TemporaryDirectory
    >>> head = "product_type gravity_field\nearth_gravity_constant 3.986004415e14\nradius 6378136.3\nmax_degree 2\n"
    >>> rows = "gfct 2 0 -4.8417e-04 0 20100101\nacos 2 0 3e-11 0 1.0\ngfc 2 1 0 0\ngfc 2 2 2.4e-06 -1.4e-06\n"
    >>> with TemporaryDirectory() as name:
    ...     model, network = Path(name, "invented.gfc"), Path(name, "network.toml")
    ...     _ = model.write_text(f"{head}errors no\nend_of_head\n{rows}")
    ...     _ = network.write_text('[gravity]\nfields = "invented.gfc"\nbuffer_km = 200')
    ...     found = read_gravity(network)
    >>> found.settings.buffer_km, found.solutions[0].name, len(found.solutions[0].models)
    (200.0, 'invented', 1)
    """
    reading = open_reading(path, outside=outside)
    settings, assimilating = _gravity_of(reading)
    return None if settings is None else gravity_inputs(reading, settings, assimilating)


def gravity_settings(path: str | os.PathLike[str], *, outside: bool = False) -> tuple[Gravity | None, tuple[str, ...]]:
    """Read what a network file says of the processing of satellite gravity, and open none of the files it names.

    Parameters
    ----------
    path : path
        A network.toml, or the folder that holds one.
    outside : bool

    Returns
    -------
    settings : Gravity or None
        None where the file has no [gravity].
    assimilating : tuple of str
        Ocean models of the network that assimilated satellite gravity.

    Raises
    ------
    InputError
        With every fault of the table.
    """
    return _gravity_of(open_reading(path, outside=outside))


def _gravity_of(reading: Reading) -> tuple[Gravity | None, tuple[str, ...]]:
    sections = parse_sections(reading, records=False)
    reading.inputs.clear()
    reading.faults[:] = [fault for fault in reading.faults if fault.name.startswith("gravity")]
    if reading.faults:
        raise InputError(reading.faults)
    assimilating = tuple(entry.name for _, entry in sections.circulation if entry.assimilates_satellite_gravity)
    return sections.gravity, assimilating


def gravity_inputs(reading: Reading, settings: Gravity, assimilating: tuple[str, ...]) -> GravityInputs:
    """Read every file that the settings name.

    Parameters
    ----------
    reading : Reading
        Paths start at its folder.
    settings : Gravity
    assimilating : tuple of str

    Returns
    -------
    GravityInputs

    Raises
    ------
    InputError
        With the faults of all files.
    """
    solutions = [
        solution for place, text in enumerate(settings.fields)
        if (solution := _solution(reading, ("gravity", "fields", place), text)) is not None
    ]  # fmt: skip
    names = [solution.name for solution in solutions]
    for place, name in enumerate(names):
        if name in names[:place]:
            reading.fault(
                ("gravity", "fields", place), f'two solutions are called "{name}"', "Must differ", "Rename one"
            )
    found = GravityInputs(
        settings,
        tuple(solutions),
        degree_one=_table(reading, "degree_one", settings.degree_one),
        low_degree=_table(reading, "low_degree", settings.low_degree),
        atmosphere=_product(reading, "atmosphere", settings.atmosphere),
        dealiasing=_product(reading, "dealiasing", settings.dealiasing),
        determinations=_read(reading, "determinations", settings.determinations, read_determinations) or (),
        assimilating_models=assimilating,
        inputs=reading.inputs,
        warnings=tuple(reading.warnings),
    )
    if reading.faults:
        raise InputError(reading.faults)
    return found


def _solution_name(folder: Path, text: str) -> str:
    """Name a solution after its folder or file, without the endings of archives."""
    name = (folder / text).resolve().name if text == "." else Path(text).name
    while Path(name).suffix.lower() in (".gz", ".xz", ".bz2", ".tar", ".tgz", ".zip", ".gfc"):
        name = Path(name).stem
    return name or text


def _found(reading: Reading, place: KeyPath, text: str) -> tuple[Found, ...] | None:
    file = reading.find(place, text, or_folder=True)
    return None if file is None else reading.attempt(read_gravity_files, file, source=text)


def _solution(reading: Reading, place: KeyPath, text: str) -> Solution | None:
    """Months, or one model; never both, since the months would be counted twice."""
    found = _found(reading, place, text)
    if found is None:
        return None
    months = tuple(each for each in found if isinstance(each, GravityField))
    models = [each for each in found if not isinstance(each, GravityField)]
    if models and (months or len(models) > 1):
        problem = f"{len(models)} of its {len(found)} files hold terms that change with time"
        allowed = "Must be fields of single months, or one model"
        reading.fault(place, problem, allowed, "Give each model as a solution of its own")
        return None
    if models and not annual_degree(models[0]):
        reading.fault(place, "the model has no annual term", "Must have some (acos, asin)", "Give another model")
        return None
    return Solution(_solution_name(reading.folder, text), months, models[0] if models else ())


def _fields(reading: Reading, place: KeyPath, text: str) -> tuple[GravityField, ...] | None:
    found = _found(reading, place, text)
    if found is None:
        return None
    months = tuple(each for each in found if isinstance(each, GravityField))
    if len(months) < len(found):
        problem = f"{len(found) - len(months)} of its files hold terms that change with time"
        reading.fault(place, problem, "Must be fields of single months", "Leave these files out")
        return None
    return months


def _product(reading: Reading, key: str, text: str | None) -> tuple[GravityField, ...]:
    return () if text is None else _fields(reading, ("gravity", key), text) or ()


def _table(reading: Reading, key: str, text: str | None) -> CoefficientTable | None:
    table: CoefficientTable | None = _read(reading, key, text, read_coefficient_table)
    if table is None:
        return None
    degrees = {degree for _, degree, _ in table.coefficients}
    if (key == "degree_one") != (degrees == {1}):
        problem = f"it holds degrees {', '.join(map(str, sorted(degrees)))}"
        wanted = "Must be a table of degree 1" if key == "degree_one" else "Must be a table of C20, or of C20 and C30"
        reading.fault(("gravity", key), problem, wanted, "Give the right table")
    return table


def _read(reading: Reading, key: str, text: str | None, reader: Callable[..., Any]) -> Any:
    if text is None or (file := reading.find(("gravity", key), text)) is None:
        return None
    return reading.attempt(reader, file, source=text)


def read_determinations(path: Path, *, source: str) -> tuple[Determination, ...]:
    """Read other determinations of the annual cycle of ocean mass.

    Parameters
    ----------
    path : pathlib.Path
        CSV with the header ``label,method,amplitude_hpa,amplitude_sd_hpa,peak_day,peak_day_sd``; days after
        1 January 00:00 UTC. Lines that begin with # are comments.
    source : str
        As the analyst wrote it.

    Returns
    -------
    tuple of Determination
        Errors of amplitude and day are taken as independent.

    Raises
    ------
    InputError
        Every fault, with its line.
    """
    if path.stat().st_size > _MOST_BYTES:
        problem = f"the file has {path.stat().st_size} bytes"
        raise InputError(Fault(source, "", problem, f"Must be at most {_MOST_BYTES}", "Check the path"))
    try:
        text = path.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError:
        raise InputError(Fault(source, "", "the file is not UTF-8 text", "Must be CSV", "Check the path")) from None
    lines = [(number, line) for number, line in enumerate(text.splitlines(), 1)]
    rows = [(number, line) for number, line in lines if line.strip() and not line.startswith("#")]
    header = next(csv.reader(StringIO(rows[0][1])), []) if rows else []
    if tuple(word.strip() for word in header) != DETERMINATION_COLUMNS:
        problem = f"the header is {','.join(header)!r}"
        raise InputError(
            Fault(source, "", problem, f"Must be {','.join(DETERMINATION_COLUMNS)}", "Name the columns", 1)
        )
    faults: list[Fault] = []
    found = [
        each for number, line in rows[1:]
        if (each := _determination(next(csv.reader(StringIO(line)), []), source, number, faults)) is not None
    ]  # fmt: skip
    if faults:
        raise InputError(faults)
    return tuple(found)


def _determination(words: Sequence[str], source: str, line: int, faults: list[Fault]) -> Determination | None:
    if len(words) != len(DETERMINATION_COLUMNS):
        problem = f"the row has {len(words)} columns"
        faults.append(Fault(source, "row", problem, f"Must be {len(DETERMINATION_COLUMNS)}", "Mend the row", line))
        return None
    limits = dict(
        zip(DETERMINATION_COLUMNS[2:], ((0.0, 20.0), (0.0, 20.0), (-366.0, 732.0), (0.0, 183.0)), strict=True)
    )
    numbers = []
    for (name, (low, high)), word in zip(limits.items(), words[2:], strict=True):
        try:
            value = float(word)
        except ValueError:
            value = np.nan
        zero = value == 0.0 and name != "peak_day"  # nothing is known without error, and no cycle has no amplitude
        if not low <= value <= high or zero:
            allowed = f"Must be a number from {low:g} to {high:g}" + (", above 0" if name != "peak_day" else "")
            faults.append(Fault(source, name, f"the value is {word.strip()!r}", allowed, "Correct it", line))
        numbers.append(value)
    if any(fault.line == line for fault in faults):
        return None
    amplitude, amplitude_sd, day, day_sd = numbers
    phasor = phasor_from_peak(PASCAL_PER_HPA * amplitude, day)
    covariance = polar_covariance(phasor, PASCAL_PER_HPA * amplitude_sd, day_sd)
    return Determination(words[0].strip(), words[1].strip(), phasor, covariance)
