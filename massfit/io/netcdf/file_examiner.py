"""Examine HDF5 and MATLAB files in a process of its own, which damaged ones may crash, stall or fill.

Run as a script by `guard.py`: it imports nothing of the package, says "ready", takes a path on each
line of its input (as JSON) and answers each with one line: "" or what is wrong, as JSON.
"""

import contextlib
import faulthandler
import json
import os
import sys
from math import prod
from typing import Any

import h5netcdf
import h5py

MATLAB_START = b"MATLAB "
MATLAB_NUMBERS = ("int8", "uint8", "int16", "uint16", "int32", "uint32", "int64", "uint64", "single", "double")
HDF5_START, HDF5_PLACE_IN_MATLAB = b"\x89HDF", 512

MOST_VALUES = 2**26
"""Most values along one axis; two years of samples, one a second."""
MOST_CHUNK_BYTES = 2**28
"""Largest chunk, which has to be unpacked as a whole."""
MOST_RATIO = 1100
"""Deflate packs by 1032 at most (zlib's technical details); beyond it, most of a big variable was never written."""
SMALL_BYTES = 2**26
"""A variable up to this size is read as a whole, of a larger one both ends."""
SECONDS, BYTES_PER_SECOND = 5.0, 5e6
"""Time given to a file, and for its size."""
MEMORY = 2**31
"""Bytes that reading one file may take."""


def problem_of(path: str) -> str:
    """Read what there is in a file.

    Parameters
    ----------
    path : str

    Returns
    -------
    str
        What is wrong with it; empty when nothing is.
    """
    try:
        with open(path, "rb") as stream:
            start = stream.read(HDF5_PLACE_IN_MATLAB + 4)
        matlab = start.startswith(MATLAB_START)
        if matlab and not start.endswith(HDF5_START):
            return _matlab_problem(path)
        return _hdf5_problem(path) or ("" if matlab else _netcdf_problem(path))
    except Exception as error:
        return f"it is damaged: {_short(error)}"


def _hdf5_problem(path: str) -> str:
    with h5py.File(path, "r") as file:
        found: list[str] = []
        file.visititems_links(lambda name, link: _note(found, name, link))
        file.visititems(lambda name, item: _note(found, name, item))
        list(file.attrs.items())
        return found[0] if found else ""


def _netcdf_problem(path: str) -> str:
    """Do what the reader does when it opens the file."""
    with h5netcdf.File(path, "r") as file:
        for variable in file.variables.values():
            _ = variable.dimensions, variable.shape, variable.dtype
            list(variable.attrs.items())
    return ""


def _matlab_problem(path: str) -> str:
    """Read the numbers of a file of MATLAB 5 to 7."""
    from scipy.io import loadmat, whosmat  # takes a while, and most networks have no such file

    listed = whosmat(path)
    for name, shape, _ in listed:
        if prod(shape) > MOST_VALUES:
            return f"{name!r} has {prod(shape)} values; at most {MOST_VALUES} are read"
    loadmat(path, variable_names=[name for name, _, kind in listed if kind in MATLAB_NUMBERS])
    return ""


def _note(found: list[str], name: str | bytes, item: Any) -> bool | None:
    """Note a problem; anything but None ends the walk."""
    label = name.decode("utf-8", "replace") if isinstance(name, bytes) else name
    problem = ""
    if isinstance(item, h5py.ExternalLink):
        problem = f"{label!r} is a link to another file, {item.filename!r}"
    elif isinstance(item, h5py.Dataset):
        problem = _dataset_problem(label, item)
    elif isinstance(item, h5py.Group):
        list(item.attrs.items())
    if not problem:
        return None
    found.append(problem)
    return True


def _dataset_problem(name: str, data: h5py.Dataset) -> str:
    if data.is_virtual or data.external:
        return f"the values of {name!r} are in another file"
    if data.shape is None:
        return ""
    declared, stored = prod(data.shape) * data.dtype.itemsize, data.id.get_storage_size()
    if max(data.shape, default=0) > MOST_VALUES:
        return f"{name!r} has {max(data.shape)} values along one axis; at most {MOST_VALUES} are read"
    if data.chunks and prod(data.chunks) * data.dtype.itemsize > MOST_CHUNK_BYTES:
        return f"the chunks of {name!r} are too large: {data.chunks} values; at most {MOST_CHUNK_BYTES} bytes are read"
    if declared > SMALL_BYTES and declared > MOST_RATIO * stored:
        return f"{name!r} declares {declared} bytes and the file stores {stored} of them"
    list(data.attrs.items())
    try:
        if declared <= SMALL_BYTES:
            data[...]
        else:
            data[(0,) * data.ndim], data[tuple(size - 1 for size in data.shape)]
    except Exception as error:
        return f"the values of {name!r} are damaged: {_short(error)}"
    return ""


def _short(error: Exception) -> str:
    return (str(error).splitlines() or [""])[0][:200] or type(error).__name__


def _bound_memory() -> None:
    with contextlib.suppress(ImportError, OSError, ValueError):  # where the system has no such bound
        import resource

        with open("/proc/self/statm") as file:
            used = int(file.read().split()[0]) * resource.getpagesize()
        resource.setrlimit(resource.RLIMIT_AS, (used + MEMORY, resource.RLIM_INFINITY))
        resource.setrlimit(resource.RLIMIT_CORE, (0, 0))


def main() -> None:
    """Answer until the input ends."""
    _bound_memory()
    print("ready", flush=True)
    for line in sys.stdin:
        path = json.loads(line)
        seconds = SECONDS + os.path.getsize(path) / BYTES_PER_SECOND
        # ends this process from outside the interpreter, which a library that stalls would hold
        faulthandler.dump_traceback_later(seconds, exit=True)
        problem = problem_of(path)
        faulthandler.cancel_dump_traceback_later()
        print(json.dumps(problem), flush=True)


if __name__ == "__main__":
    main()
