"""One record file, whatever its format, as a Record."""

from datetime import UTC, datetime
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.io.deployment import DeploymentFile
from massfit.io.netcdf import is_netcdf
from massfit.io.record_netcdf import read_netcdf
from massfit.io.record_text import read_text_record
from massfit.records.record import Action, Record


def read_record(folder: Path, entry: DeploymentFile, *, site: str, deployment: str) -> Record:
    """Read the record of one deployment.

    The format is told by the content: NetCDF by its first bytes, text otherwise.

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
    samples = read_netcdf(path, entry) if is_netcdf(path) else read_text_record(path, entry)
    valid = np.isfinite(samples.pressure)
    if not valid.any():
        problem = f"none of the {valid.size} samples is valid"
        name = entry.variable or "pressure"
        raise InputError(Fault(entry.file, name, problem, action="Check `missing` and the file"))
    reference = float(np.median(samples.pressure[valid]))
    time, actions = samples.time, samples.actions
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
        steps=() if isinstance(entry.steps, str) else tuple(_utc(step) for step in entry.steps),
        find_steps=entry.steps == "find",
        source=entry.file,
        actions=actions,
        units=samples.units,
    )


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


def _utc(instant: datetime) -> np.datetime64:
    """UTC instant; one without a zone is UTC already."""
    if instant.tzinfo is not None:
        instant = instant.astimezone(UTC).replace(tzinfo=None)
    return np.datetime64(instant, "ns")
