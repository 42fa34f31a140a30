"""Guess the deployments of a text file: from its layout to the keys of the network file."""

import re
from collections.abc import Mapping, Sequence
from pathlib import Path, PurePosixPath
from typing import Any

import numpy as np
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.io.guess.described import Guess, RecordGuess, fill_in
from massfit.io.guess.guess_text import DECIMAL_COMMA, TextLayout, guess_layout, is_number
from massfit.io.guess.guess_time import TimeGuess, guess_time
from massfit.io.guess.guess_words import own_name, place_of_prose, unit_of_name, unit_of_prose, words_of
from massfit.io.guess.heads import text_lines
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.flags import QARTOD
from massfit.io.records.record_text import read_text_record
from massfit.io.records.samples import Samples
from massfit.io.records.text_layout import FLAG
from massfit.io.records.units import PRESSURE_UNITS
from massfit.records.interval import distinct_stamps, usual_interval_ns

_HEIGHTS = ("mm", "cm", "m")
_NINES = re.compile(r"-?9{2,}(\.9+|\.0*)?")
_STATIONS = ("station", "station_id", "site", "site_id", "mooring", "platform")
_FAR = 20.0  # robust standard deviations
_CLEAR = 2.0  # the commonest kind is the routine one where it covers this many times the days of the next
_DAY_S = 86_400.0
DENSITY = "of the water column, by which the height was made from pressure; a deep column has about 1040"


def guess_text_records(folder: Path, file: str) -> list[RecordGuess]:
    """Guess every deployment that a text file holds.

    Parameters
    ----------
    folder : pathlib.Path
    file : str
        Relative to the folder.

    Returns
    -------
    list of RecordGuess
        One for each column of pressure; empty where the file is no table of numbers.

    Raises
    ------
    InputError
        A table that the reader has no way for: decimal commas, or rows of several stations.
    """
    lines = text_lines(folder / file)
    layout = guess_layout(lines) if lines else None
    if layout is None:
        return []
    _refuse_what_cannot_be_read(file, layout)
    time = guess_time(layout)
    columns, left_out = _pressure_columns(layout, time)
    named = all(layout.meanings[column] == "pressure" for column in columns)
    if not columns or (len(columns) > 1 and not named and any(guess.value is None for guess in time.keys.values())):
        return []  # neither a time nor a pressure is recognised
    names = [own_name(layout.names[column]) for column in columns]
    apart = named and len(set(names)) == len(names) and all(re.search("[a-z]", name) for name in names)
    if len(columns) > 1 and not apart:
        return [_record(folder, file, layout, time, columns, left_out)]
    return [_record(folder, file, layout, time, [column], left_out, alone=len(columns) == 1) for column in columns]


def _refuse_what_cannot_be_read(file: str, layout: TextLayout) -> None:
    known = layout.rows[:500]
    commas = next((field for row in known for field in row if DECIMAL_COMMA.fullmatch(field)), None)
    if commas is not None and layout.delimiter != ",":
        raise InputError(Fault(file, "", f"its numbers have decimal commas, {commas!r}", "Must be decimal points"))
    for position, name in enumerate(layout.names):
        stations = sorted({row[position] for row in known})
        if "_".join(words_of(name)) in _STATIONS and len(stations) > 1:
            problem = f"it mixes the rows of several stations, {', '.join(stations[:4])}"
            raise InputError(Fault(file, name, problem, "A text record holds one", "Split the file"))


def _pressure_columns(layout: TextLayout, time: TimeGuess) -> tuple[list[int], list[str]]:
    """Columns of pressure: those named so, else every other column of numbers; and what the rest is called."""
    others = [k for k, meaning in enumerate(layout.meanings) if k not in time.used and meaning not in ("kind", "flag")]
    numbers = [k for k in others if any(is_number(row[k]) for row in layout.rows[:500])]
    named = [k for k in numbers if layout.meanings[k] == "pressure"]
    chosen = named or numbers
    return chosen, [layout.names[k] for k in others if k not in chosen and layout.names[k]]


def _record(
    folder: Path,
    file: str,
    layout: TextLayout,
    time: TimeGuess,
    columns: Sequence[int],
    left_out: Sequence[str],
    *,
    alone: bool = True,
) -> RecordGuess:
    keys = _layout_keys(layout, time, columns if alone else ())
    kinds = _kinds(layout, time)
    keys |= _variable_key(layout, time, columns, keys, alone=alone)
    keys["units"] = _units(layout, columns)
    if keys["units"].value in _HEIGHTS:
        keys["density_kg_m3"] = fill_in(DENSITY)
    keys |= kinds
    keys |= _flags(layout, keys["columns"].value if "columns" in keys else time.names, time)
    place = {key: Guess(value, f'"{line}"') for key, (value, line) in place_of_prose(layout.prose).items()}
    notes = [f"columns not used: {', '.join(left_out)}"] if left_out else []
    samples = _probe(folder, file, keys, notes)
    span, sampling = None, None
    keys["stamp"] = Guess("middle", "the record could not be looked at")
    if samples is not None:
        keys |= missing_key(samples.pressure)
        span, sampling = span_and_sampling(samples.time)
        keys["stamp"] = stamp_guess(samples.time, sampling)
        if keys["units"].value is None:
            values = samples.pressure[np.isfinite(samples.pressure)]
            median = f"; the median of its values is {np.median(values):.6g}" if values.size else ""
            keys["units"] = fill_in(keys["units"].evidence + median)
    name = PurePosixPath(file).stem if alone else own_name(layout.names[columns[0]])
    return RecordGuess(file, name, keys, place, span, sampling, tuple(notes))


def _layout_keys(layout: TextLayout, time: TimeGuess, columns: Sequence[int]) -> dict[str, Guess]:
    keys: dict[str, Guess] = {}
    if layout.delimiter is not None:
        keys["delimiter"] = Guess(layout.delimiter, f"it splits the rows into {len(layout.names)} fields")
    if layout.comment != "#":
        keys["comment"] = Guess(layout.comment, "lines begin with it")
    names = list(time.names)
    renamed = names != list(layout.names)
    for position in range(len(names)):
        if position == _kind_column(layout):
            names[position] = "kind"
            renamed = True
    if not layout.first or renamed:
        if len(columns) == 1:
            names[columns[0]] = "pressure"
        evidence = f'header "{layout.header}"' if layout.header else f"no header; {time.evidence}"
        keys["columns"] = Guess(names, evidence)
    return keys | time.keys


def _variable_key(
    layout: TextLayout, time: TimeGuess, columns: Sequence[int], keys: Mapping[str, Guess], *, alone: bool
) -> dict[str, Guess]:
    names = keys["columns"].value if "columns" in keys else time.names
    if len(columns) > 1:
        return {"variable": fill_in(f"which is the pressure: {', '.join(names[k] for k in columns)}")}
    name = names[columns[0]]
    if name == "pressure" and alone:
        return {}
    return {"variable": Guess(name, "its name" if layout.meanings[columns[0]] else "the only column left")}


def _units(layout: TextLayout, columns: Sequence[int]) -> Guess:
    name = layout.names[columns[0]]
    if layout.units[columns[0]]:
        return Guess(layout.units[columns[0]], f"units row over {name}")
    if unit_of_name(name):
        return Guess(unit_of_name(name), f"the name {name}")
    stated = unit_of_prose(layout.prose)
    if stated:
        return Guess(stated[0], f'header "{stated[1]}"')
    return fill_in(f"one of {', '.join(PRESSURE_UNITS)}")


def _kinds(layout: TextLayout, time: TimeGuess) -> dict[str, Guess]:
    """Which kinds of rows are routine: those found on most days."""
    position = _kind_column(layout)
    if position is None:
        return {}
    ranked, days, shown = _by_days(layout, position, time)
    if len(ranked) == 1:
        return {}
    if layout.meanings[position] == "flag":
        return {"keep_kinds": fill_in(f"a list of the flags of good rows; {layout.names[position]} is {shown}")}
    if days[0] >= _CLEAR * days[1]:
        return {"keep_kinds": Guess([ranked[0]], f"the routine rows: kind {shown}")}
    return {"keep_kinds": fill_in(f"a list of the kinds of rows to use; kind {shown}")}


def _kind_column(layout: TextLayout) -> int | None:
    """Column of kinds of rows; flags in letters are kinds."""
    kinds = [k for k, meaning in enumerate(layout.meanings) if meaning == "kind"]
    letters = [k for k, meaning in enumerate(layout.meanings) if meaning == "flag" and k != _flag_column(layout)]
    return next(iter([*kinds, *letters]), None)


def _flag_column(layout: TextLayout) -> int | None:
    """Column of flags that are whole numbers."""
    flags = (k for k, meaning in enumerate(layout.meanings) if meaning == "flag")
    return next((k for k in flags if all(text.isdigit() for text in layout.column(k))), None)


def _flags(layout: TextLayout, names: Sequence[str], time: TimeGuess) -> dict[str, Guess]:
    """Which flags are good: those of QARTOD, where no other number occurs."""
    position = _flag_column(layout)
    if position is None:
        return {}
    name = names[position]
    keys = {} if name == FLAG else {"flag_variable": Guess(name, "its name")}
    flags, _, shown = _by_days(layout, position, time)
    if {int(flag) for flag in flags} <= set(QARTOD):
        good = "good and not evaluated, if these are numbers of QARTOD"
        return keys | {"keep_flags": Guess([1, 2], f"{good}; {name} is {shown}")}
    return keys | {"keep_flags": fill_in(f"a list of the flags of good rows; {name} is {shown}")}


def _by_days(layout: TextLayout, position: int, time: TimeGuess) -> tuple[list[str], list[int], str]:
    """Texts of a column by the number of days on which they stand, those numbers, and both in words."""
    days: dict[str, set[tuple[str, ...]]] = {}
    for row in layout.rows:
        days.setdefault(row[position], set()).add(tuple(row[k][:10] for k in time.used[:3]))
    ranked = sorted(days, key=lambda kind: -len(days[kind]))
    shown = ", ".join(f"{kind} on {len(days[kind])} days" for kind in ranked)
    return ranked, [len(days[kind]) for kind in ranked], shown


def _probe(folder: Path, file: str, keys: Mapping[str, Guess], notes: list[str]) -> Samples | None:
    """Read the file as guessed, in the numbers of the file; a fault goes to the notes."""
    if any(keys[key].value is None for key in ("variable", "time_column", "time_format") if key in keys):
        return None
    entry: dict[str, Any] = {
        key: tuple(guess.value) if isinstance(guess.value, list) else guess.value
        for key, guess in keys.items()
        if guess.value is not None and key != "units"
    }
    try:
        return read_text_record(folder / file, DeploymentFile(file=file, units="Pa", **entry))
    except InputError as error:
        notes.append(f"read like this: {error.faults[0]}")
        return None


def missing_key(values: NDArray[np.float64]) -> dict[str, Guess]:
    """Guess what means missing: values of nines, or zero, that stand far from all others.

    Parameters
    ----------
    values : (n,) array of float64
    """
    finite = values[np.isfinite(values)]
    if not finite.size:
        return {}
    median = np.median(finite)
    spread = 1.4826 * np.median(np.abs(finite - median)) or 1.0
    numbers, counts = np.unique(finite, return_counts=True)
    codes = [
        (float(number), int(count))
        for number, count in zip(numbers, counts, strict=True)
        if abs(number - median) > _FAR * spread and (number == 0.0 or _NINES.fullmatch(f"{number:.10g}"))
    ]
    if not codes:
        return {}
    evidence = ", ".join(f"{number:g} stands {count} times" for number, count in codes)
    return {"missing": Guess([number for number, _ in codes], f"{evidence}, far from {median:.6g}")}


def span_and_sampling(time: NDArray[np.datetime64]) -> tuple[tuple[np.datetime64, np.datetime64] | None, float | None]:
    """First and last stamp, and the median interval in s; None where there are too few.

    Parameters
    ----------
    time : (n,) array of datetime64[ns]
        Any order.
    """
    stamps = distinct_stamps(time)
    if stamps.size < 2:
        return None, None
    return (stamps[0], stamps[-1]), usual_interval_ns(stamps) / 1e9


def stamp_guess(time: NDArray[np.datetime64], sampling_s: float | None) -> Guess:
    """Where in its interval a stamp lies: daily values at midnight begin their day.

    Parameters
    ----------
    time : (n,) array of datetime64[ns]
    sampling_s : float or None
    """
    stamps = time[~np.isnat(time)]
    if sampling_s == _DAY_S and np.all(stamps == stamps.astype("datetime64[D]")):
        return Guess("start", "daily values are stamped at midnight, which begins their day")
    return Guess("middle", "nothing says where in its interval a stamp lies")
