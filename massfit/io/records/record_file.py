"""One record file, whatever its format, as a Record."""

from collections.abc import Callable
from dataclasses import fields
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.io.netcdf.content import Format, format_of
from massfit.io.network.schema import utc
from massfit.io.records.calibration_file import read_calibrations
from massfit.io.records.clock import clock_notes, corrected_clock
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.flags import without_flagged
from massfit.io.records.record_matlab import read_matlab
from massfit.io.records.record_netcdf import read_netcdf
from massfit.io.records.record_text import read_text_record
from massfit.io.records.samples import Samples
from massfit.records.record import Action, Calibrations, Record

_READERS: dict[Format, Callable[[Path, DeploymentFile], Samples]] = {
    "NetCDF": read_netcdf,
    "MATLAB": read_matlab,
    "text": read_text_record,
}
_FORMATS: dict[str, tuple[Format, ...]] = {
    **dict.fromkeys(("columns", "time_column", "comment", "delimiter", "keep_kinds"), ("text",)),
    **dict.fromkeys(("start_time", "interval_s", "time_format"), ("text", "MATLAB")),
    "time_variable": ("NetCDF", "MATLAB"),
    "station": ("NetCDF",),
}
"""Formats that a key belongs to; keys that are not here belong to all."""


def read_record(folder: Path, entry: DeploymentFile, *, site: str, deployment: str) -> Record:
    """Read the record of one deployment.

    The format is told by the content: NetCDF and MATLAB by their first bytes, text otherwise. Samples whose quality
    flags say so are left out, and the clock is corrected.

    Parameters
    ----------
    folder : pathlib.Path
        Folder of the network file.
    entry : DeploymentFile
    site, deployment : str
        Site id and label of the deployment.

    Returns
    -------
    Record
        Pressure in Pa relative to its median, in the order of the file; NaN is missing.

    Raises
    ------
    InputError
        With every fault of the file.
    """
    path = folder / entry.file
    if not path.is_file():
        raise InputError(Fault(entry.file, "file", "there is no such file", action="Correct `file`"))
    if entry.scale_factor == 0.0:
        raise InputError(Fault(entry.file, "scale_factor", "the value is 0", "Must not be 0", "Correct it"))
    form = format_of(path, source=entry.file)
    samples = without_flagged(_READERS[form](path, entry), entry)
    reference = _median(samples.pressure, entry)
    time, clock = corrected_clock(samples.time, entry)
    actions = samples.actions + clock + clock_notes(time, samples.pressure) + _without_use(form, entry)
    if entry.stamp == "start" and not samples.centred:
        time = centred(time)
        actions += (Action("stamps moved to the middle", time.size, "by half the sampling interval"),)
    return Record(
        site=site,
        deployment=deployment,
        time=time,
        pressure=samples.pressure - reference,
        reference=reference,
        drift=entry.drift,
        steps=() if isinstance(entry.steps, str) else tuple(utc(step) for step in entry.steps),
        ramps=tuple(ramp.span() for ramp in entry.ramps),
        find_steps=entry.steps == "find",
        settling=entry.settling,
        source=entry.file,
        actions=actions,
        units=samples.units,
        calibrations=None if entry.calibrations is None else _calibrations(folder, entry.calibrations),
    )


def _calibrations(folder: Path, file: str) -> Calibrations:
    if not (folder / file).is_file():
        raise InputError(Fault(file, "calibrations", "there is no such file", action="Correct `calibrations`"))
    return read_calibrations(folder / file, source=file)


def centred(start: NDArray[np.datetime64]) -> NDArray[np.datetime64]:
    """Middles of intervals that are stamped at their start.

    Parameters
    ----------
    start : (n,) array of datetime64[ns]
        Any order; the sampling may change on the way.

    Returns
    -------
    (n,) array of datetime64[ns]
        Moved by half the distance to the nearer neighbour, so that a gap is not
        taken for a long interval.

    Examples
    --------
    >>> hours = np.array(["2016-01-01T00", "2016-01-01T01", "2016-01-01T05"], dtype="datetime64[ns]")
    >>> centred(hours).astype("datetime64[m]").tolist()[1].minute
    30
    """
    instants, place = np.unique(start, return_inverse=True)
    if instants.size < 2:
        return start
    steps = np.diff(instants)
    interval = np.minimum(np.append(steps, steps[-1]), np.insert(steps, 0, steps[0]))
    return np.asarray(start + interval[place] // 2)


def _median(pressure: NDArray[np.float64], entry: DeploymentFile) -> float:
    valid = np.isfinite(pressure)
    if not valid.any():
        problem = f"none of the {valid.size} samples is valid"
        name = entry.variable or "pressure"
        raise InputError(Fault(entry.file, name, problem, action="Check `missing` and the file"))
    return float(np.median(pressure if valid.all() else pressure[valid]))


def _without_use(form: Format, entry: DeploymentFile) -> tuple[Action, ...]:
    """Say which keys were given that such a file has no use for."""
    given = [each.name for each in fields(entry) if getattr(entry, each.name) != each.default]
    idle = [name for name in given if form not in _FORMATS.get(name, (form,))]
    return (Action("keys without use", len(idle), f"{', '.join(idle)}: the file is {form}"),) if idle else ()
