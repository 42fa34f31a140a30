"""Pressure records in MATLAB files: vectors of numbers, and a time in one of them or stated."""

import warnings
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray
from scipy.io import loadmat, whosmat

from massfit.errors import Fault, InputError, collect
from massfit.io.netcdf.file_examiner import HDF5_PLACE_IN_MATLAB, HDF5_START, MATLAB_NUMBERS
from massfit.io.netcdf.guard import examined_problem
from massfit.io.netcdf.netcdf_file import damage_as_fault
from massfit.io.network.reading import did_you_mean, nearest
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.flags import NO_FLAGS
from massfit.io.records.samples import Flags, Samples, coarse, in_pascal
from massfit.io.records.stated_time import stated_time
from massfit.io.records.text_time import DATENUM, counted_time, is_count
from massfit.io.records.units import pascal_per_unit
from massfit.records.record import Action

Vectors = dict[str, NDArray[Any]]


def matlab_shapes(path: Path, *, source: str) -> dict[str, tuple[int, ...]]:
    """Names and shapes of the arrays of real numbers of a MATLAB file.

    Parameters
    ----------
    path : pathlib.Path
    source : str
        File as the analyst wrote it.

    Returns
    -------
    dict of str to tuple of int
        In the order of the file; structures, cells, text and complex numbers are passed over.

    Raises
    ------
    InputError
        For a damaged file.
    """
    if problem := examined_problem(path):
        problem = f"the file cannot be read as MATLAB ({problem})"
        raise InputError(Fault(source, "", problem, "Must be a whole MATLAB file", "Fetch it again"))
    with damage_as_fault(source, kind="MATLAB"):
        if not _is_hdf5(path):
            return {name: shape for name, shape, kind in whosmat(path) if kind in MATLAB_NUMBERS}
        with h5py.File(path, "r") as file:
            return {name: item.shape for name, item in file.items() if _is_numeric(item)}


def read_matlab(path: Path, entry: DeploymentFile) -> Samples:
    """Read a vector of pressure from a MATLAB file of version 5 to 7.3.

    Parameters
    ----------
    path : pathlib.Path
    entry : DeploymentFile
        `units` is required; `time_variable`, or `start_time` and `interval_s`; `variable` where the file holds
        more than one vector besides the time.

    Returns
    -------
    Samples

    Raises
    ------
    InputError
        With every fault of variables, unit and time.

    References
    ----------
    The MathWorks, MAT-File Format (version 5); version 7.3 is HDF5 behind a header of 512 bytes.
    """
    shapes = matlab_shapes(path, source=entry.file)
    faults: list[Fault] = []
    factor, name = np.nan, ""
    with collect(faults):
        factor = _pascal_factor(entry)
    with collect(faults):
        name = _pressure_name(shapes, entry)
    wanted = {"variable": name, "time_variable": entry.time_variable, "flag_variable": _flag_name(entry)}
    for key, one in wanted.items():
        if one:
            faults += _vector_faults(key, one, shapes, entry)
    if entry.time_variable is None and entry.start_time is None:
        action = f"State `time_variable`, or `start_time` and `interval_s`; the file has {', '.join(shapes)}"
        faults.append(Fault(entry.file, "time", "nothing says what the times are", action=action))
    if faults:
        raise InputError(faults)
    with damage_as_fault(entry.file, name, kind="MATLAB"):
        vectors = _loaded(path, [one for one in wanted.values() if one])
    faults = [
        Fault(entry.file, one, f"it has {values.size} values and {name!r} has {vectors[name].size}", "Must agree")
        for one, values in vectors.items()
        if values.size != vectors[name].size
    ]
    if faults:
        raise InputError(faults)
    return _samples(vectors, name, factor, entry)


def read_vector(path: Path, name: str, *, source: str) -> NDArray[Any]:
    """Read one array of numbers of a file that was looked at by :func:`matlab_shapes`.

    Parameters
    ----------
    path : pathlib.Path
    name : str
    source : str
        File as the analyst wrote it.

    Returns
    -------
    (n,) array
        As it is stored.

    Raises
    ------
    InputError
        For a damaged file.
    """
    with damage_as_fault(source, name, kind="MATLAB"):
        return _loaded(path, [name])[name]


def _samples(vectors: Vectors, name: str, factor: float, entry: DeploymentFile) -> Samples:
    stored, actions = vectors[name], coarse(vectors[name], factor * entry.scale_factor)
    pressure = in_pascal(stored, entry, factor)
    if entry.time_variable is None:
        time = stated_time(stored.size, entry)
    else:
        time = _counted(vectors[entry.time_variable].astype(np.float64), entry)
    flag = _flag_name(entry)
    flags: tuple[Flags, ...] = (Flags(flag, vectors[flag].astype(np.float64)),) if flag else ()
    known = ~np.isnat(time)
    if not known.all():
        actions += (Action("samples without a time left out", int(np.count_nonzero(~known))),)
        time, pressure = time[known], pressure[known]
        flags = tuple(Flags(each.name, each.values[known]) for each in flags)
    return Samples(time, pressure, actions=actions, units=entry.units or "", flags=flags)


def _pascal_factor(entry: DeploymentFile) -> float:
    if entry.units is None:
        action = 'State `units`, for example units = "dbar"'
        raise InputError(Fault(entry.file, "units", "a MATLAB record does not say its unit", action=action))
    return pascal_per_unit(entry.units, density_kg_m3=entry.density_kg_m3, source=entry.file)


def _flag_name(entry: DeploymentFile) -> str | None:
    return None if entry.flag_variable == NO_FLAGS else entry.flag_variable


def _pressure_name(shapes: dict[str, tuple[int, ...]], entry: DeploymentFile) -> str:
    if entry.variable is not None:
        return entry.variable
    others = [name for name in shapes if name not in (entry.time_variable, entry.flag_variable)]
    vectors = [name for name in others if _is_vector(shapes[name]) and np.prod(shapes[name]) > 1]
    if len(vectors) == 1:
        return vectors[0]
    problem = f"more than one variable can be the pressure: {', '.join(vectors)}" if vectors else "no vector of numbers"
    action = f"State `variable`; the file has {', '.join(shapes) or 'no numbers'}"
    raise InputError(Fault(entry.file, "variable", problem, "Must be one", action))


def _vector_faults(key: str, name: str, shapes: dict[str, tuple[int, ...]], entry: DeploymentFile) -> list[Fault]:
    if name not in shapes:
        known = ", ".join(shapes) or "none"
        action = did_you_mean(nearest(name, shapes), f"Correct `{key}`")
        allowed = f"Its arrays of real numbers are {known}"
        return [Fault(entry.file, key, f"there is no array of numbers {name!r} in the file", allowed, action)]
    if not _is_vector(shapes[name]):
        problem = f"{name!r} has the shape {shapes[name]}"
        return [Fault(entry.file, key, problem, "Must be a vector", "Write one series to a variable of its own")]
    return []


def _is_vector(shape: tuple[int, ...]) -> bool:
    return sum(size != 1 for size in shape) <= 1


def _is_hdf5(path: Path) -> bool:
    with path.open("rb") as file:
        file.seek(HDF5_PLACE_IN_MATLAB)
        return file.read(len(HDF5_START)) == HDF5_START


def _is_numeric(item: Any) -> bool:
    if not isinstance(item, h5py.Dataset) or item.dtype.kind not in "iuf" or "MATLAB_empty" in item.attrs:
        return False
    kind = item.attrs.get("MATLAB_class", b"double")
    return (kind.decode() if isinstance(kind, bytes) else str(kind)) in MATLAB_NUMBERS


def _loaded(path: Path, names: list[str]) -> Vectors:
    if _is_hdf5(path):
        with h5py.File(path, "r") as file:
            found = {name: file[name][...] for name in names}
    else:
        with warnings.catch_warnings():
            warnings.simplefilter("error")  # a variable that stands twice
            found = loadmat(path, variable_names=names)
    return {name: np.asarray(found[name], dtype=found[name].dtype.newbyteorder("=")).ravel() for name in names}


def _counted(count: NDArray[np.float64], entry: DeploymentFile) -> NDArray[np.datetime64]:
    form, name = entry.time_format or DATENUM, str(entry.time_variable)
    if not is_count(form):
        problem = f"{form!r} is not a count of time"
        allowed = "Must be 'datenum' or like 'seconds since 1970-01-01'"
        raise InputError(Fault(entry.file, "time_format", problem, allowed, "Correct it"))
    time = counted_time(count, form, source=entry.file)
    wrong = np.flatnonzero(np.isnat(time) & ~np.isnan(count))
    if wrong.size:
        more = f" (and {wrong.size - 1} more)" if wrong.size > 1 else ""
        problem = f"element {wrong[0] + 1} is {count[wrong[0]]:.10g}{more}"
        allowed = f"Must be a number of {form} in the years 1900 to 2200"
        raise InputError(Fault(entry.file, name, problem, allowed, "Correct it or state `time_format`"))
    return time
