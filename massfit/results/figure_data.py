"""The numbers that each figure of a run is drawn from, as tables."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.phasor import as_complex, delay_days, unwrapped_peak_days
from massfit.results.chains import chain_diagnostics
from massfit.results.comparison_rows import placed_determinations, satellite_months, sites_beside
from massfit.results.coverage import monthly_coverage
from massfit.results.finished import FinishedRun
from massfit.results.posterior_groups import POSTERIOR
from massfit.results.readings import answer_contours, model_readings, site_admittances, site_readings
from massfit.results.record_rows import RecordRow, record_rows

DRAWS = 2000
"""Draws of the corner figure that its table holds; all are in posterior.nc."""

Cell = str | float | int | None


@dataclass(frozen=True)
class FigureTable:
    """A table of the numbers of a figure.

    Parameters
    ----------
    head : tuple of str
        With units.
    rows : sequence of sequence
        Text, numbers, and None for what is not known.
    """

    head: tuple[str, ...]
    rows: Sequence[Sequence[Cell]]


def figure_tables(run: FinishedRun, *, rows_of_a_page: int) -> dict[str, FigureTable]:
    """Collect the numbers of every figure that is drawn of a run.

    Parameters
    ----------
    run : FinishedRun
    rows_of_a_page : int
        Sites on each figure of records.

    Returns
    -------
    dict of str to FigureTable
        By the name of the figure.
    """
    tables = {
        "phasor_plane": _plane(run),
        "network_map": _map(run),
        "fingerprint": _members(run),
        "corner": _corner(run.datasets[POSTERIOR]),
        "convergence": _convergence(run.datasets[POSTERIOR]),
    }
    coverage = monthly_coverage(run)
    if coverage.sizes["site"]:
        tables["coverage"] = _coverage(coverage)
    if "moved_site" in run.summary:
        tables["moved_site"] = _moved_site(run)
    if "comparison.nc" in run.datasets:
        tables["satellite"] = _satellite(run)
        if sites_beside(run):
            tables["satellite_sites"] = _satellite_sites(run)
    records = record_rows(run)
    for page, first in enumerate(range(0, len(records), rows_of_a_page), 1):
        tables["records" if page == 1 else f"records_{page}"] = _records(records[first : first + rows_of_a_page])
    return tables


def _plane(run: FinishedRun) -> FigureTable:
    phasors, covariances = site_readings(run)
    rows: list[Sequence[Cell]] = [
        ("site", site["id"], *pair, covariance[0, 0], covariance[0, 1], covariance[1, 1])
        for site, pair, covariance in zip(run.summary["sites"], phasors.tolist(), covariances, strict=True)
    ]
    rows += [("model alone", name, *pair.tolist(), None, None, None) for name, pair in model_readings(run).items()]
    for probability, lines in answer_contours(run):
        for line in lines:
            rows += [("edge of region", f"{probability:g}", *pair, None, None, None) for pair in line.tolist()]
    head = (
        "kind", "name", "in_phase_hpa", "quadrature_hpa", "variance_in_phase_hpa2", "covariance_hpa2",
        "variance_quadrature_hpa2",
    )  # fmt: skip
    return FigureTable(head, rows)


def _map(run: FinishedRun) -> FigureTable:
    factors = site_admittances(run)
    rows: list[Sequence[Cell]] = [
        (site["id"], site["latitude"], site["longitude"], float(abs(factor)), float(delay_days(factor)), flagged)
        for site, factor in zip(run.summary["sites"], factors, strict=True)
        for flagged in (int(bool(site["warnings"])),)
    ]
    return FigureTable(("site", "latitude", "longitude", "amplitude_ratio", "delay_days", "has_warning"), rows)


def _members(run: FinishedRun) -> FigureTable:
    fingerprints = run.datasets["fingerprints.nc"]
    ids = [site["id"] for site in run.summary["sites"]]
    rows: list[Sequence[Cell]] = []
    for axis, name in (("member", "admittance"), ("case", "reference_admittance")):
        if name in fingerprints:
            factors = as_complex(fingerprints[name].sel(site=ids).values)
            rows += [
                (site, axis, str(label), float(abs(factor)), float(delay_days(factor)))
                for label, of_sites in zip(fingerprints[axis].values, factors, strict=True)
                for site, factor in zip(ids, of_sites, strict=True)
            ]
    return FigureTable(("site", "kind", "loads", "amplitude_ratio", "delay_days"), rows)


def _corner(posterior: xr.Dataset) -> FigureTable:
    phasors = as_complex(posterior["member_annual_phasor"].values.reshape(-1, 2) / PASCAL_PER_HPA)
    scales = [str(name) for name in posterior.data_vars if str(name).startswith("s_")]
    columns = [np.abs(phasors), unwrapped_peak_days(phasors)]
    columns += [posterior[name].values.ravel() / PASCAL_PER_HPA for name in scales]
    drawn = np.column_stack(columns)[:: max(1, len(phasors) // DRAWS)]
    return FigureTable(("amplitude_hpa", "peak_day", *(f"{name}_hpa" for name in scales)), drawn.tolist())


def _convergence(posterior: xr.Dataset) -> FigureTable:
    chains = chain_diagnostics(posterior)
    names = [str(name) for name in chains.data_vars if set(chains[name].dims) == {"quantity"}]
    rows: list[Sequence[Cell]] = [
        (str(quantity), *(float(chains[name].sel(quantity=quantity)) for name in names))
        for quantity in chains["quantity"].values
    ]
    return FigureTable(("quantity", *names), rows)


def _coverage(coverage: xr.Dataset) -> FigureTable:
    months = [str(month) for month in coverage["month"].values.astype("datetime64[M]")]
    rows = [
        (str(site), month, float(share))
        for site, shares in zip(coverage["site"].values, coverage["share"].values, strict=True)
        for month, share in zip(months, shares, strict=True)
        if np.isfinite(share)
    ]
    return FigureTable(("site", "month", "share_of_days"), rows)


def _moved_site(run: FinishedRun) -> FigureTable:
    moved = run.summary["moved_site"]
    shifts = [moved[scatter]["shift_hpa"] for scatter in ("normal", "student-t")]
    head = ("offset_hpa", "shift_normal_hpa", "shift_student_t_hpa")
    return FigureTable(head, list(zip(moved["offset_hpa"], *shifts, strict=True)))


def _satellite(run: FinishedRun) -> FigureTable:
    rows: list[Sequence[Cell]] = [
        ("determination", each.label, None, *np.asarray(each.phasor_hpa).tolist(), None)
        for each in placed_determinations(run)
    ]
    for months in satellite_months(run):
        rows += [
            ("month", months.name, _day(time), None, None, float(value))
            for time, value in zip(months.time, months.water_mm, strict=True)
        ]
    return FigureTable(("kind", "name", "middle", "in_phase_hpa", "quadrature_hpa", "water_mm"), rows)


def _satellite_sites(run: FinishedRun) -> FigureTable:
    rows: list[Sequence[Cell]] = []
    for each in sites_beside(run):
        for kind, own in (("recorder", each.recorder), ("satellites", each.satellite)):
            if own is not None:
                numbers = (own.amplitude_hpa, own.amplitude_sd_hpa, own.peak_day, own.peak_day_sd)
                rows.append((each.site, kind, *(value if np.isfinite(value) else None for value in numbers)))
    return FigureTable(("site", "kind", "amplitude_hpa", "amplitude_sd_hpa", "peak_day", "peak_day_sd"), rows)


def _records(records: Sequence[RecordRow]) -> FigureTable:
    return FigureTable(("site", "day", "reduced_hpa", "annual_hpa"), [row for each in records for row in _daily(each)])


def _daily(record: RecordRow) -> Iterator[Sequence[Cell]]:
    for time, reduced, annual in zip(record.reduced_time, record.reduced, record.annual, strict=True):
        yield record.site, _day(time), round(float(reduced), 2), round(float(annual), 3)


def _day(time: np.datetime64) -> str:
    return str(time.astype("datetime64[D]"))


def weekly_means(run: FinishedRun) -> tuple[int, dict[str, tuple[NDArray[np.int64], NDArray[np.float64]]]]:
    """Means of what remains of each site's record over weeks of seven days that all sites share.

    Parameters
    ----------
    run : FinishedRun

    Returns
    -------
    weeks : int
        Weeks from the first to the last record.
    means : dict
        By site: the weeks that have a day, (n,) counted from 0, and their means, (n,) hPa.
    """
    records = record_rows(run)
    if not records:
        return 0, {}
    days = {each.site: each.reduced_time.astype("datetime64[D]").astype(np.int64) for each in records}
    first = min(int(own.min()) for own in days.values() if own.size)
    means = {}
    for each in records:
        weeks, place = np.unique((days[each.site] - first) // 7, return_inverse=True)
        means[each.site] = weeks, np.bincount(place, each.reduced) / np.bincount(place)
    return 1 + max(int(weeks.max()) for weeks, _ in means.values() if weeks.size), means
