"""Rows of an ICGEM file that change with time, gathered into models about one epoch."""

from dataclasses import replace
from itertools import pairwise
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.gravity.field import GravityField, GravityModel, Periodic, Span

_DAYS_A_YEAR = 365.25
_PERIODS = (0.01, 100.0)  # years
_MOST_DATES = 200


class Term(NamedTuple):
    """One row: key, place, the two coefficients and their errors, the numbers after these, and its line."""

    key: str
    degree: int
    order: int
    value: tuple[float, ...]
    sd: tuple[float, ...]
    tail: tuple[float, ...]
    line: int


def models_of(field: GravityField, terms: list[Term]) -> tuple[GravityModel, ...]:
    """Gather time-dependent rows into models.

    Parameters
    ----------
    field : GravityField
        The constant rows.
    terms : list of Term
        Rows ``gfct``, ``trnd`` (``dot``), ``acos`` and ``asin``. In format 1.0 an epoch follows each ``gfct`` and a
        period (years) each periodic row; in 2.0 the start and the end of the stretch they hold for come first, and
        the start is the epoch.

    Returns
    -------
    tuple of GravityModel
        One for every stretch between the dates that the rows name, in order of time; a single one without a
        span in format 1.0.

    Raises
    ------
    InputError
        Dates that are none, or rows of a coefficient that has no ``gfct`` row.
    """
    epochs = _epochs(field, terms)
    _check_periods(field, terms)
    dates = sorted({date for start, end in epochs.values() for date in (start, end) if date is not None})
    if len(dates) > _MOST_DATES:
        problem = f"the rows name {len(dates)} dates"
        raise InputError(Fault(field.source, "gfct", problem, f"Must be at most {_MOST_DATES}", "Divide the model"))
    timed = any(end is not None for _, end in epochs.values())
    stretches = list(pairwise(dates)) if timed else [(dates[0], None)]
    return tuple(_model(field, terms, epochs, start, end) for start, end in stretches)


_Stretch = tuple[np.datetime64, np.datetime64 | None]


def _epochs(field: GravityField, terms: list[Term]) -> dict[int, _Stretch]:
    """Epoch and end of each row, by its line; rows of format 1.0 take the epoch of their coefficient."""
    faults: list[Fault] = []
    found: dict[int, _Stretch] = {}
    of_coefficient: dict[tuple[int, int], np.datetime64] = {}
    for term in sorted(terms, key=lambda each: each.key != "gfct"):
        second = len(term.tail) >= 2
        dates = [_date(value) for value in (term.tail[:2] if second else term.tail[: int(term.key == "gfct")])]
        if any(date is None for date in dates) or (second and dates[0] is not None and not dates[0] < dates[1]):  # type: ignore[operator]
            problem = f"the dates are {', '.join(f'{value:.10g}' for value in term.tail[:2])}"
            faults.append(
                Fault(field.source, term.key, problem, "Must be yyyymmdd or yyyymmdd.hhmm, in order", "", term.line)
            )
        elif second:
            found[term.line] = dates[0], dates[1]  # type: ignore[assignment]
        elif term.key == "gfct":
            of_coefficient[term.degree, term.order] = dates[0]  # type: ignore[assignment]
            found[term.line] = dates[0], None  # type: ignore[assignment]
        elif (term.degree, term.order) in of_coefficient:
            found[term.line] = of_coefficient[term.degree, term.order], None
        else:
            problem = f"degree {term.degree} order {term.order} has no gfct row"
            faults.append(Fault(field.source, term.key, problem, "Must have one, for its epoch", "", term.line))
    if faults:
        raise InputError(faults)
    return found


def _check_periods(field: GravityField, terms: list[Term]) -> None:
    low, high = _PERIODS
    faults = [
        Fault(
            field.source,
            term.key,
            f"the period is {term.tail[-1]:g} years",
            f"Must be {low:g} to {high:g}",
            "",
            term.line,
        )
        for term in terms
        if term.key in ("acos", "asin") and not low <= term.tail[-1] <= high
    ]
    if faults:
        raise InputError(faults[:20])


def _date(value: float) -> np.datetime64 | None:
    text = f"{value:013.4f}"
    try:
        return np.datetime64(f"{text[:4]}-{text[4:6]}-{text[6:8]}T{text[9:11]}:{text[11:13]}", "s")
    except ValueError:
        return None


def _model(
    field: GravityField,
    terms: list[Term],
    epochs: dict[int, _Stretch],
    start: np.datetime64,
    end: np.datetime64 | None,
) -> GravityModel:
    size = max(term.degree for term in terms) + 1
    coefficients, trend = field.coefficients.copy(), np.zeros((2, size, size))
    periodic: dict[float, NDArray[np.complex128]] = {}
    variance: dict[float, NDArray[np.float64]] = {}
    for term in terms:
        first, last = epochs[term.line]
        if end is not None and last is not None and not (first <= start and end <= last):
            continue
        at, place = np.array(term.value), (slice(None), term.degree, term.order)
        years = float((start - first) / np.timedelta64(1, "s")) / (86400 * _DAYS_A_YEAR)
        if term.key == "gfct":
            coefficients[place] += at
        elif term.key in ("trnd", "dot"):
            trend[place] += at
            coefficients[place] += at * years  # from the row's own epoch to the model's
        else:
            period, cosine = term.tail[-1], term.key == "acos"
            # a cos + b sin is the real part of (a - i b) exp(i phase): turned from the row's epoch to the model's
            turn = np.exp(2j * np.pi * years / period)
            sum_ = periodic.setdefault(period, np.zeros((2, size, size), dtype=complex))
            sum_[place] += at * (1.0 if cosine else -1j) * turn
            if term.sd:
                along, across = turn.real**2, turn.imag**2
                shares = np.array([along, across] if cosine else [across, along])
                squares = variance.setdefault(period, np.zeros((2, 2, size, size)))
                squares[:, :, term.degree, term.order] += shares[:, None] * np.square(term.sd)
    span = None if end is None else Span(start, end)
    there = replace(field, coefficients=coefficients, span=span)
    pairs = tuple(_periodic(period, each, variance.get(period)) for period, each in sorted(periodic.items()))
    return GravityModel(there, start, trend, pairs)


def _periodic(period: float, value: NDArray[np.complex128], variance: NDArray[np.float64] | None) -> Periodic:
    """Cosine and sine with their errors; the correlation that a turn leaves between the two is not kept."""
    sds = (None, None) if variance is None else np.sqrt(variance)
    return Periodic(period, value.real, -value.imag, sds[0], sds[1])
