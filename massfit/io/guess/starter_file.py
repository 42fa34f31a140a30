"""Write a network file to be completed, from what a folder of records tells."""

import os
from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from massfit.errors import Fault, InputError
from massfit.io.guess.described import Guess, RecordGuess, fill_in
from massfit.io.guess.guess_matlab import guess_matlab_records
from massfit.io.guess.guess_netcdf import NO_RECORD, guess_netcdf_records
from massfit.io.guess.guess_sites import SiteGuess, guess_sites
from massfit.io.guess.guess_text_record import guess_text_records
from massfit.io.guess.heads import files_of, is_series
from massfit.io.netcdf.content import format_of
from massfit.io.network.network_text import toml_value
from massfit.records.interval import spoken_interval

FILE = "network.toml"
_GUESSERS = {"NetCDF": guess_netcdf_records, "MATLAB": guess_matlab_records, "text": guess_text_records}
_SERIES = (
    "it has the form of a series (time,value): the ocean-mean air pressure, or the own mean of a model; name it where "
    "it belongs"
)
_NONE = {
    "NetCDF": NO_RECORD,
    "MATLAB": "a file without a vector of numbers",
    "text": "no table of a time and a pressure",
}
"""What a file is in which no record was found."""
_DAY_S = 86_400.0
_COARSE_S = 6 * 3600.0  # coarser sampling cannot show a tide

_HEAD = f"""\
# {FILE}, begun by `massfit starter` from the files of this folder.
#   "# guess:"    was told from the files, with the evidence: read it and correct it
#   "# fill in:"  could not be told; until it is filled in, `massfit check` lists it
# Keys that are not here have defaults, which `massfit check` states. Paths are relative to this file; times are UTC.
"""

_REST = """\
# Ocean models: without one the circulation stays in the noise. For each, take away the "#" and fill in:
# [[circulation]]
# name = ""
# file = ""            # NetCDF of bottom pressure over (time, site) or (time, lat, lon)
# ocean_mean = ""      # "removed", or the file of the model's own mean over the whole ocean
# air_pressure = ""    # "not-forced", "forced-included" or "forced-excluded"
"""


@dataclass(frozen=True)
class Starter:
    """A network file that was begun.

    Parameters
    ----------
    text : str
        TOML.
    sites, deployments : int
    guesses, to_fill_in : int
        Marks of either kind.
    """

    text: str
    sites: int
    deployments: int
    guesses: int
    to_fill_in: int

    @property
    def counted(self) -> str:
        """What was found and what is to be done, in words."""
        sites, deployments = _count(self.sites, "site"), _count(self.deployments, "deployment")
        todo = f"read {_count(self.guesses, 'guess', 'guesses')}, fill in {_count(self.to_fill_in, 'open value')}"
        return f"{sites}, {deployments}.\nNow edit it: {todo}"


def _count(number: int, one: str, many: str = "") -> str:
    return f"{number} {one if number == 1 else many or one + 's'}"


def write_starter(folder: Path) -> Starter:
    """Look at a folder of records and write a network file into it.

    Parameters
    ----------
    folder : pathlib.Path
        Its records lie in it or in the folders inside it.

    Returns
    -------
    Starter

    Raises
    ------
    InputError
        No folder, a network file that is there already, no record in it, or it cannot be written to.
    """
    target = folder / FILE
    if not folder.is_dir():
        raise InputError(Fault(str(folder), "", "it is not a folder", "Must be a folder of records", "Check the path"))
    if os.path.lexists(target):
        action = f"Complete it and run massfit check {folder}, or move it away"
        raise InputError(Fault(str(target), "", "it is there already", "Is never overwritten", action))
    starter = begin_network(folder)
    if not starter.deployments:
        allowed = "Records are NetCDF, MATLAB, or text with a time and a pressure in columns"
        raise InputError(Fault(str(folder), "", "no record was found", allowed, "Check the folder"))
    try:
        with target.open("x", encoding="utf-8") as file:
            file.write(starter.text)
    except OSError as error:
        raise InputError(Fault(str(target), "", f"it cannot be written ({error.strerror})")) from error
    return starter


def begin_network(folder: Path) -> Starter:
    """Make the text of a network file from the files of a folder.

    Parameters
    ----------
    folder : pathlib.Path

    Returns
    -------
    Starter
    """
    records: list[RecordGuess] = []
    aside: list[tuple[str, str]] = []
    series: list[str] = []
    for found in files_of(folder):
        if found.skipped:
            aside.append((found.name, found.skipped))
            continue
        if is_series(found.path):
            series.append(found.name)
            continue
        try:
            form = format_of(found.path, source=found.name)
            own = _GUESSERS[form](folder, found.name)
        except (InputError, OSError) as error:
            aside.append((found.name, f"it cannot be read: {str(error).splitlines()[0]}"))
            continue
        records += own
        if not own:
            aside.append((found.name, f"it is {_NONE[form]}"))
    sites = guess_sites(records)
    aside += [(name, _SERIES) for name in series]
    parts = [_HEAD, _network(folder, records), _corrections(records, series), _REST, *map(_site, sites), _aside(aside)]
    text = "\n".join(part for part in parts if part)
    marks = Counter(mark for mark in ("# guess:", "# fill in:") for line in text.splitlines() if f"  {mark}" in line)
    count = len(records)
    return Starter(text, len(sites), count, marks["# guess:"], marks["# fill in:"])


def _table(header: str, keys: Mapping[str, Guess], *, indent: str = "") -> str:
    lines = {key: f"{key} = {toml_value('' if guess.value is None else guess.value)}" for key, guess in keys.items()}
    width = min(max(map(len, lines.values()), default=0), 44)
    written = [header]
    for key, guess in keys.items():
        mark = "fill in" if guess.value is None else "guess"
        note = f"  # {mark}: {_one_line(guess.evidence)}" if guess.evidence else ""
        written.append(f"{lines[key]:<{width}}{note}".rstrip())
    return "\n".join(indent + line for line in written) + "\n"


def _one_line(text: str) -> str:
    """Make a comment of text from a file: printable, on one line."""
    return "".join(letter if letter.isprintable() else " " for letter in text)


def _network(folder: Path, records: Sequence[RecordGuess]) -> str:
    spans = [record.span for record in records if record.span]
    keys = {"name": Guess(folder.resolve().name or "network", "the name of the folder")}
    if spans:
        first, last = min(span[0] for span in spans), max(span[1] for span in spans)
        middle = first + (last - first) // 2
        shown = f"{_day(first)} to {_day(last)}"
        year = int(str(middle.astype("datetime64[Y]")))
        keys["reference_year"] = Guess(year, f"the middle of the records, {shown}; phases count from its 1 January")
    else:
        keys["reference_year"] = fill_in("the year from whose 1 January phases count")
    return _table("[network]", keys)


def _corrections(records: Sequence[RecordGuess], series: Sequence[str]) -> str:
    steps = sorted({record.sampling_s for record in records if record.sampling_s})
    wanted = 'mean air pressure over the ocean, a file of time,value; or "already-removed" from the records'
    perhaps = f"; perhaps {' or '.join(series)}" if series else ""
    keys = {"ocean_mean_atmosphere": fill_in(wanted + perhaps)}
    shown = ", ".join(dict.fromkeys(map(spoken_interval, steps)))
    if steps and steps[0] >= _COARSE_S:
        evidence = f"samples are {shown} apart, too coarse to show tides"
        keys["tides"] = Guess("already-removed", evidence)
    else:
        evidence = f"samples are {shown} apart" if steps else "no record could be read yet"
        keys["tides"] = Guess("remove", f'{evidence}; or "already-removed"')
    return _table("[corrections]", keys)


def _site(site: SiteGuess) -> str:
    parts = [_table("[[site]]", site.place)]
    for record in site.records:
        lines = [f"  # {_one_line(note)}" for note in record.notes]
        if record.span and record.sampling_s:
            span = f"{_day(record.span[0])} to {_day(record.span[1])}"
            lines.insert(0, f"  # {span}, every {spoken_interval(record.sampling_s)}")
        keys = {"file": Guess(record.file, ""), **record.keys}
        parts.append("\n".join([*lines, _table("[[site.deployment]]", keys, indent="  ")]))
    return "\n".join(parts)


def _aside(files: Sequence[tuple[str, str]]) -> str:
    if not files:
        return ""
    lines = [f"#   {_one_line(f'{name}: {why}')}" for name, why in files]
    return "\n".join(["# Files that are not used:", *lines]) + "\n"


def _day(instant: np.datetime64) -> str:
    return str(instant.astype("datetime64[D]"))
