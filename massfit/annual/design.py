"""The linear part of the model of one site: its columns, priors and data."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from massfit.annual.nodes import EXPONENTIAL, LINE, LOGARITHM, NOTHING, TIMED, Nodes
from massfit.annual.noise import NoiseCovariance, NoiseModel
from massfit.annual.record import ReducedRecord
from massfit.constants import JULIAN_YEAR_DAYS, PASCAL_PER_HPA
from massfit.phasor import annual_basis, days_since
from massfit.records.record import NO_CALIBRATIONS, Calibrations
from massfit.settings import Priors

Floats = NDArray[np.float64]

FORMS_OF = {
    "exponential+linear": (EXPONENTIAL, LINE),
    "logarithm+linear": (LOGARITHM, LINE),
    "linear": (LINE,),
    "none": (),
    "compare": (NOTHING, EXPONENTIAL, LOGARITHM, LINE),
}
"""Terms that each form of drift has; with NOTHING among them, each is weighed against none."""

SHARED_COLUMNS = 4
"""Annual cosine and sine, semi-annual cosine and sine; shared by all deployments."""


@dataclass(frozen=True)
class DriftTerm:
    """A drift term of one deployment whose form or time constant is to be found.

    Parameters
    ----------
    deployment : int
    forms : tuple of int
        Those it may have (massfit.annual.nodes).
    low, high : float
        Range of its time constant, days.
    """

    deployment: int
    forms: tuple[int, ...]
    low: float
    high: float


@dataclass(frozen=True)
class DriftColumns:
    """Where one deployment's terms stand among the fixed columns and the drift terms.

    Parameters
    ----------
    rows : (m,) array of int
        Its days among the observations of the site.
    calibration_rows : (c,) array of int
        Its calibrations among them.
    offset : int
        Column of its level.
    slope : int or None
        Column of its slope.
    steps : tuple of int
        Columns of its steps.
    step_times : tuple of datetime64
        The steps kept, in order of time.
    decay : int or None
        Place of its exponential, or of what stands for it, among the terms.
    line : int or None
        Place among the terms of a slope that is weighed against none.
    """

    rows: NDArray[np.int64]
    calibration_rows: NDArray[np.int64]
    offset: int
    slope: int | None
    steps: tuple[int, ...]
    step_times: tuple[np.datetime64, ...]
    decay: int | None
    line: int | None

    @property
    def terms(self) -> tuple[int, ...]:
        """Places of all its terms."""
        return tuple(place for place in (self.decay, self.line) if place is not None)

    @property
    def fixed(self) -> tuple[int, ...]:
        """All its fixed columns."""
        slope = () if self.slope is None else (self.slope,)
        return (self.offset, *slope, *self.steps)


@dataclass(frozen=True)
class Design:
    """All observations of one site, merged and sorted by time, and what is fitted to them.

    A calibration is an observation of the drift of its recorder alone, with an offset of its own.

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
    calibration_sd : (n,) array
        Standard deviation of a calibration, Pa; NaN for the days of the records.
    fixed : (n, f) array
        Annual, semi-annual, then level, slope (per year), steps and level of the calibrations of each deployment.
    precision : (f,) array
        Prior precision of the coefficients, Pa^-2; zero is a flat prior.
    drifts : tuple of DriftColumns
        One per deployment, in the order given.
    terms : tuple of DriftTerm
    exponential_sd : float
        Prior standard deviation of the size of a term, Pa.
    line_scale : float
        Column of a slope in a term for a slope of one a year.
    notes : tuple of str
        What was left out, and why.
    """

    days: Floats
    instrument: NDArray[np.int64]
    elapsed: Floats
    data: Floats
    contrasts: Floats
    companions: Floats
    calibration_sd: Floats
    fixed: Floats
    precision: Floats
    drifts: tuple[DriftColumns, ...]
    terms: tuple[DriftTerm, ...]
    exponential_sd: float
    line_scale: float
    notes: tuple[str, ...]

    @property
    def observed(self) -> NDArray[np.bool_]:
        """Which rows are days of the records: (n,)."""
        return np.isnan(self.calibration_sd)

    def covariance(self, model: NoiseModel) -> NoiseCovariance:
        """Covariance of the noise on the days of the site."""
        return NoiseCovariance(self.days, self.instrument, model, self.calibration_sd)

    def drift_columns(self, nodes: Sequence[Nodes]) -> Floats:
        """Columns of every choice of every drift term.

        Parameters
        ----------
        nodes : sequence of Nodes
            Choices of each term.

        Returns
        -------
        (n, sum G_d) array
            Zero outside the deployment.
        """
        columns = np.zeros((len(self.days), sum(len(own) for own in nodes)))
        first = 0
        for term, own in zip(self.terms, nodes, strict=True):
            drift = self.drifts[term.deployment]
            rows = np.append(drift.rows, drift.calibration_rows)
            columns[rows, first : first + len(own)] = self.term_columns(term, own, rows)
            first += len(own)
        return columns

    def term_columns(self, term: DriftTerm, nodes: Nodes, rows: NDArray[np.int64]) -> Floats:
        """Columns of the choices of one term on rows of its own deployment: (m, G)."""
        elapsed = self.elapsed[rows]
        middle = self.elapsed[self.drifts[term.deployment].rows].mean()
        return nodes.columns(elapsed, term.high, self.line_scale * (elapsed - middle) / JULIAN_YEAR_DAYS)


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
    times = [np.concatenate([record.time, _calibrations(record).time]) for record in records]
    order = np.argsort(np.concatenate(times), kind="stable")
    places = np.argsort(order, kind="stable")
    sizes = np.cumsum([0, *(len(own) for own in times)])
    rows = [places[first:last] for first, last in pairwise(sizes)]
    days = np.concatenate([days_since(own, reference_year) for own in times])[order]
    sd = np.concatenate([_calibration_sd(record) for record in records])[order]
    cycles = np.column_stack([annual_basis(days), annual_basis(days, harmonic=2)])
    columns = [np.where(np.isnan(sd)[:, None], cycles, 0.0)]
    precision = [0.0] * SHARED_COLUMNS
    drifts: list[DriftColumns] = []
    terms: list[DriftTerm] = []
    notes: list[str] = []
    for record, own_rows in zip(records, rows, strict=True):
        blocks, own_precision, drift, own_terms = _deployment(
            record, own_rows, priors, len(precision), (len(drifts), len(terms)), notes
        )
        padded = np.zeros((len(days), blocks.shape[1]))
        padded[own_rows] = blocks
        columns.append(padded)
        precision += own_precision
        drifts.append(drift)
        terms += own_terms
    data, contrasts, companions = zip(*(_right_hand_sides(record) for record in records), strict=True)
    return Design(
        days=days,
        instrument=np.repeat(np.arange(len(records)), np.diff(sizes))[order],
        elapsed=np.concatenate([_elapsed(record, own) for record, own in zip(records, times, strict=True)])[order],
        data=np.concatenate(data)[order],
        contrasts=np.concatenate(contrasts)[order],
        companions=np.concatenate(companions)[order],
        calibration_sd=sd,
        fixed=np.column_stack(columns),
        precision=np.array(precision),
        drifts=tuple(drifts),
        terms=tuple(terms),
        exponential_sd=priors.drift_exponential_sd_hpa * PASCAL_PER_HPA,
        line_scale=priors.drift_slope_sd_hpa_per_year / priors.drift_exponential_sd_hpa,
        notes=tuple(notes),
    )


def mean_circulation(record: ReducedRecord) -> Floats:
    """Mean of the models at every observation, Pa; zero without models: (n,)."""
    models = np.asarray(record.circulation, float)
    return np.asarray(models.mean(axis=0)) if len(models) else np.zeros(len(record.time))


def _calibrations(record: ReducedRecord) -> Calibrations:
    return record.calibrations if record.calibrations is not None else NO_CALIBRATIONS


def _calibration_sd(record: ReducedRecord) -> Floats:
    return np.concatenate([np.full(len(record.time), np.nan), _calibrations(record).sd])


def _elapsed(record: ReducedRecord, time: NDArray[np.datetime64]) -> Floats:
    since = np.asarray(time, "datetime64[ns]") - np.asarray(record.start, "datetime64[ns]")
    return np.asarray(since.astype(np.int64) / 86_400e9)


def _right_hand_sides(record: ReducedRecord) -> tuple[Floats, Floats, Floats]:
    """Give data, contrasts and companions of one deployment; no model is in a calibration."""
    calibrations = _calibrations(record)
    models = np.asarray(record.circulation, float)
    mean = mean_circulation(record)
    companions = record.companions if record.companions is not None else np.zeros((0, len(record.time)))
    below = len(calibrations.time)
    # a level is fitted anyway: taking the mean off first only keeps the digits of the sums
    data = [_centred(np.asarray(record.pressure, float) - mean), _centred(calibrations.pressure)]
    padding = [(0, below), (0, 0)]
    return (
        np.concatenate(data),
        np.pad((models - mean).T, padding),
        np.pad(_centred(np.asarray(companions, float)).T, padding),
    )


def _centred(values: Floats) -> Floats:
    return values - values.mean(axis=-1, keepdims=True) if values.size else values


def _deployment(
    record: ReducedRecord,
    rows: NDArray[np.int64],
    priors: Priors,
    column: int,
    place: tuple[int, int],
    notes: list[str],
) -> tuple[Floats, list[float], DriftColumns, list[DriftTerm]]:
    """Lay out the fixed columns on the rows of one deployment, their precision and places, and its drift terms."""
    calibrations, count = _calibrations(record), len(record.time)
    elapsed = _elapsed(record, np.concatenate([record.time, calibrations.time]))
    last = float(elapsed[:count].max())
    of_record = np.arange(len(elapsed)) < count
    blocks, precision, slope = [of_record.astype(float)], [0.0], None
    forms, number = FORMS_OF[record.drift], place[1]
    if LINE in forms and NOTHING not in forms:
        slope = column + 1
        blocks.append((elapsed - elapsed[:count].mean()) / JULIAN_YEAR_DAYS)
        precision.append((priors.drift_slope_sd_hpa_per_year * PASCAL_PER_HPA) ** -2)
    steps = _useful_steps(record, notes)
    first_step = column + len(blocks)
    blocks += [np.append(record.time >= step, np.zeros(len(elapsed) - count)).astype(float) for step in steps]
    if len(calibrations.time):
        blocks.append((~of_record).astype(float))
    precision += [0.0] * (len(blocks) - len(precision))
    terms: list[DriftTerm] = []
    decays = tuple(form for form in forms if form in TIMED)
    # shorter than two of the shortest time constants, level and slope say all there is
    if decays and last <= 2.0 * priors.drift_time_min_days:
        notes.append(f"{record.deployment}: {last:.1f} days are too short for an exponential drift")
        decays = ()
    if decays:
        choices = (NOTHING, *decays) if NOTHING in forms else decays
        terms.append(DriftTerm(place[0], choices, priors.drift_time_min_days, last))
    if LINE in forms and NOTHING in forms:
        terms.append(DriftTerm(place[0], (NOTHING, LINE), priors.drift_time_min_days, last))
    drift = DriftColumns(
        rows=rows[:count],
        calibration_rows=rows[count:],
        offset=column,
        slope=slope,
        steps=tuple(range(first_step, first_step + len(steps))),
        step_times=steps,
        decay=number if decays else None,
        line=number + len(terms) - 1 if LINE in forms and NOTHING in forms else None,
    )
    return np.column_stack(blocks), precision, drift, terms


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
