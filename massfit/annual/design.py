"""The linear part of the model of one site: its columns, priors and data."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from massfit.annual.noise import NoiseCovariance, NoiseModel
from massfit.annual.record import ReducedRecord
from massfit.constants import JULIAN_YEAR_DAYS, PASCAL_PER_HPA
from massfit.phasor import annual_basis, days_since
from massfit.settings import Priors

Floats = NDArray[np.float64]

SHARED_COLUMNS = 4
"""Annual cosine and sine, semi-annual cosine and sine; shared by all deployments."""


@dataclass(frozen=True)
class DriftColumns:
    """Where one deployment's terms stand among the fixed columns.

    Parameters
    ----------
    rows : (m,) array of int
        Its days among the observations of the site.
    offset : int
        Column of its level.
    slope : int or None
        Column of its slope.
    steps : tuple of int
        Columns of its steps.
    step_times : tuple of datetime64
        The steps kept, in order of time.
    exponential : int or None
        Its place among the deployments with an exponential.
    """

    rows: NDArray[np.int64]
    offset: int
    slope: int | None
    steps: tuple[int, ...]
    step_times: tuple[np.datetime64, ...]
    exponential: int | None

    @property
    def fixed(self) -> tuple[int, ...]:
        """All its fixed columns."""
        slope = () if self.slope is None else (self.slope,)
        return (self.offset, *slope, *self.steps)


@dataclass(frozen=True)
class Design:
    """All observations of one site, merged and sorted by time, and what is fitted to them.

    Parameters
    ----------
    days : (n,) array
        Days from the phase origin, sorted; two instruments may share a day.
    instrument : (n,) array of int
        Deployment of each day.
    elapsed : (n,) array
        Days since the start of the day's own deployment.
    data : (n,) array
        Record minus the mean of the models, mean per deployment removed, Pa.
    contrasts : (n, M) array
        Each model minus the mean of the models, Pa.
    companions : (n, C) array
        Further series the operator is applied to, Pa.
    fixed : (n, f) array
        Annual, semi-annual, then level, slope (per year) and steps of each deployment.
    precision : (f,) array
        Prior precision of the coefficients, Pa^-2; zero is a flat prior.
    drifts : tuple of DriftColumns
        One per deployment, in the order given.
    time_ranges : (D, 2) array
        Least and largest drift time constant of each exponential, days.
    exponential_sd : float
        Prior standard deviation of an exponential's size, Pa.
    notes : tuple of str
        What was left out, and why.
    """

    days: Floats
    instrument: NDArray[np.int64]
    elapsed: Floats
    data: Floats
    contrasts: Floats
    companions: Floats
    fixed: Floats
    precision: Floats
    drifts: tuple[DriftColumns, ...]
    time_ranges: Floats
    exponential_sd: float
    notes: tuple[str, ...]

    def covariance(self, model: NoiseModel) -> NoiseCovariance:
        """Covariance of the noise on the days of the site."""
        return NoiseCovariance(self.days, self.instrument, model)

    def exponentials(self, time_constants: Sequence[Floats]) -> Floats:
        """Columns exp(-t / T) of every deployment with an exponential.

        Parameters
        ----------
        time_constants : sequence of (G_d,) array
            Time constants of each such deployment, days.

        Returns
        -------
        (n, sum G_d) array
            Zero outside the deployment.
        """
        columns = np.zeros((len(self.days), sum(len(times) for times in time_constants)))
        first = 0
        for drift in self.drifts:
            if drift.exponential is not None:
                times = time_constants[drift.exponential]
                columns[drift.rows, first : first + len(times)] = exponential_columns(self.elapsed[drift.rows], times)
                first += len(times)
        return columns


def exponential_columns(elapsed: Floats, time_constants: Floats) -> Floats:
    """Decay exp(-t / T) for each time constant: (n,) and (G,) to (n, G)."""
    return np.exp(-np.asarray(elapsed)[:, None] / np.asarray(time_constants)[None, :])


def build_design(records: Sequence[ReducedRecord], *, reference_year: int, priors: Priors) -> Design:
    """Merge the deployments of a site and lay out the linear model.

    Parameters
    ----------
    records : sequence of ReducedRecord
    reference_year : int
    priors : Priors

    Returns
    -------
    Design
    """
    order = np.argsort(np.concatenate([record.time for record in records]), kind="stable")
    places = np.argsort(order, kind="stable")
    sizes = np.cumsum([0, *(len(record.time) for record in records)])
    rows = [places[first:last] for first, last in pairwise(sizes)]
    days = np.concatenate([days_since(record.time, reference_year) for record in records])[order]
    columns = [annual_basis(days), annual_basis(days, harmonic=2)]
    precision = [0.0] * SHARED_COLUMNS
    drifts: list[DriftColumns] = []
    ranges: list[tuple[float, float]] = []
    notes: list[str] = []
    for record, own_rows in zip(records, rows, strict=True):
        blocks, own_precision, drift = _drift_columns(record, own_rows, priors, len(precision), len(ranges), notes)
        padded = np.zeros((len(days), blocks.shape[1]))
        padded[own_rows] = blocks
        columns.append(padded)
        precision += own_precision
        drifts.append(drift)
        if drift.exponential is not None:
            ranges.append((priors.drift_time_min_days, _elapsed(record)[-1]))
    data, contrasts = zip(*(_data_and_contrasts(record) for record in records), strict=True)
    return Design(
        days=days,
        instrument=np.repeat(np.arange(len(records)), np.diff(sizes))[order],
        elapsed=np.concatenate([_elapsed(record) for record in records])[order],
        data=np.concatenate(data)[order],
        contrasts=np.concatenate(contrasts)[order],
        companions=np.concatenate([_companions(record) for record in records])[order],
        fixed=np.column_stack(columns),
        precision=np.array(precision),
        drifts=tuple(drifts),
        time_ranges=np.array(ranges).reshape(-1, 2),
        exponential_sd=priors.drift_exponential_sd_hpa * PASCAL_PER_HPA,
        notes=tuple(notes),
    )


def mean_circulation(record: ReducedRecord) -> Floats:
    """Mean of the models at every observation, Pa; zero without models: (n,)."""
    models = np.asarray(record.circulation, float)
    return np.asarray(models.mean(axis=0)) if len(models) else np.zeros(len(record.time))


def _elapsed(record: ReducedRecord) -> Floats:
    since = np.asarray(record.time, "datetime64[ns]") - np.asarray(record.start, "datetime64[ns]")
    return np.asarray(since.astype(np.int64) / 86_400e9)


def _data_and_contrasts(record: ReducedRecord) -> tuple[Floats, Floats]:
    models = np.asarray(record.circulation, float)
    mean = mean_circulation(record)
    data = np.asarray(record.pressure, float) - mean
    # a level is fitted anyway: taking the mean off first only keeps the digits of the sums
    return data - data.mean(), (models - mean).T


def _companions(record: ReducedRecord) -> Floats:
    """Companions of a record less their means, which the level would take: (n, C)."""
    if record.companions is None:
        return np.zeros((len(record.time), 0))
    values = np.asarray(record.companions, float)
    return np.asarray((values - values.mean(axis=1, keepdims=True)).T)


def _drift_columns(
    record: ReducedRecord, rows: NDArray[np.int64], priors: Priors, column: int, exponentials: int, notes: list[str]
) -> tuple[Floats, list[float], DriftColumns]:
    elapsed = _elapsed(record)
    blocks, precision, slope = [np.ones_like(elapsed)], [0.0], None
    if record.drift != "none":
        slope = column + 1
        blocks.append((elapsed - elapsed.mean()) / JULIAN_YEAR_DAYS)
        precision.append((priors.drift_slope_sd_hpa_per_year * PASCAL_PER_HPA) ** -2)
    steps = _useful_steps(record, notes)
    first_step = column + len(blocks)
    blocks += [(record.time >= step).astype(float) for step in steps]
    precision += [0.0] * len(steps)
    exponential = None
    if record.drift == "exponential+linear":
        # shorter than two of the shortest time constants, level and slope say all there is
        if elapsed[-1] > 2.0 * priors.drift_time_min_days:
            exponential = exponentials
        else:
            notes.append(f"{record.deployment}: {elapsed[-1]:.1f} days are too short for an exponential drift")
    own = tuple(range(first_step, first_step + len(steps)))
    return np.column_stack(blocks), precision, DriftColumns(rows, column, slope, own, steps, exponential)


def _useful_steps(record: ReducedRecord, notes: list[str]) -> tuple[np.datetime64, ...]:
    """Keep steps with data before them and between each and the next; the others say nothing."""
    kept: list[np.datetime64] = []
    before = 0
    for step in sorted(record.steps):
        count = int(np.searchsorted(record.time, step))
        if before < count < len(record.time):
            kept.append(step)
            before = count
        else:
            notes.append(f"{record.deployment}: the step at {step} has no data of its own and is dropped")
    return tuple(kept)
