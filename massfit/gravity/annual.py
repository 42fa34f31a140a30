"""Annual phasor of a series of monthly means."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import cho_factor, cho_solve

from massfit.constants import ANNUAL_RATE, JULIAN_YEAR_DAYS, TROPICAL_YEAR_DAYS
from massfit.errors import Fault, InputError
from massfit.gravity.field import Span

Floats = NDArray[np.float64]

ALIAS_DAYS = (161.0, 322.1)
"""Periods at which errors of the S2 and, twice as long, of other solar tides come back in monthly solutions of the
first two pairs of satellites (Ray & Luthcke 2006; days, rounded)."""

_MEMORY_DAYS = (20.0, 40.0, 80.0, 160.0, 320.0, 640.0)
_RED_SHARE = (0.0, 0.25, 0.5, 0.75, 0.9, 1.0)
"""Grid of the noise: e-folding time, and red part of the variance."""


@dataclass(frozen=True, eq=False)
class MonthlyAnnual:
    """Annual phasor of monthly means, with the noise integrated over.

    Parameters
    ----------
    phasor : complex
        In the unit of the series.
    covariance : (2, 2) array
        Of (in phase, quadrature).
    lines : tuple of str
        What else was fitted.
    months : int
    residual_sd : float
        At the best noise.
    red_share, memory_days : float
        Means over the noise models: red part of the variance, and its e-folding time.
    """

    phasor: complex
    covariance: Floats
    lines: tuple[str, ...]
    months: int
    residual_sd: float
    red_share: float
    memory_days: float


def fit_monthly(
    spans: Sequence[Span], values: Floats, *, reference_year: int, alias_days: Sequence[float] = ALIAS_DAYS
) -> MonthlyAnnual:
    """Fit the annual cycle of a series of means over months, with gaps.

    Every column is averaged over each mean's own span, so that no attenuation is left (a month takes 1.1 % off the
    annual line). Level, trend and semi-annual cycle are fitted beside it, and each alias line that the series is
    long enough to tell from the annual and the semi-annual line. The noise is white plus an exponential
    memory; its share and memory are integrated over a grid, its size in closed form (flat priors, Jeffreys
    for the size; Gelman et al. 2013, section 14.2).

    Parameters
    ----------
    spans : sequence of Span
    values : (n,) array
    reference_year : int
        Phases count from its 1 January 00:00 UTC.
    alias_days : sequence of float
        Periods of further lines.

    Returns
    -------
    MonthlyAnnual

    Raises
    ------
    InputError
        Values that are not finite, or a series too short for an annual cycle.
    """
    return fit_columns(spans, values[:, None], reference_year=reference_year, alias_days=alias_days)[0]


def fit_columns(
    spans: Sequence[Span], values: Floats, *, reference_year: int, alias_days: Sequence[float] = ALIAS_DAYS
) -> tuple[MonthlyAnnual, ...]:
    """Fit several series over the same months, each as :func:`fit_monthly` does.

    Parameters
    ----------
    spans : sequence of Span
    values : (n, s) array
    reference_year : int
    alias_days : sequence of float

    Returns
    -------
    tuple of MonthlyAnnual
        One a column.

    Raises
    ------
    InputError
        As :func:`fit_monthly`.
    """
    if not np.all(np.isfinite(values)):
        raise InputError(Fault("monthly series", "values", "some values are not finite", "Must be finite"))
    start, end = _days(spans, reference_year)
    length = float(end.max() - start.min())
    lines = [
        period for period in alias_days
        if all(length * abs(1 / period - 1 / line) >= 1.0 for line in (TROPICAL_YEAR_DAYS, TROPICAL_YEAR_DAYS / 2))
    ]  # fmt: skip
    design = _design(start, end, lines)
    if len(values) < design.shape[1] + 4 or length < 1.5 * TROPICAL_YEAR_DAYS:
        problem = f"{len(values)} months over {length / JULIAN_YEAR_DAYS:.1f} years"
        raise InputError(Fault("monthly series", "months", problem, "At least 12 months over 1.5 years"))
    fits = [_fit(design, values, 0.5 * (start + end), share, memory) for share, memory in _noise_grid()]
    names = ("level", "trend", "semi-annual", *(f"{period:g} d" for period in lines))
    log_evidence, phasor, covariance, residual = (np.stack(part, axis=1) for part in zip(*fits, strict=True))
    return tuple(
        _averaged(*column, names, len(values))
        for column in zip(log_evidence, phasor, covariance, residual, strict=True)
    )


def _averaged(
    log_evidence: Floats, phasors: Floats, covariances: Floats, residual: Floats, names: tuple[str, ...], months: int
) -> MonthlyAnnual:
    """Average one series over the noise models, (k,) of each."""
    weight = np.exp(log_evidence - log_evidence.max())
    weight /= weight.sum()
    centre = weight @ phasors
    spread = (phasors - centre).T @ ((phasors - centre) * weight[:, None])
    covariance = np.einsum("k,kij->ij", weight, covariances) + spread
    share, memory = weight @ np.array(_noise_grid())
    best = float(residual[int(np.argmax(weight))])
    return MonthlyAnnual(complex(*centre), covariance, names, months, best, float(share), float(memory))


def alias_leakage(spans: Sequence[Span], period_days: float) -> float:
    """Largest part of a line that is not fitted which ends up in the annual cycle.

    Parameters
    ----------
    spans : sequence of Span
    period_days : float
        Of the line.

    Returns
    -------
    float
        Amplitude of the annual cycle that least squares (level, trend, annual, semi-annual) gives to a line of
        amplitude 1 and of the worst phase.

    Examples
    --------
    Five years of calendar months:

    >>> edges = np.arange("2003-01", "2008-02", dtype="datetime64[M]").astype("datetime64[s]")
    >>> months = [Span(start, end) for start, end in zip(edges[:-1], edges[1:], strict=True)]
    >>> round(alias_leakage(months, 161.0), 3)
    0.063
    """
    start, end = _days(spans, 2000)
    wave = average_over(2.0 * np.pi / period_days, start, end)
    parts = np.column_stack([wave.real, wave.imag])
    leaked = np.linalg.lstsq(_design(start, end, ()), parts, rcond=None)[0][:2]
    return float(np.linalg.svd(leaked, compute_uv=False)[0])


def average_over(rate: float, start: Floats, end: Floats) -> NDArray[np.complex128]:
    """Mean of exp(i rate t) over intervals: the line at their middle, attenuated.

    Parameters
    ----------
    rate : float
        rad per day.
    start, end : (n,) array
        Days.

    Returns
    -------
    (n,) array of complex

    Examples
    --------
    >>> month = TROPICAL_YEAR_DAYS / 12
    >>> round(float(abs(average_over(ANNUAL_RATE, np.array([0.0]), np.array([month]))[0])), 5)
    0.98862
    """
    middle, half = 0.5 * (start + end), 0.5 * (end - start)
    return np.asarray(np.exp(1j * rate * middle) * np.sinc(rate * half / np.pi))


def _days(spans: Sequence[Span], reference_year: int) -> tuple[Floats, Floats]:
    origin = np.datetime64(f"{reference_year}-01-01", "s")
    edges = np.array([(span.start, span.end) for span in spans], dtype="datetime64[s]")
    days = (edges - origin) / np.timedelta64(1, "D")
    return days[:, 0], days[:, 1]


def _design(start: Floats, end: Floats, alias_days: Sequence[float]) -> Floats:
    """Annual columns first, then all others."""
    middle = 0.5 * (start + end)
    rates = [ANNUAL_RATE, 2.0 * ANNUAL_RATE, *(2.0 * np.pi / period for period in alias_days)]
    waves = [average_over(rate, start, end) for rate in rates]
    columns = [part for wave in waves for part in (wave.real, wave.imag)]
    return np.column_stack([*columns, np.ones_like(middle), (middle - middle.mean()) / JULIAN_YEAR_DAYS])


def _noise_grid() -> list[tuple[float, float]]:
    white = [(0.0, _MEMORY_DAYS[0])]
    return white + [(share, memory) for share in _RED_SHARE[1:] for memory in _MEMORY_DAYS]


def _fit(
    design: Floats, values: Floats, days: Floats, share: float, memory: float
) -> tuple[Floats, Floats, Floats, Floats]:
    """Log evidence (s,), annual phasor (s, 2), its covariance and the residual sd of every column at one noise."""
    correlation = share * np.exp(-np.abs(days[:, None] - days[None, :]) / memory)
    np.fill_diagonal(correlation, 1.0)
    factor = cho_factor(correlation, lower=True)
    whitened = cho_solve(factor, design)
    normal = design.T @ whitened
    solution = np.linalg.solve(normal, whitened.T @ values)
    residual = values - design @ solution
    misfit = np.einsum("ts,ts->s", residual, cho_solve(factor, residual))
    free = len(values) - design.shape[1]
    inverse = np.linalg.inv(normal)[:2, :2]
    log_evidence = -0.5 * (
        2.0 * float(np.log(np.diag(factor[0])).sum())
        + float(np.linalg.slogdet(normal)[1])
        + free * np.log(np.maximum(misfit, np.finfo(float).tiny))
    )
    # Student-t with `free` degrees of freedom
    covariance = misfit[:, None, None] / (free - 2) * inverse
    return log_evidence, solution[:2].T, covariance, np.std(residual, axis=0)
