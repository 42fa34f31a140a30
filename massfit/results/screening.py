"""What a screening hands to files, figures and text."""

from collections.abc import Mapping, Sequence
from dataclasses import asdict
from typing import Any

import numpy as np
import xarray as xr

from massfit.constants import PASCAL_PER_HPA
from massfit.corrections.circulation import WHOLE_OCEAN_SHARE
from massfit.display import counted
from massfit.results.datasets import with_description
from massfit.results.finished import FinishedRun
from massfit.screening.places import PlaceOnMap, area_quantiles, map_areas, places_on_map
from massfit.site import Site

SCREENING_FILE = "screening.json"
"""By it a folder of `massfit screen` is known."""

SHARES = (0.05, 0.25, 0.5, 0.75, 0.95)
"""Shares of the area for which quantiles are printed."""

FEW_YEARS = 10.0
"""Length of a model below which a warning says how uncertain the noise at the annual line is."""

_LONG_NAMES = {
    "sd": "standard deviation of bottom pressure less ocean mean, trend, annual and semi-annual cycle, 6 degrees of "
    "freedom taken off; root mean square over the models",
    "annual_mean_sd": "standard deviation of means over calendar years of the same, 2 degrees of freedom taken off",
    "annual_sd": "standard deviation of one component of the annual phasor that a record of so many years shows of the "
    "dynamics, as the models have them",
    "expected_annual_sd": "annual_sd times inflation: what to plan with",
    "inflation": "factor by which the models are taken to be too quiet",
    "annual_density": "one-sided spectral density at the annual line",
    "slope": "power by which the spectral density falls with frequency near the annual line",
    "dynamic_phasor": "annual phasor of bottom pressure less ocean mean, mean over the models",
    "models": "models with values in the cell",
    "disagreement": "standard deviation over the models of one component of their annual phasors",
    "model_sd": "sd of each model",
    "model_annual_mean_sd": "annual_mean_sd of each model",
    "model_annual_sd": "annual_sd of each model",
    "model_phasor": "annual phasor of each model less its ocean mean",
    "model_coverage": "share of the times at which the model has a value",
}
_SCALED = ("sd", "annual_mean_sd", "disagreement")


def screening_run(
    quietness: xr.Dataset, sites: Sequence[Site], *, title: str, provenance: Mapping[str, Any]
) -> FinishedRun:
    """Join what the folder of a screening holds.

    Parameters
    ----------
    quietness : xarray.Dataset
        contracts.QUIETNESS_MAP, as `screen_sea_floor` makes it.
    sites : sequence of Site
        Places of the user; may be empty.
    title : str
        Heads every output.
    provenance : mapping
        Versions, command, inputs.

    Returns
    -------
    FinishedRun
        `summary`: the content of `screening.json`; `datasets`: `screening.nc`; `tables`: `sites.csv` where there are
        sites.
    """
    places, beyond = places_on_map(quietness, sites)
    summary = {
        "network": title,
        "reference_year": int(quietness.attrs["reference_year"]),
        "record_years": quietness["record_years"].values.tolist(),
        "inflation_factor": quietness.attrs["inflation_factor"],
        "quiet_sd_hpa": quietness.attrs["quiet_sd_pa"] / PASCAL_PER_HPA,
        "models": _models(quietness),
        "cells": int(np.isfinite(quietness["sd"].values).sum()),
        "quantiles": _quantiles(quietness),
        "sites": [_site_row(place, quietness) for place in places],
        "sites_beyond": [site.id for site in beyond],
        "assumptions": _assumptions(quietness),
        "warnings": [*_warnings(quietness), *_beyond(beyond)],
    }
    described = with_description(_described(quietness), "quietness of the sea floor", summary, provenance)
    tables = {"sites.csv": [_table_row(row, quietness) for row in summary["sites"]]} if places else {}
    return FinishedRun(summary, provenance, {"screening.nc": described}, tables)


def _models(quietness: xr.Dataset) -> list[dict[str, Any]]:
    return [
        {
            "name": str(model["model"].item()),
            "first_day": str(model["first_time"].values)[:10],
            "last_day": str(model["last_time"].values)[:10],
            "step_days": round(float(model["step"]), 4),
            "years": round(float(model["years"]), 3),
            "ocean_mean": str(model["ocean_mean"].item()),
            "ocean_share": round(float(model["ocean_share"]), 4),
            "readings": int(model["readings"]),
            "cells": int(np.isfinite(model["model_sd"].values).sum()),
            "line_sd_share": round(_line_share(int(model["lines"])), 3),
        }
        for model in (quietness.isel(model=index) for index in range(quietness.sizes["model"]))
    ]


def _line_share(lines: int) -> float:
    """Share by which a standard deviation at the annual line is uncertain: two degrees of freedom to a line."""
    return float(1.0 / np.sqrt(4.0 * lines))


def _quantiles(quietness: xr.Dataset) -> dict[str, Any]:
    """Quantiles over the area of the map, hPa."""
    area = map_areas(quietness)
    rows = {name: quietness[name].values for name in _SCALED if name in quietness}
    for name in ("annual_sd", "expected_annual_sd"):
        for years, values in zip(quietness["record_years"].values, quietness[name].values, strict=True):
            rows[f"{name}_{years:g}_years"] = values
    found = {name: area_quantiles(values, area, SHARES) / PASCAL_PER_HPA for name, values in rows.items()}
    return {
        "shares": list(SHARES),
        **{f"{name}_hpa": [_rounded(value) for value in values] for name, values in found.items()},
    }


def _rounded(value: float) -> float | None:
    return round(float(value), 5) if np.isfinite(value) else None


def _site_row(place: PlaceOnMap, quietness: xr.Dataset) -> dict[str, Any]:
    own = asdict(place)
    lengths = [f"{years:g}" for years in quietness["record_years"].values]
    by_length = {
        f"{name}_hpa": {
            length: _rounded(value / PASCAL_PER_HPA) for length, value in zip(lengths, own[name], strict=True)
        }
        for name in ("annual_sd", "expected_annual_sd")
    }
    return {
        "id": place.site,
        "latitude": round(place.latitude_deg, 6),
        "longitude": round(place.longitude_deg, 6),
        "distance_km": round(place.distance_km, 1),
        **{f"{name}_hpa": _rounded(own[name] / PASCAL_PER_HPA) for name in _SCALED},
        **by_length,
        "percentile": _percent(place.quieter_share),
        "percentile_annual": _percent(place.quieter_share_annual),
    }


def _percent(share: float) -> float | None:
    return round(100.0 * share, 1) if np.isfinite(share) else None


def _table_row(row: Mapping[str, Any], quietness: xr.Dataset) -> dict[str, Any]:
    """One line of the table: a column for each length of record."""
    flat = {key: value for key, value in row.items() if not isinstance(value, Mapping)}
    for years in quietness["record_years"].values:
        for name in ("annual_sd_hpa", "expected_annual_sd_hpa"):
            flat[f"{name.removesuffix('_hpa')}_{years:g}_years_hpa"] = row[name][f"{years:g}"]
    return {key: "" if value is None else value for key, value in flat.items()}


def _assumptions(quietness: xr.Dataset) -> list[str]:
    factor, quiet = quietness.attrs["inflation_factor"], quietness.attrs["quiet_sd_pa"] / PASCAL_PER_HPA
    means = {
        "subtract": "the mean over its own ocean, weighted with area, was subtracted at every time",
        "removed": "its ocean mean was removed before",
    }
    own = [f"{model['name']}: {means[model['ocean_mean']]}." for model in _models(quietness)]
    return [
        *own,
        "Level, trend, annual and semi-annual cycle are fitted to every cell by least squares.",
        "Near the annual line the spectrum of the dynamics is a power of the frequency; a record is one series without "
        "gaps whose level, trend, annual and semi-annual cycle are fitted.",
        "The dynamics are the whole of the models': what a model that is subtracted from a record explains comes off.",
        f"Models are too quiet in the quiet deep ocean (Liu et al. 2025): expected values are {factor:g} times the "
        f"models' own up to a standard deviation of {quiet:g} hPa, and less beyond. The factor is a choice."
        if factor > 1.0
        else "Models are taken to be as lively as the ocean, although they are too quiet in the quiet deep ocean "
        "(Liu et al. 2025).",
    ]


def _warnings(quietness: xr.Dataset) -> list[str]:
    models = _models(quietness)
    found = [_few_years(models)] if any(model["years"] < FEW_YEARS for model in models) else []
    found += [_part_of_ocean(model) for model in models if model["ocean_share"] < WHOLE_OCEAN_SHARE]
    if len(models) == 1:
        found.append("One model: how far models disagree is not known.")
    spans = {(model["first_day"], model["last_day"]) for model in models}
    if len(spans) > 1:
        found.append("The models cover different years: part of their disagreement is of the years, not of the models.")
    found += [
        f"{model['name']} was read {model['readings']} times: its sums, or what is stored together, did not fit into "
        "the memory allowed. Give more with --memory."
        for model in models
        if model["readings"] > 1
    ]
    return found


def _few_years(models: Sequence[Mapping[str, Any]]) -> str:
    own = [
        f"{model['name']} is {model['years']:.1f} years long ({100 * model['line_sd_share']:.0f} %)"
        for model in models
        if model["years"] < FEW_YEARS
    ]
    return f"{', '.join(own)}: so far is a standard deviation at the annual line uncertain in a single cell."


def _part_of_ocean(model: Mapping[str, Any]) -> str:
    share = f"{model['name']} covers {100 * model['ocean_share']:.0f} % of the ocean"
    if model["ocean_mean"] == "removed":
        return f"{share}: whether its ocean mean is removed was not checked."
    return (
        f"{share}: the mean that was subtracted is of that part, and takes dynamics with it. Subtract that of the "
        "whole ocean before, and state --ocean-mean removed."
    )


def _beyond(sites: Sequence[Site]) -> list[str]:
    if not sites:
        return []
    names = ", ".join(site.id for site in sites)
    return [f"{counted(len(sites), 'site')} with no cell of the map near enough (300 km): {names}."]


def _described(quietness: xr.Dataset) -> xr.Dataset:
    """Add long names, what the axes are, and what a cell's value is; numbers as float32."""
    small = {
        name: quietness[name].astype(np.float32)
        for name in quietness.data_vars
        if quietness[name].dtype.kind == "f"
    }  # fmt: skip
    described = quietness.assign(small)
    for name in described.data_vars:
        described[name].attrs.update(long_name=_LONG_NAMES[str(name)], cell_methods="lat: lon: point")
    return described.assign_coords(
        lat=described["lat"].assign_attrs(standard_name="latitude", axis="Y"),
        lon=described["lon"].assign_attrs(standard_name="longitude", axis="X"),
        record_years=described["record_years"].assign_attrs(long_name="length of a record"),
        first_time=described["first_time"].astype("datetime64[ns]"),
        last_time=described["last_time"].astype("datetime64[ns]"),
    )
