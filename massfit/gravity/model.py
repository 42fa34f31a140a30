"""Models with annual terms instead of months: what they say of each month, and how sure their makers are.

A file of a static field with trend and periodic terms gives its annual cycle as it stands. It is written out as the
months satellites would have seen, so that degree 1, C20, products, kernel and fit are the same for either kind.
"""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from massfit.constants import ANNUAL_RATE, JULIAN_YEAR_DAYS
from massfit.errors import Fault, InputError
from massfit.gravity.annual import average_over
from massfit.gravity.field import GravityField, GravityModel, Periodic, Span
from massfit.gravity.inputs import Solution
from massfit.gravity.tables import Name
from massfit.phasor import admittance_matrix

Floats = NDArray[np.float64]

_ANNUAL_WITHIN = 0.01
"""A period that differs by less than this from a year is annual: files write 1.0, 0.99932 or 365.25 days."""


def annual_terms(model: GravityModel) -> tuple[Periodic, ...]:
    """Annual terms of a model that are not all zero."""
    near = [each for each in model.periodic if abs(each.period_years - 1.0) < _ANNUAL_WITHIN]
    return tuple(each for each in near if np.any(each.cosine) or np.any(each.sine))


def annual_degree(models: Sequence[GravityModel]) -> int:
    """Highest degree that has an annual term; 0 where there is none.

    Examples
    --------
    >>> from massfit.gravity.field import Conventions
    >>> terms = np.zeros((2, 9, 9))
    >>> terms[0, 5, 2] = 1e-11
    >>> field = GravityField("invented", np.zeros((2, 41, 41)), Conventions(3.986004415e14, 6378136.3))
    >>> annual_degree([GravityModel(field, np.datetime64("2010-01-01"), terms, (Periodic(1.0, terms, terms),))])
    5
    """
    found = [
        int(np.flatnonzero(np.any(part, axis=(0, 2))).max())
        for model in models
        for each in annual_terms(model)
        for part in (each.cosine, each.sine)
        if np.any(part)
    ]
    return max(found, default=0)


def used_degree(solution: Solution, max_degree: int) -> int:
    """Highest degree of a comparison: that asked for, or the last one that a model has an annual term of."""
    return min(max_degree, annual_degree(solution.models)) if solution.models else max_degree


def solution_fields(solution: Solution, window: Span | None, max_degree: int) -> tuple[GravityField, ...]:
    """Give the monthly fields of a solution; those of a model are made for the window.

    Parameters
    ----------
    solution : Solution
    window : Span, optional
        Needed by a model.
    max_degree : int
        Degrees above it may be left out.

    Returns
    -------
    tuple of GravityField
        Of a model: the mean of its annual terms over every calendar month with its middle in the window, about the
        static field of its first stretch. Trend, steps and other periods are left out: they are known, and no
        part of the annual cycle. Months for which the model has no annual term are missing.

    Raises
    ------
    InputError
        A model without an annual term in the window, or without a window.
    """
    if not solution.models:
        return solution.fields
    if window is None:
        raise InputError(Fault(solution.name, "window", "a model needs one", "", "State start and end"))
    held = [(span, model) for span in calendar_months(window) if (model := model_at(solution.models, span)) is not None]
    if not held:
        problem = f"the model has no annual term from {window.start} to {window.end}"
        action = "Choose start and end of [gravity] within its time"
        raise InputError(Fault(solution.models[0].field.source, "acos, asin", problem, "Must have some", action))
    return tuple(_month(model, held[0][1].field, span, max_degree) for span, model in held)


def calendar_months(window: Span) -> list[Span]:
    """Calendar months whose middle lies in a window."""
    first, last = window.start.astype("datetime64[M]"), window.end.astype("datetime64[M]")
    starts = np.arange(first, last + 1)
    spans = [Span(start.astype("datetime64[s]"), (start + 1).astype("datetime64[s]")) for start in starts]
    return [span for span in spans if window.start <= span.middle < window.end]


def model_at(models: Sequence[GravityModel], span: Span) -> GravityModel | None:
    """Find the model that holds at the middle of a span and has annual terms."""
    for model in models:
        own = model.field.span
        if (own is None or own.start <= span.middle < own.end) and annual_terms(model):
            return model
    return None


def _month(model: GravityModel, static: GravityField, span: Span, max_degree: int) -> GravityField:
    top = min(max_degree, static.max_degree)
    values = static.coefficients[:, : top + 1, : top + 1].copy()
    start, end = (float((edge - model.epoch) / np.timedelta64(86400, "s")) for edge in (span.start, span.end))
    for each in annual_terms(model):
        rate = 2.0 * np.pi / (each.period_years * JULIAN_YEAR_DAYS)
        wave = complex(average_over(rate, np.array([start]), np.array([end]))[0])
        size = min(top + 1, each.cosine.shape[-1])
        mean = wave.real * each.cosine + wave.imag * each.sine
        values[:, :size, :size] += mean[:, :size, :size]
    return replace(static, coefficients=values, span=span, sd=None)


def formal_covariance(
    solution: Solution, window: Span, weights: Floats, *, replaced: Sequence[Name], reference_year: int
) -> Floats | None:
    """Carry the errors that a model's file states to the annual phasor of a weighted sum of coefficients.

    Parameters
    ----------
    solution : Solution
        Of a model.
    window : Span
    weights : (2, N + 1, N + 1) array
        Of the coefficients of the potential.
    replaced : sequence of (kind, degree, order)
        Coefficients that come from elsewhere.
    reference_year : int

    Returns
    -------
    (2, 2) array or None
        In the unit of the weighted sum, squared; None where the file states none. Coefficients count as independent,
        since the file holds no correlations, and stretches of time as one measurement: their variances are averaged.
    """
    squares = weights**2
    for kind, degree, order in replaced:
        squares["CS".index(kind), degree, order] = 0.0
    held = [model_at(solution.models, span) for span in calendar_months(window)]
    found = [_one_covariance(model, squares, reference_year) for model in held if model is not None]
    stated = [each for each in found if each is not None]
    return np.mean(stated, axis=0) if stated and len(stated) == len(found) else None


def _one_covariance(model: GravityModel, squares: Floats, reference_year: int) -> Floats | None:
    total = np.zeros(2)
    for each in annual_terms(model):
        if each.cosine_sd is None or each.sine_sd is None:
            return None
        size = min(squares.shape[-1], each.cosine.shape[-1])
        own = squares[:, :size, :size]
        total += [np.sum(own * sd[:, :size, :size] ** 2) for sd in (each.cosine_sd, each.sine_sd)]
    if not np.any(total):
        return None  # a column of zeros states nothing
    days = float((model.epoch - np.datetime64(f"{reference_year:04d}-01-01", "s")) / np.timedelta64(86400, "s"))
    turn = admittance_matrix(complex(np.exp(1j * ANNUAL_RATE * days)))
    return np.asarray(turn @ np.diag(total) @ turn.T)
