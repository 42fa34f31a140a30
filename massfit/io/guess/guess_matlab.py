"""Guess the deployment of a MATLAB file: its pressure, its time, and what only the analyst knows."""

from pathlib import Path, PurePosixPath

import numpy as np
from numpy.typing import NDArray

from massfit.io.guess.described import Guess, RecordGuess, fill_in
from massfit.io.guess.guess_text_record import DENSITY, missing_key, span_and_sampling, stamp_guess
from massfit.io.guess.guess_words import is_pressure, meanings, unit_of_name
from massfit.io.records.record_matlab import matlab_shapes, read_vector
from massfit.io.records.text_time import DATENUM, counted_time
from massfit.io.records.units import PRESSURE_UNITS

_TIMES = ("time", "date", "day", "second", "hour")
_HEIGHTS = ("mm", "cm", "m")
_UNIX = "seconds since 1970-01-01"
_RANGES = {DATENUM: (693_962.0, 803_534.0), _UNIX: (1.0e8, 4.0e9)}
"""Counts that can only be of the years 1900 to 2200, or of the age of recorders."""
_LEAST = 3  # samples; shorter vectors are settings


def guess_matlab_records(folder: Path, file: str) -> list[RecordGuess]:
    """Guess the deployment that a MATLAB file holds.

    Parameters
    ----------
    folder : pathlib.Path
    file : str
        Relative to the folder.

    Returns
    -------
    list of RecordGuess
        One, or none where the file has no vector of numbers.

    Raises
    ------
    InputError
        The file is damaged.
    """
    path = folder / file
    shapes = matlab_shapes(path, source=file)
    sizes = {name: int(np.prod(shape)) for name, shape in shapes.items() if sum(size > 1 for size in shape) == 1}
    names = [name for name, size in sizes.items() if size >= _LEAST]
    if not names:
        return []
    keys: dict[str, Guess] = {}
    keys |= _variable(names)
    pressure = keys["variable"].value if "variable" in keys else names[0]
    stored = None if pressure is None else read_vector(path, pressure, source=file).astype(np.float64)
    time, timed = _time(path, file, [name for name in names if name != pressure])
    keys |= timed
    keys |= _units(pressure, stored)
    notes = () if stored is None else _notes(stored)
    if stored is not None:
        keys |= missing_key(stored)
    span, sampling = (None, None) if time is None else span_and_sampling(time)
    if time is not None:
        keys["stamp"] = stamp_guess(time, sampling)
    return [RecordGuess(file, PurePosixPath(file).stem, keys, {}, span, sampling, notes)]


def _variable(names: list[str]) -> dict[str, Guess]:
    if len(names) == 1:
        return {}
    likely = [name for name in names if is_pressure(name)]
    if len(likely) == 1:
        return {"variable": Guess(likely[0], "its name")}
    others = [name for name in names if not _is_time(name)]
    if len(others) == 1:
        return {"variable": Guess(others[0], "the only vector that is not named like a time")}
    return {"variable": fill_in(f"which is the pressure: {', '.join(likely or others or names)}")}


def _is_time(name: str) -> bool:
    return meanings([name])[0] in _TIMES or name.casefold() in ("t", "dn", "datenum", "mtime")


def _time(path: Path, file: str, names: list[str]) -> tuple[NDArray[np.datetime64] | None, dict[str, Guess]]:
    for name in sorted(names, key=lambda each: not _is_time(each)):
        count = read_vector(path, name, source=file).astype(np.float64)
        known = count[np.isfinite(count)]
        for form, (low, high) in _RANGES.items():
            if known.size and low <= known.min() and known.max() <= high:
                shown = f"{known[0]:.10g} to {known[-1]:.10g}"
                keys = {
                    "time_variable": Guess(name, f"values {shown}"),
                    "time_format": Guess(form, "numbers of that size"),
                }
                return counted_time(count, form, source=file), keys
    asked = {
        "start_time": fill_in("UTC time of the first sample, like 2011-01-31T23:59:52.525Z; or `time_variable`"),
        "interval_s": fill_in("seconds from one sample to the next"),
    }
    likely = [name for name in names if _is_time(name)]
    if not likely:
        return None, asked
    wanted = f'what {likely[0]} counts, like "days since 1950-01-01"'
    return None, {"time_variable": Guess(likely[0], "its name"), "time_format": fill_in(wanted)}


def _units(pressure: str | None, stored: NDArray[np.float64] | None) -> dict[str, Guess]:
    unit = unit_of_name(pressure) if pressure else None
    if unit:
        keys = {"units": Guess(unit, f"the name {pressure}")}
        return keys | ({"density_kg_m3": fill_in(DENSITY)} if unit in _HEIGHTS else {})
    median = ""
    if stored is not None and np.isfinite(stored).any():
        median = f"; the median of the numbers is {np.nanmedian(stored):.6g}"
    return {"units": fill_in(f"one of {', '.join(PRESSURE_UNITS)}, with density_kg_m3 for a height of water{median}")}


def _notes(stored: NDArray[np.float64]) -> tuple[str, ...]:
    median = float(np.nanmedian(stored)) if np.isfinite(stored).any() else 0.0
    if median >= 0.0:
        return ()
    return ("most numbers are negative: a depth counted downwards? State scale_factor, a negative one turns it",)
