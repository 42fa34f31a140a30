"""The figures of site selection: picks what each shows from siting.nc."""

from collections.abc import Mapping

import numpy as np
import xarray as xr
from matplotlib.figure import Figure
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.report.figures.candidate_map import candidate_map
from massfit.report.figures.influence import influence_figure
from massfit.report.figures.record_length import record_length_figure
from massfit.report.figures.service_plan import service_plan_figure
from massfit.report.figures.subset_sizes import keep_path_figure, order_sweep, subset_fan
from massfit.results.siting import component_widths_hpa, median_widths_hpa, subset_counts

_GROUP = "siting.nc/"


def siting_figures(datasets: Mapping[str, xr.Dataset], *, width_mm: float) -> dict[str, Figure]:
    """Draw the ranking of the sites, candidates, record length and service, where they are there.

    Parameters
    ----------
    datasets : mapping of str to xarray.Dataset
        Of a finished run.
    width_mm : float

    Returns
    -------
    dict of str to matplotlib.figure.Figure
    """
    drawn = {"candidate_map": _map, "record_length": _length, "service": _service}
    planned = [(name, draw) for name, draw in drawn.items() if f"{_GROUP}{name}" in datasets]
    figures = {f"siting_{name}": draw(datasets, width_mm) for name, draw in planned}
    if f"{_GROUP}ranking" not in datasets:
        return figures
    ranking = datasets[f"{_GROUP}ranking"]
    ranked = {"influence": _influence, "sizes": _sizes, "order": _order, "path": _path}
    return {**{f"siting_{name}": draw(ranking, width_mm) for name, draw in ranked.items()}, **figures}


def _map(datasets: Mapping[str, xr.Dataset], width_mm: float) -> Figure:
    cells, best = datasets[f"{_GROUP}candidate_map"], datasets[f"{_GROUP}best_places"]
    asked = datasets.get(f"{_GROUP}asked_places")
    return candidate_map(
        100.0 * (1.0 - cells["error_ratio"].values),
        cells["ocean_fraction"].values,
        cells["lat"].values,
        cells["lon"].values,
        _places(datasets["site_phasors.nc"]),
        _places(best),
        [] if asked is None else [str(name) for name in asked["place"].values],
        None if asked is None else _places(asked),
        compared=cells["listable"].values == 1,
        width_mm=width_mm,
    )


def _places(data: xr.Dataset) -> NDArray[np.float64]:
    return np.column_stack([data[name].values.astype(float) for name in ("latitude", "longitude")])


def _length(datasets: Mapping[str, xr.Dataset], width_mm: float) -> Figure:
    data = datasets[f"{_GROUP}record_length"]
    target = data.attrs.get("target_sd_pa")
    return record_length_figure(
        data["record_years"].values.astype(float),
        data["record_sd"].values / PASCAL_PER_HPA,
        data["site_record_sd"].values / PASCAL_PER_HPA,
        data["answer_sd"].values / PASCAL_PER_HPA,
        now_hpa=data.attrs["component_sd_now_pa"] / PASCAL_PER_HPA,
        target_hpa=None if target is None else target / PASCAL_PER_HPA,
        width_mm=width_mm,
    )


def _service(datasets: Mapping[str, xr.Dataset], width_mm: float) -> Figure:
    data = datasets[f"{_GROUP}service"]
    return service_plan_figure(
        [str(site) for site in data["site"].values],
        data["month"].values.astype(float),
        data["answer_sd_ended"].values / PASCAL_PER_HPA,
        data["answer_sd_redeployed"].values / PASCAL_PER_HPA,
        data["answer_sd_lost"].values / PASCAL_PER_HPA,
        on_hpa=data.attrs["answer_sd_on_pa"] / PASCAL_PER_HPA,
        width_mm=width_mm,
    )


def _influence(ranking: xr.Dataset, width_mm: float) -> Figure:
    return influence_figure(
        [str(site) for site in ranking["site"].values],
        ranking["information_share"].values,
        ranking["without_site_shift_sd"].values,
        ranking["outlier_probability"].values,
        width_mm=width_mm,
    )


def _sizes(ranking: xr.Dataset, width_mm: float) -> Figure:
    # the last of every order are all sites
    return subset_fan(
        subset_counts(ranking),
        ranking["subset_mean"].values / PASCAL_PER_HPA,
        component_widths_hpa(ranking, "subset_sd"),
        whole_hpa=ranking["ordered_mean"].values[-1] / PASCAL_PER_HPA,
        whole_width_hpa=float(component_widths_hpa(ranking, "ordered_sd")[-1]),
        width_mm=width_mm,
    )


def _order(ranking: xr.Dataset, width_mm: float) -> Figure:
    return order_sweep(
        ranking["ordered_mean"].values / PASCAL_PER_HPA,
        component_widths_hpa(ranking, "ordered_sd"),
        ranking["agreeable_mean"].values / PASCAL_PER_HPA,
        component_widths_hpa(ranking, "agreeable_sd"),
        ordered_by=str(ranking.attrs["ordered_by"]),
        width_mm=width_mm,
    )


def _path(ranking: xr.Dataset, width_mm: float) -> Figure:
    names = [str(name) for name in ranking["criterion"].values]
    widths = dict(zip(names, component_widths_hpa(ranking, "path_sd"), strict=True))
    return keep_path_figure(widths, median_widths_hpa(ranking), width_mm=width_mm)
