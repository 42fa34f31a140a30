"""One deployment as the fit of the annual cycle receives it."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import get_args

import numpy as np
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.records.record import Calibrations
from massfit.settings import DriftForm
from massfit.site import LEAST_SITE_DAYS


@dataclass(frozen=True)
class ReducedRecord:
    """Daily means of one deployment with tides and the common corrections taken off.

    Parameters
    ----------
    deployment : str
        Label, unique at its site.
    time : (n,) array of datetime64[ns]
        Middle of each day, UTC; strictly increasing, gaps allowed.
    pressure : (n,) array
        Pa; any constant may be added.
    circulation : (M, n) array
        Bottom pressure of each circulation model on the same days, Pa, without NaN; M may be 0.
    start : datetime64
        First instant of the deployment, the origin of its drift.
    drift : str
        "exponential+linear", "logarithm+linear", "linear", "none" or "compare".
    steps : tuple of datetime64
        Declared changes of level; a new level begins at each.
    companions : (C, n) array, optional
        Further series on the same days, Pa, without NaN; they do not enter the fit, but their annual phasors by its
        linear operator are given beside it. None without any.
    calibrations : Calibrations, optional
        Readings of the recorder at a known pressure, from its deployment on.

    Examples
    --------
    A year of an invented record without a circulation model:

    >>> time = np.datetime64("2016-01-01T12", "ns") + np.arange(365) * np.timedelta64(1, "D")
    >>> record = ReducedRecord("A3/1", time, np.zeros(365), np.empty((0, 365)), start=time[0])
    >>> record.circulation.shape
    (0, 365)
    """

    deployment: str
    time: NDArray[np.datetime64]
    pressure: NDArray[np.float64]
    circulation: NDArray[np.float64]
    start: np.datetime64
    drift: str = "exponential+linear"
    steps: tuple[np.datetime64, ...] = ()
    companions: NDArray[np.float64] | None = None
    calibrations: Calibrations | None = None


SAME_DAYS, SAME_PRESSURE = 30, 0.01
"""Two deployments that differ by a constant within so many Pa on so many shared days are one."""


def check_records(records: Sequence[ReducedRecord], models: Sequence[str], site: str) -> None:
    """Check the records of one site against each other and the models named.

    Parameters
    ----------
    records : sequence of ReducedRecord
    models : sequence of str
    site : str
        Named in the faults.

    Raises
    ------
    InputError
        One fault for everything that is wrong.
    """
    source = site or "records"
    faults = [fault for record in records for fault in _record_faults(source, record, len(models))]
    names = [record.deployment for record in records]
    repeated = sorted({name for name in names if names.count(name) > 1})
    faults += [Fault(source, name, "two deployments have this label", "Labels must differ") for name in repeated]
    followed = {0 if record.companions is None else len(record.companions) for record in records}
    if len(followed) > 1:
        problem = f"the deployments have {sorted(followed)} companions"
        faults.append(Fault(source, "companions", problem, "Must be the same series for each"))
    if not faults:
        faults += [fault for pair in combinations(records, 2) for fault in _copy_faults(source, *pair)]
    days = len(np.unique(np.concatenate([record.time for record in records]))) if records else 0
    if days < LEAST_SITE_DAYS:
        problem = f"{days} days cannot tell an annual cycle from drift"
        allowed = f"At least {LEAST_SITE_DAYS} days are needed"
        faults.append(Fault(source, "time", problem, allowed, "Leave the site out"))
    if faults:
        raise InputError(faults)


def _record_faults(source: str, record: ReducedRecord, models: int) -> Iterator[Fault]:
    count, name = len(record.time), record.deployment
    if count == 0 or np.shape(record.pressure) != (count,):
        problem = f"{count} times, pressure of shape {np.shape(record.pressure)}"
        yield Fault(source, name, problem, "One pressure per time, at least one")
        return
    if np.shape(record.circulation) != (models, count):
        problem = f"circulation has shape {np.shape(record.circulation)} for {models} models and {count} times"
        yield Fault(source, name, problem, f"Must be {(models, count)}")
    series = {"pressure": record.pressure, "circulation": record.circulation}
    if record.companions is not None:
        series["companions"] = record.companions
        if np.ndim(record.companions) != 2 or np.shape(record.companions)[1] != count:
            problem = f"companions have shape {np.shape(record.companions)} for {count} times"
            yield Fault(source, name, problem, f"Must be (C, {count})")
    for label, values in series.items():
        missing = int(np.sum(~np.isfinite(values)))
        if missing:
            yield Fault(source, name, f"{missing} values of {label} are missing", action="Leave those days out")
    if np.any(np.diff(record.time) <= np.timedelta64(0)):
        yield Fault(source, name, "times do not increase", "Every time must be later than the one before")
    # a deployment may begin within its first day, whose middle is its time
    if record.start > record.time[0] + np.timedelta64(12, "h"):
        problem = f"start {record.start} is after the first day, {record.time[0]}"
        yield Fault(source, name, problem, "The drift begins with the deployment or before")
    if record.drift not in get_args(DriftForm):
        yield Fault(source, name, f"drift is {record.drift!r}", f"Must be one of {get_args(DriftForm)}")
    if record.calibrations is not None:
        yield from _calibration_faults(source, record, record.calibrations)


def _calibration_faults(source: str, record: ReducedRecord, given: Calibrations) -> Iterator[Fault]:
    name = f"{record.deployment}: calibrations"
    if not len(given.time) == len(given.pressure) == len(given.sd):
        shapes = f"{len(given.time)} times, {len(given.pressure)} readings, {len(given.sd)} standard deviations"
        yield Fault(source, name, shapes, "Must be as many of each")
        return
    if not (np.isfinite(given.pressure).all() and np.isfinite(given.sd).all() and (given.sd > 0).all()):
        yield Fault(source, name, "a reading or its standard deviation is no number", "Readings finite, sd above 0")
    early = int(np.sum(given.time < record.start))
    if early:
        problem = f"{early} are before the deployment of {record.start}"
        yield Fault(source, name, problem, "The drift begins with the deployment", "Leave them out")


def _copy_faults(source: str, first: ReducedRecord, second: ReducedRecord) -> Iterator[Fault]:
    _, own, other = np.intersect1d(first.time, second.time, return_indices=True)
    difference = first.pressure[own] - second.pressure[other]
    if len(own) >= SAME_DAYS and np.ptp(difference) < SAME_PRESSURE:
        problem = f"it holds the same pressure as {first.deployment} on all {len(own)} days that both have"
        action = "Remove one: a copy is no second measurement"
        yield Fault(source, second.deployment, problem, "One deployment for each instrument", action)
