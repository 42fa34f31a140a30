"""The figures of a finished run: picks what each shows and hands it to the drawing functions."""

import io
from collections.abc import Sequence

import numpy as np
import xarray as xr
from contourpy import contour_generator
from matplotlib.figure import Figure
from numpy.typing import NDArray

from massfit.annual.fit import DriftFit
from massfit.constants import PASCAL_PER_HPA
from massfit.fingerprint.ocean import OceanFunction
from massfit.phasor import admittance_matrix, annual_basis, as_complex, days_since, unwrapped_peak_days
from massfit.posterior.regions import DensityRegions, density_regions
from massfit.posterior.summary import QUIET_SD
from massfit.report.corner_figure import corner_figure
from massfit.report.network_map import network_map
from massfit.report.phasor_plane import phasor_plane
from massfit.report.record_panels import RecordRow, record_panels
from massfit.results.estimate import Estimate, SiteReduction


def draw_figures(estimate: Estimate, ocean: OceanFunction) -> dict[str, Figure]:
    """Draw every figure of a run.

    Parameters
    ----------
    estimate : Estimate
    ocean : OceanFunction
        Gives the land of the map.

    Returns
    -------
    dict of str to matplotlib.figure.Figure
        Under the names of `page.PICTURES`.
    """
    return {
        "phasor_plane": _plane(estimate),
        "network_map": _map(estimate, ocean),
        "corner": _corner(estimate),
        "records": record_panels(
            [_record_row(reduction, estimate.summary["reference_year"]) for reduction in estimate.reductions]
        ),
    }


def png(figure: Figure) -> bytes:
    """Render a figure as PNG."""
    picture = io.BytesIO()
    figure.savefig(picture, format="png", dpi=130)
    return picture.getvalue()


def _plane(estimate: Estimate) -> Figure:
    draws = estimate.posterior.draws / PASCAL_PER_HPA
    sites = estimate.summary["sites"]
    inverse = np.linalg.inv(admittance_matrix(_admittances(sites)))
    phasors = np.array([site["phasor_hpa"] for site in sites]) - _known_response(estimate)
    covariances = np.array([site["phasor_covariance_hpa2"] for site in sites])
    return phasor_plane(
        draws,
        [site["id"] for site in sites],
        np.einsum("sij,sj->si", inverse, phasors),
        np.einsum("sij,sjk,slk->sil", inverse, covariances, inverse),
        reference_year=estimate.summary["reference_year"],
        contours=_contours(density_regions(draws)),
    )


def _contours(regions: DensityRegions) -> list[tuple[float, list[NDArray[np.float64]]]]:
    generator = contour_generator(regions.in_phase, regions.quadrature, regions.density)
    lines = {level: [np.asarray(line) for line in generator.lines(value)] for level, value in regions.levels.items()}
    return sorted(lines.items(), reverse=True)


def _known_response(estimate: Estimate) -> NDArray[np.float64]:
    """G_s of every site, (n_site, 2) hPa; zero where air pressure on land was not given."""
    ids = [site["id"] for site in estimate.summary["sites"]]
    if "air_load_response" not in estimate.fingerprints:
        return np.zeros((len(ids), 2))
    return np.asarray(estimate.fingerprints["air_load_response"].sel(site=ids).values / PASCAL_PER_HPA)


def _admittances(sites: Sequence[dict[str, list[float]]]) -> NDArray[np.complex128]:
    return np.asarray(as_complex(np.array([site["admittance"] for site in sites])))


def _map(estimate: Estimate, ocean: OceanFunction) -> Figure:
    sites = estimate.summary["sites"]
    return network_map(
        ocean.fraction,
        _centres(ocean.cells.latitude_bounds_deg),
        _centres(ocean.cells.longitude_bounds_deg),
        [site["id"] for site in sites],
        np.array([site["latitude"] for site in sites]),
        np.array([site["longitude"] for site in sites]),
        _admittances(sites),
        doubtful=[bool(site["warnings"]) for site in sites],
    )


def _centres(bounds: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.asarray(0.5 * (bounds[1:] + bounds[:-1]))


def _corner(estimate: Estimate) -> Figure:
    posterior = estimate.posterior
    phasors = as_complex(posterior.member_annual.reshape(-1, 2) / PASCAL_PER_HPA)
    scales = posterior.scales.reshape(-1, posterior.scales.shape[-1]) / PASCAL_PER_HPA
    every = max(1, len(phasors) // 20_000)  # enough for smooth contours
    labels = ("site scatter / hPa", "models at a site / hPa", "model spread / hPa")
    quantities = {"amplitude / hPa": np.abs(phasors)[::every], "peak day": unwrapped_peak_days(phasors)[::every]}
    quantities.update({label: column[::every] for label, column in zip(labels, scales.T, strict=True)})
    return corner_figure(quantities)


def _record_row(reduction: SiteReduction, reference_year: int) -> RecordRow:
    corrections, drifts = reduction.corrections, reduction.fit.drifts
    time = np.concatenate([drift.time for drift in drifts])
    order = np.argsort(time, kind="stable")
    mean, _ = reduction.fit.single_gaussian()
    annual = annual_basis(days_since(time, reference_year)) @ mean.mean(axis=0)
    reduced = np.concatenate([drift.reduced for drift in drifts])
    return RecordRow(
        site=reduction.site.id,
        deployments=[(drift.time, *_record_and_drift(reduction, drift)) for drift in drifts],
        correction_time=corrections["time"].values,
        corrections={name: _about_zero(series) for name, series in _subtracted(corrections).items()},
        reduced_time=time[order],
        reduced=reduced[order] / PASCAL_PER_HPA,
        annual=annual[order] / PASCAL_PER_HPA,
        note="not quiet" if reduction.fit.reduced_sd > QUIET_SD else "",
    )


def _record_and_drift(reduction: SiteReduction, drift: DriftFit) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Daily pressure of a deployment on the days used and its drift, both less the mean pressure, hPa."""
    daily = next(record for record in reduction.daily if record.deployment == drift.deployment)
    pressure = daily.pressure[np.searchsorted(daily.time, drift.time)]
    level = pressure.mean()
    return (pressure - level) / PASCAL_PER_HPA, (drift.drift - drift.drift.mean()) / PASCAL_PER_HPA


def _subtracted(corrections: xr.Dataset) -> dict[str, NDArray[np.float64]]:
    present = corrections["present"].values == 1
    models = corrections["circulation"].values[present]
    series = {
        "long-period tides": corrections["long_period_tides"].values,
        "circulation (model mean)": models.mean(axis=0) if present.any() else np.zeros(0),
        "ocean-mean air pressure": corrections["ocean_mean_atmosphere"].values,
        "pole tide": corrections["pole_tide"].values,
    }
    return {name: values for name, values in series.items() if np.any(values)}


def _about_zero(series: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.asarray((series - np.nanmean(series)) / PASCAL_PER_HPA)
