"""World maps of a screening: how quiet the sea floor is, with the user's sites in the colour of their own value."""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import xarray as xr
from matplotlib.figure import Figure
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.report.figures.field_map import field_map
from massfit.report.figures.style import COLUMN_WIDTH_MM, PAGE_WIDTH_MM

_STEPS = np.outer(10.0 ** np.arange(-4, 4), [1.0, 1.5, 2.0, 3.0, 5.0, 7.0]).ravel()


def draw_screening(dataset: xr.Dataset, sites: Sequence[Mapping[str, Any]]) -> dict[str, Figure]:
    """Draw every map of a screening.

    Parameters
    ----------
    dataset : xarray.Dataset
        contracts.QUIETNESS_MAP.
    sites : sequence of mapping
        Of `screening.json`.

    Returns
    -------
    dict of str to matplotlib.figure.Figure
        Over the width of a page, and for a single column under names that end in ``_column``.
    """
    years = float(dataset["record_years"][-1])
    maps = {
        "sd_map": (dataset["sd"], "standard deviation / hPa", [row["sd_hpa"] for row in sites]),
        "annual_map": (
            dataset["expected_annual_sd"][-1],
            f"expected at the annual line, record of {years:g} years / hPa",
            [row["expected_annual_sd_hpa"][f"{years:g}"] for row in sites],
        ),
        "yearly_map": (
            dataset["annual_mean_sd"],
            "standard deviation of yearly means / hPa",
            [row["annual_mean_sd_hpa"] for row in sites],
        ),
    }
    if "disagreement" in dataset:
        maps["disagreement_map"] = (
            dataset["disagreement"],
            "disagreement of the models at the annual line / hPa",
            [row["disagreement_hpa"] for row in sites],
        )
    return {
        f"{name}{ending}": _map(values, label, own, sites, width)
        for ending, width in (("", PAGE_WIDTH_MM), ("_column", COLUMN_WIDTH_MM))
        for name, (values, label, own) in maps.items()
        if np.isfinite(values.values).any()
    }


def _map(
    values: xr.DataArray,
    label: str,
    own: Sequence[float | None],
    sites: Sequence[Mapping[str, Any]],
    width: float,
) -> Figure:
    shown = {row["id"]: (row, value) for row, value in zip(sites, own, strict=True) if value is not None}
    field = (values / PASCAL_PER_HPA).reset_coords(drop=True)
    return field_map(
        field,
        {name: (row["latitude"], row["longitude"]) for name, (row, _) in shown.items()},
        label=label,
        at_sites=np.array([value for _, value in shown.values()], dtype=float) if shown else None,
        bands=quiet_bands(field.values[np.isfinite(field.values)]),
        contoured=False,
        width_mm=width,
    )


def quiet_bands(values: NDArray[np.float64]) -> NDArray[np.float64]:
    """Edges at six steps to a power of ten: from the quietest 2 % to the liveliest 2 %.

    Parameters
    ----------
    values : (n,) array
        Positive.

    Returns
    -------
    (n_edge,) array
        At most 13 of them.

    Examples
    --------
    >>> quiet_bands(np.geomspace(0.3, 3.0, 100)).tolist()
    [0.3, 0.5, 0.7, 1.0, 1.5, 2.0, 3.0]
    """
    low, high = np.quantile(values, [0.02, 0.98])
    first = int(np.clip(np.searchsorted(_STEPS, low, side="right") - 1, 0, _STEPS.size - 3))
    last = int(np.clip(np.searchsorted(_STEPS, high), first + 2, first + 12))
    return np.asarray(_STEPS[first : last + 1].round(6))
