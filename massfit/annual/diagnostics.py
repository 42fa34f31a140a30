"""What an analyst judges a site by: residual spectrum, whiteness, cycle year by year, drift with its band.

Numbers only; all are taken at the noise of the joint mode of a fit (``fit.noise.typical``).
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.signal import lombscargle
from scipy.stats import chi2

from massfit.annual.design import Design, DriftColumns, build_design, mean_circulation
from massfit.annual.drift_draws import DriftPosterior, drift_posterior
from massfit.annual.evidence import ANNUAL, annual_covariance, linear_fit
from massfit.annual.fit import SiteFit
from massfit.annual.nodes import Nodes
from massfit.annual.noise import NoiseModel
from massfit.annual.operator import calendar_years
from massfit.annual.record import ReducedRecord
from massfit.constants import JULIAN_YEAR_DAYS, PASCAL_PER_HPA
from massfit.settings import Priors

Floats = NDArray[np.float64]

SPECTRUM_BINS = 30
"""Bins of the residual spectrum, evenly spaced in the logarithm of frequency; empty ones are left out."""

EXPECTED_PER_BIN = 6
"""Frequencies of a bin at which the spectrum that the fit expects is averaged."""

LAGS = 30
"""Lags of the portmanteau test."""

YEAR_SD = 50.0 * PASCAL_PER_HPA
"""Prior of the phasor of one year: far above any, and only there so that a year of few days has an answer."""

LEAST_YEAR_DAYS = 90
"""A calendar year with fewer days has no phasor of its own."""

BAND_POINTS, BAND_CHOICES = 80, 200


@dataclass(frozen=True)
class ResidualSpectrum:
    """Power of what is left of a record, and what the fit expects there.

    Parameters
    ----------
    cycles_per_year : (F,) array
        Mean frequency of each bin.
    density : (F,) array
        Mean one-sided power density of the residuals, Pa^2 day (Lomb 1976, Scargle 1982).
    expected : (F,) array
        What the same estimate gives on average when the fitted noise is right: gaps and all that the fit takes
        out of the residuals are in it.
    noise : (F,) array
        Power density of the fitted noise itself.
    frequencies : (F,) array of int
        Independent frequencies in each bin: the density scatters by 1 / sqrt of it.
    """

    cycles_per_year: Floats
    density: Floats
    expected: Floats
    noise: Floats
    frequencies: NDArray[np.int64]


@dataclass(frozen=True)
class Whiteness:
    """Portmanteau test of the whitened residuals (Ljung & Box 1978).

    Parameters
    ----------
    autocorrelation : (L,) array
        Of successive whitened residuals at lags 1 to L; gaps are jumped.
    statistic : float
    degrees : int
        Of the chi-square distribution that the statistic has for white residuals.
    p_value : float
        Chance of so large a statistic when the noise is right.
    mean_square : float
        Of the whitened residuals per degree of freedom; 1 where noise and residuals agree.
    """

    autocorrelation: Floats
    statistic: float
    degrees: int
    p_value: float
    mean_square: float


@dataclass(frozen=True)
class YearPhasor:
    """Annual phasor of one calendar year of a site.

    Parameters
    ----------
    year : int
    days : int
    phasor : (2,) array
        Pa; mean of the models subtracted.
    covariance : (2, 2) array
        Pa^2.
    """

    year: int
    days: int
    phasor: Floats
    covariance: Floats


@dataclass(frozen=True)
class DriftCurve:
    """Drift of one deployment with its uncertainty, level and steps included.

    Parameters
    ----------
    deployment : str
    time : (n,) array of datetime64[ns]
        Denser where the deployment begins.
    drift, sd : (n,) array
        Posterior mean and standard deviation, Pa, in the record less the mean of the models.
    """

    deployment: str
    time: NDArray[np.datetime64]
    drift: Floats
    sd: Floats


@dataclass(frozen=True)
class SiteDiagnostics:
    """How well the fit of a site describes its record.

    Parameters
    ----------
    spectrum : ResidualSpectrum
    whiteness : Whiteness
    years : tuple of YearPhasor
        Every calendar year of at least 90 days, the drift shared.
    inflation : float
        Sigma of the annual phasor over that with levels and the annual cycle alone under the same noise: what drift,
        steps and the semi-annual cycle cost.
    drifts : tuple of DriftCurve
        One per deployment.
    """

    spectrum: ResidualSpectrum
    whiteness: Whiteness
    years: tuple[YearPhasor, ...]
    inflation: float
    drifts: tuple[DriftCurve, ...]


def diagnose_site(
    records: Sequence[ReducedRecord],
    fit: SiteFit,
    *,
    reference_year: int,
    rng: np.random.Generator,
    priors: Priors = Priors(),  # noqa: B008 (frozen)
) -> SiteDiagnostics:
    """Judge the fit of one site.

    Parameters
    ----------
    records : sequence of ReducedRecord
        Those that were fitted, in the same order.
    fit : SiteFit
    reference_year : int
    rng : numpy.random.Generator
    priors : Priors
        Those of the fit.

    Returns
    -------
    SiteDiagnostics

    Examples
    --------
    >>> from massfit.annual.fit import fit_site
    >>> rng = np.random.default_rng(1)
    >>> days = np.arange(730)
    >>> pressure = 40 * np.cos(2 * np.pi * days / 365.2422) + rng.normal(0, 5, 730)
    >>> time = np.datetime64("2016-01-01", "ns") + days * np.timedelta64(1, "D")
    >>> record = ReducedRecord("one", time, pressure, np.empty((0, 730)), time[0])
    >>> fit = fit_site([record], models=[], reference_year=2016, rng=rng)
    >>> judged = diagnose_site([record], fit, reference_year=2016, rng=rng)
    >>> [year.year for year in judged.years], judged.inflation > 1
    ([2016, 2017], True)
    """
    design = build_design(records, reference_year=reference_year, priors=priors)
    model = fit.noise.typical
    found = drift_posterior(design, model, rng)
    drawn = rng.choice(len(found.weight), BAND_CHOICES, p=found.weight)
    residual = _Residual(design, model, found.mode)
    return SiteDiagnostics(
        spectrum=_spectrum(residual),
        whiteness=_whiteness(residual),
        years=_year_phasors(residual, reference_year),
        inflation=_inflation(design, model, found),
        drifts=tuple(
            _drift_curve(record, design, drift, found, drawn)
            for record, drift in zip(records, design.drifts, strict=True)
        ),
    )


class _Residual:
    """The plug-in fit of one site: what is left, whitened or not, and how the fit acts on any column."""

    def __init__(self, design: Design, model: NoiseModel, terms: Sequence[Nodes]) -> None:
        self.design, self.model = design, model
        self.noise = design.covariance(model)
        self.columns = np.column_stack([design.fixed, design.drift_columns(terms)])
        self.precision = np.append(design.precision, np.full(len(terms), design.exponential_sd**-2))
        self.white_columns = self.noise.whiten(self.columns)
        fit = linear_fit(self.white_columns, self.noise.whiten(design.data[:, None]), self.precision)
        self.covariance = fit.covariance
        self.left = design.data - self.columns @ fit.mean[:, 0]

    def variance(self, columns: Floats) -> Floats:
        """Give the expected square of the product of residuals and (n, k) columns: (k,)."""
        # residual = y - X b has covariance V - X C X' where the fit's priors are right
        own = np.sum(columns * self.noise.multiply(columns), axis=0)
        taken = columns.T @ self.columns
        return np.asarray(own - np.sum((taken @ self.covariance) * taken, axis=1))


def _spectrum(residual: _Residual) -> ResidualSpectrum:
    observed = residual.design.observed
    days, count = residual.design.days[observed], int(observed.sum())
    span = days[-1] - days[0] + 1.0
    frequencies = np.arange(1, int(span / 2)) / span
    density = 2.0 * lombscargle(days, residual.left[observed], 2.0 * np.pi * frequencies)
    edges = np.geomspace(frequencies[0], frequencies[-1], SPECTRUM_BINS + 1)[1:-1]
    bins = np.split(np.arange(len(frequencies)), np.searchsorted(frequencies, edges))
    bins = [members for members in bins if len(members)]
    expected = []
    for members in bins:
        picked = members[np.linspace(0, len(members) - 1, min(len(members), EXPECTED_PER_BIN)).astype(int)]
        angle = 2.0 * np.pi * frequencies[picked] * residual.design.days[:, None]
        waves = residual.variance(np.column_stack([np.cos(angle), np.sin(angle)]) * observed[:, None])
        expected.append(2.0 * waves.sum() / (count * len(picked)))
    centres = np.array([frequencies[members].mean() for members in bins])
    return ResidualSpectrum(
        cycles_per_year=centres * JULIAN_YEAR_DAYS,
        density=np.array([density[members].mean() for members in bins]),
        expected=np.array(expected),
        noise=residual.model.spectrum(centres),
        frequencies=np.array([len(members) for members in bins]),
    )


def _whiteness(residual: _Residual) -> Whiteness:
    white = residual.noise.whiten(residual.left[:, None])[residual.design.observed, 0]
    count, fitted = len(white), residual.columns.shape[1]
    lags = min(LAGS, count // 4)
    away = white - white.mean()
    # a record that is fitted exactly leaves nothing, which is as white as can be
    power = max(float(away @ away), np.finfo(float).tiny)
    correlation = np.array([away[lag:] @ away[:-lag] for lag in range(1, lags + 1)]) / power
    statistic = float(count * (count + 2.0) * np.sum(correlation**2 / (count - np.arange(1, lags + 1))))
    # each number of the noise that was estimated takes one degree of freedom
    degrees = max(lags - 1 - len(residual.model.rates), 1)
    mean_square = float(white @ white / (count - fitted))
    return Whiteness(correlation, statistic, degrees, float(chi2.sf(statistic, degrees)), mean_square)


def _year_phasors(residual: _Residual, reference_year: int) -> tuple[YearPhasor, ...]:
    design = residual.design
    year_of = calendar_years(design.days, reference_year)
    distinct = {
        int(year): len(np.unique(design.days[design.observed & (year_of == year)])) for year in np.unique(year_of)
    }
    kept = [year for year, days in distinct.items() if days >= LEAST_YEAR_DAYS]
    cycle = design.fixed[:, ANNUAL]
    # years of few days share what the others leave
    blocks = [cycle * (year_of == year)[:, None] for year in kept]
    rest = ~np.isin(year_of, kept)
    if rest.any():
        blocks.append(cycle * rest[:, None])
    own = np.column_stack(blocks) if blocks else np.zeros((len(cycle), 0))
    columns = np.column_stack([own, np.delete(residual.columns, ANNUAL, axis=1)])
    precision = np.append(np.full(own.shape[1], YEAR_SD**-2), np.delete(residual.precision, ANNUAL))
    fit = linear_fit(residual.noise.whiten(columns), residual.noise.whiten(design.data[:, None]), precision)
    found = []
    for place, year in enumerate(kept):
        two = slice(2 * place, 2 * place + 2)
        found.append(YearPhasor(year, distinct[year], fit.mean[two, 0], fit.covariance[two, two]))
    return tuple(found)


def _inflation(design: Design, model: NoiseModel, found: DriftPosterior) -> float:
    levels = [drift.offset for drift in design.drifts]
    white = design.covariance(model).whiten(design.fixed[:, [*ANNUAL, *levels]])
    alone = np.linalg.inv(white.T @ white)[:2, :2]
    weight, annual = found.weight, found.solutions.mean[:, ANNUAL, 0]
    away = annual - weight @ annual
    total = np.einsum("k,kij->ij", weight, annual_covariance(found.reduction, found.solutions))
    total += (weight[:, None] * away).T @ away
    return float(np.sqrt(np.trace(total) / np.trace(alone)))


def _drift_curve(
    record: ReducedRecord,
    design: Design,
    drift: DriftColumns,
    found: DriftPosterior,
    drawn: NDArray[np.int64],
) -> DriftCurve:
    reduction, solutions = found.reduction, found.solutions
    count = len(drift.rows)
    even, early = np.linspace(0, count - 1, BAND_POINTS // 2), np.geomspace(1, count, BAND_POINTS // 2) - 1
    rows = drift.rows[np.unique(np.append(even, early).astype(int))]
    fixed = design.fixed[np.ix_(rows, drift.fixed)]
    own = fixed @ reduction.covariance[np.ix_(drift.fixed, drift.fixed)]
    constant = np.sum(own * fixed, axis=1)
    columns = {place: design.term_columns(design.terms[place], found.grid.nodes[place], rows) for place in drift.terms}
    means, variances = [], []
    for choice in drawn:
        # curve = fixed terms without exponentials + (own exponential less what fixed terms give up) times sizes
        gain = -fixed @ solutions.leak[choice][list(drift.fixed)]
        for place in drift.terms:
            gain[:, place] += columns[place][:, found.choices[choice, place]]
        means.append(fixed @ reduction.mean[list(drift.fixed), 0] + gain @ solutions.size[choice, :, 0])
        variances.append(constant + np.sum((gain @ solutions.size_covariance[choice]) * gain, axis=1))
    mean = np.mean(means, axis=0)
    sd = np.sqrt(np.mean(variances, axis=0) + np.var(means, axis=0))
    level = float((record.pressure - mean_circulation(record)).mean())
    return DriftCurve(record.deployment, record.time[np.searchsorted(drift.rows, rows)], mean + level, sd)
