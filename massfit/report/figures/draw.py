"""The figures of a finished run: picks what each shows and hands it to the drawing functions."""

from collections.abc import Sequence

import numpy as np
import xarray as xr
from matplotlib.figure import Figure
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.fingerprint.ocean import OceanFunction
from massfit.phasor import as_complex, unwrapped_peak_days
from massfit.report.figures.convergence import convergence_figure
from massfit.report.figures.corner import corner_figure
from massfit.report.figures.coverage_calendar import coverage_calendar
from massfit.report.figures.fingerprint_members import fingerprint_members
from massfit.report.figures.moved_site import moved_site_figure
from massfit.report.figures.network_map import network_map
from massfit.report.figures.phasor_plane import phasor_plane
from massfit.report.figures.record_panels import ROWS_OF_A_PAGE, record_panels
from massfit.report.figures.satellite_sites import satellite_sites_figure
from massfit.report.figures.satellites import satellite_figure
from massfit.report.figures.siting_figures import siting_figures
from massfit.report.figures.style import COLUMN_WIDTH_MM, PAGE_WIDTH_MM
from massfit.results.chains import chain_diagnostics
from massfit.results.comparison_rows import placed_determinations, satellite_months, sites_beside
from massfit.results.coverage import monthly_coverage
from massfit.results.finished import FinishedRun
from massfit.results.posterior_groups import POSTERIOR
from massfit.results.readings import (
    Contour,
    answer_contours,
    answer_draws,
    model_readings,
    site_admittances,
    site_readings,
)
from massfit.results.record_rows import record_rows

SCALE_WORDS = {
    "s_site": "site scatter",
    "s_local": "models, local",
    "s_common": "models, shared",
    "s_group": "shared scatter",
}
"""What the scales of the posterior are called in figures."""

_COMPARED = "uniform over land"


def draw_figures(run: FinishedRun, ocean: OceanFunction) -> dict[str, Figure]:
    """Draw every figure of a run.

    Parameters
    ----------
    run : FinishedRun
    ocean : OceanFunction
        Gives the land of the map.

    Returns
    -------
    dict of str to matplotlib.figure.Figure
        Over the width of a page, under the names of `run_page.PICTURES`; further pages of records end in ``_2``, ``_3``
        and so on. The same for a single column, but for the records, end in ``_column``.
    """
    figures: dict[str, Figure] = {}
    contours, coverage = answer_contours(run), monthly_coverage(run)
    chains = chain_diagnostics(run.datasets[POSTERIOR])
    for ending, width in (("", PAGE_WIDTH_MM), ("_column", COLUMN_WIDTH_MM)):
        figures[f"phasor_plane{ending}"] = _plane(run, contours, width)
        figures[f"network_map{ending}"] = _map(run, ocean, width)
        figures[f"fingerprint{ending}"] = _members(run, width)
        figures[f"corner{ending}"] = _corner(run.datasets[POSTERIOR], width)
        figures[f"convergence{ending}"] = convergence_figure(chains, words=SCALE_WORDS, width_mm=width)
        if coverage.sizes["site"]:
            figures[f"coverage{ending}"] = coverage_calendar(coverage, width_mm=width)
        if "moved_site" in run.summary:
            figures[f"moved_site{ending}"] = _moved_site(run, width)
        if "comparison.nc" in run.datasets:
            figures[f"satellite{ending}"] = satellite_figure(
                placed_determinations(run), satellite_months(run), width_mm=width
            )
            if beside := sites_beside(run):
                figures[f"satellite_sites{ending}"] = satellite_sites_figure(beside, width_mm=width)
        figures |= {f"{name}{ending}": figure for name, figure in siting_figures(run.datasets, width_mm=width).items()}
    rows = record_rows(run)
    for page, first in enumerate(range(0, len(rows), ROWS_OF_A_PAGE), 1):
        name = "records" if page == 1 else f"records_{page}"
        figures[name] = record_panels(rows[first : first + ROWS_OF_A_PAGE])
    return figures


def _plane(run: FinishedRun, contours: Sequence[Contour], width_mm: float) -> Figure:
    return phasor_plane(
        answer_draws(run),
        [site["id"] for site in run.summary["sites"]],
        *site_readings(run),
        reference_year=run.summary["reference_year"],
        contours=contours,
        models=model_readings(run),
        width_mm=width_mm,
    )


def _moved_site(run: FinishedRun, width_mm: float) -> Figure:
    moved = run.summary["moved_site"]
    return moved_site_figure(
        moved["site"],
        moved["offset_hpa"],
        {scatter: moved[scatter]["shift_hpa"] for scatter in ("normal", "student-t")},
        used=run.provenance["settings"]["posterior"]["site_scatter"],
        width_mm=width_mm,
    )


def _map(run: FinishedRun, ocean: OceanFunction, width_mm: float) -> Figure:
    sites = run.summary["sites"]
    return network_map(
        ocean.fraction,
        _centres(ocean.cells.latitude_bounds_deg),
        _centres(ocean.cells.longitude_bounds_deg),
        [site["id"] for site in sites],
        np.array([site["latitude"] for site in sites]),
        np.array([site["longitude"] for site in sites]),
        site_admittances(run),
        doubtful=[bool(site["warnings"]) for site in sites],
        width_mm=width_mm,
    )


def _centres(bounds: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.asarray(0.5 * (bounds[1:] + bounds[:-1]))


def _members(run: FinishedRun, width_mm: float) -> Figure:
    ids, fingerprints = [site["id"] for site in run.summary["sites"]], run.datasets["fingerprints.nc"]
    compared = None
    if "reference_admittance" in fingerprints and _COMPARED in fingerprints["case"].values:
        compared = as_complex(fingerprints["reference_admittance"].sel(site=ids, case=_COMPARED).values)
    return fingerprint_members(
        ids,
        [str(name) for name in fingerprints["member"].values],
        as_complex(fingerprints["admittance"].sel(site=ids).values),
        compared=compared,
        compared_name=_COMPARED,
        width_mm=width_mm,
    )


def _corner(posterior: xr.Dataset, width_mm: float) -> Figure:
    """Answer and scales; in a single column only the scale that weighs most."""
    phasors = as_complex(posterior["member_annual_phasor"].values.reshape(-1, 2) / PASCAL_PER_HPA)
    names = [str(name) for name in posterior.data_vars if str(name).startswith("s_")]
    every = max(1, len(phasors) // 20_000)  # enough for smooth contours
    quantities = {"amplitude / hPa": np.abs(phasors)[::every], "peak / day": unwrapped_peak_days(phasors)[::every]}
    shown = names if width_mm > COLUMN_WIDTH_MM else ["s_common"]
    quantities.update(
        {
            f"{SCALE_WORDS.get(name, name)} / hPa": posterior[name].values.ravel()[::every] / PASCAL_PER_HPA
            for name in shown
            if name in names
        }
    )
    return corner_figure(quantities, width_mm=width_mm)
