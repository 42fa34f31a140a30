"""The figures of a fingerprint study: picks what each shows and hands it to the drawing functions."""

import numpy as np
import xarray as xr
from matplotlib.figure import Figure
from numpy.typing import NDArray

from massfit.phasor import as_complex, delay_days
from massfit.report.figures.fingerprint_degrees import degree_panels
from massfit.report.figures.fingerprint_maps import (
    MAPS_OF_A_PAGE,
    even_bands,
    footprint_panels,
    signed_bands,
    world_map,
)
from massfit.report.figures.fingerprint_members import fingerprint_members
from massfit.report.figures.style import COLUMN_WIDTH_MM, PAGE_WIDTH_MM

_COMPARED = "uniform over land"

_LINES_OF_A_PAGE = 60  # sites in one picture of the members


def draw_fingerprint(dataset: xr.Dataset) -> dict[str, Figure]:
    """Draw every figure of a fingerprint study.

    Parameters
    ----------
    dataset : xarray.Dataset
        contracts.FINGERPRINT_STUDY.

    Returns
    -------
    dict of str to matplotlib.figure.Figure
        Over the width of a page, and for a single column under names that end in ``_column``; further pages end in
        ``_2``, ``_3`` and so on.
    """
    figures: dict[str, Figure] = {}
    for ending, width in (("", PAGE_WIDTH_MM), ("_column", COLUMN_WIDTH_MM)):
        figures[f"ratio_map{ending}"] = _map(
            dataset, "map_amplitude_ratio", "amplitude / ocean mean", width, at_sites="amplitude_ratio", neutral=1.0
        )
        figures[f"delay_map{ending}"] = _map(
            dataset, "map_delay", "delay after the ocean mean / days", width, at_sites="delay", neutral=0.0
        )
        if "map_spread" in dataset:
            label = "spread of the complex ratio over the members / %"
            figures[f"spread_map{ending}"] = _map(dataset, "map_spread", label, width, factor=100.0)
        figures[f"degrees{ending}"] = _degrees(dataset, width)
        for page, rows in enumerate(_pages(dataset.sizes["site"], _LINES_OF_A_PAGE), 1):
            figures[f"members{_number(page)}{ending}"] = _members(dataset.isel(site=rows), width)
        for page, rows in enumerate(_pages(dataset.sizes["site"], MAPS_OF_A_PAGE), 1):
            figures[f"footprints{_number(page)}{ending}"] = _footprints(dataset, rows, width)
    return figures


def _pages(count: int, most: int) -> list[slice]:
    return [slice(first, first + most) for first in range(0, count, most)]


def _number(page: int) -> str:
    return "" if page == 1 else f"_{page}"


def _map(
    dataset: xr.Dataset,
    name: str,
    label: str,
    width: float,
    *,
    at_sites: str | None = None,
    neutral: float | None = None,
    factor: float = 1.0,
) -> Figure:
    values, ocean = factor * dataset[name].values.astype(float), dataset["ocean_fraction"].values
    sites = None if at_sites is None else dataset[at_sites].values
    wet = ocean >= 0.5
    bands = signed_bands if neutral == 0.0 else even_bands
    return world_map(
        values,
        ocean,
        dataset["lat"].values,
        dataset["lon"].values,
        [str(site) for site in dataset["site"].values],
        dataset["latitude"].values,
        dataset["longitude"].values,
        label=label,
        bands=bands(values[wet], _areas(dataset)[wet], keep=sites),
        at_sites=sites,
        neutral=neutral,
        width_mm=width,
    )


def _areas(dataset: xr.Dataset) -> NDArray[np.float64]:
    """Relative areas of the cells of the maps."""
    rows = np.cos(np.radians(dataset["lat"].values))
    return np.asarray(np.broadcast_to(rows[:, None], (rows.size, dataset.sizes["lon"])))


def _degrees(dataset: xr.Dataset, width: float) -> Figure:
    values = as_complex(dataset["admittance_by_degree"].values)
    spreads = (
        float(np.median(dataset[name].values)) if name in dataset else None
        for name in ("amplitude_ratio_spread", "delay_spread")
    )
    ratio_spread, delay_spread = spreads
    return degree_panels(
        dataset["degree"].values,
        [str(site) for site in dataset["site"].values],
        np.abs(values) - np.abs(values[-1]),
        delay_days(values / values[-1]),
        own_degree=int(dataset.attrs["max_degree"]),
        ratio_spread=ratio_spread,
        delay_spread_days=delay_spread,
        width_mm=width,
    )


def _members(dataset: xr.Dataset, width: float) -> Figure:
    return fingerprint_members(
        [str(site) for site in dataset["site"].values],
        [str(member) for member in dataset["member"].values],
        as_complex(dataset["admittance"].values),
        compared=as_complex(dataset["reference_admittance"].sel(case=_COMPARED).values),
        compared_name=_COMPARED,
        width_mm=width,
    )


def _footprints(dataset: xr.Dataset, rows: slice, width: float) -> Figure:
    ratios, ocean = dataset["footprint_ratio"].values, dataset["ocean_fraction"].values
    land = ocean < 0.5
    return footprint_panels(
        ratios[rows],
        ocean,
        dataset["lat"].values,
        dataset["lon"].values,
        [str(site) for site in dataset["site"].values[rows]],
        dataset["latitude"].values[rows],
        dataset["longitude"].values[rows],
        bands=even_bands(ratios[:, land].ravel(), np.tile(_areas(dataset)[land], len(ratios))),
        width_mm=width,
    )
