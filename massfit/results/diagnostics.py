"""What the fits of the sites are judged by, as variables beside their phasors."""

from collections.abc import Callable, Sequence

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.diagnostics import SiteDiagnostics
from massfit.constants import JULIAN_YEAR_DAYS
from massfit.phasor import COMPONENTS
from massfit.results.estimate import SiteReduction

Floats = NDArray[np.float64]

_SCALARS: dict[str, tuple[Callable[[SiteDiagnostics], float], str, str]] = {
    "inflation": (lambda own: own.inflation, "1", "sigma of the phasor over that with level and annual cycle alone"),
    "portmanteau": (lambda own: own.whiteness.statistic, "1", "statistic of Ljung and Box of the whitened residuals"),
    "portmanteau_degrees": (lambda own: own.whiteness.degrees, "1", "degrees of freedom of the portmanteau statistic"),
    "portmanteau_p": (lambda own: own.whiteness.p_value, "1", "chance of so large a portmanteau statistic"),
    "whitened_mean_square": (
        lambda own: own.whiteness.mean_square,
        "1",
        "mean square of the whitened residuals per degree of freedom",
    ),
}

_SPECTRUM: dict[str, tuple[Callable[[SiteDiagnostics], Floats], str, str]] = {
    "frequency": (lambda own: own.spectrum.cycles_per_year / JULIAN_YEAR_DAYS, "d-1", "mean frequency of the bin"),
    "residual_density": (lambda own: own.spectrum.density, "Pa2 d", "one-sided power density of the residuals"),
    "expected_density": (lambda own: own.spectrum.expected, "Pa2 d", "the same, as the fitted noise would give it"),
    "noise_density": (lambda own: own.spectrum.noise, "Pa2 d", "power density of the fitted noise itself"),
    "bin_frequencies": (
        lambda own: own.spectrum.frequencies.astype(float),
        "1",
        "independent frequencies in the bin",
    ),
}


def with_diagnostics(phasors: xr.Dataset, reductions: Sequence[SiteReduction]) -> xr.Dataset:
    """Add what the fits are judged by to the phasors of the sites.

    Parameters
    ----------
    phasors : xarray.Dataset
        contracts.SITE_PHASORS.
    reductions : sequence of SiteReduction
        Those without diagnostics are missing in the result.

    Returns
    -------
    xarray.Dataset
        With, over (site): `inflation`, `portmanteau`, `portmanteau_degrees`, `portmanteau_p`, `whitened_mean_square`;
        over (site, bin): `frequency`, `residual_density`, `expected_density`, `noise_density`, `bin_frequencies`;
        over (site, lag): `autocorrelation`; over (site, year): `year_days`, `year_phasor`,
        `year_phasor_covariance`. NaN where a site has none; the same Dataset where no site has any.
    """
    known = {each.site.id: each.diagnostics for each in reductions if each.diagnostics is not None}
    if not known:
        return phasors
    own = [known.get(str(site)) for site in phasors["site"].values]
    added: dict[str, tuple[tuple[str, ...], Floats, dict[str, str]]] = {}
    for name, (of, units, text) in _SCALARS.items():
        values = np.array([np.nan if each is None else of(each) for each in own])
        added[name] = ("site",), values, {"units": units, "long_name": text}
    for name, (series, units, text) in _SPECTRUM.items():
        values = _padded([None if each is None else series(each) for each in own])
        added[name] = ("site", "bin"), values, {"units": units, "long_name": text}
    lags = _padded([None if each is None else each.whiteness.autocorrelation for each in own])
    text = "of successive whitened residuals, gaps jumped"
    added["autocorrelation"] = ("site", "lag"), lags, {"units": "1", "long_name": text}
    years = np.array([int(year) for year in phasors["year"].values])
    return phasors.assign(added).assign(_years(own, years)).assign_coords(lag=np.arange(1, lags.shape[1] + 1))


def _padded(rows: Sequence[Floats | None]) -> Floats:
    """Stack series of different lengths, NaN behind their ends."""
    width = max((len(row) for row in rows if row is not None), default=0)
    values = np.full((len(rows), width), np.nan)
    for place, row in enumerate(rows):
        if row is not None:
            values[place, : len(row)] = row
    return values


def _years(
    own: Sequence[SiteDiagnostics | None], years: NDArray[np.int64]
) -> dict[str, tuple[tuple[str, ...], Floats, dict[str, str]]]:
    two = len(COMPONENTS)
    days = np.full((len(own), len(years)), np.nan)
    phasor, covariance = np.full((*days.shape, two), np.nan), np.full((*days.shape, two, two), np.nan)
    for place, each in enumerate(own):
        for year in each.years if each is not None else ():
            column = int(np.searchsorted(years, year.year))
            days[place, column] = year.days
            phasor[place, column], covariance[place, column] = year.phasor, year.covariance
    text = "annual phasor of the year alone, the drift shared"
    return {
        "year_days": (("site", "year"), days, {"units": "d", "long_name": "days of the year that were used"}),
        "year_phasor": (("site", "year", "component"), phasor, {"units": "Pa", "long_name": text}),
        "year_phasor_covariance": (("site", "year", "component", "component2"), covariance, {"units": "Pa2"}),
    }
