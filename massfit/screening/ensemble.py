"""From the maps of the models to one quietness map, with the optimism of models at quiet places made good."""

from collections.abc import Mapping, Sequence

import numpy as np
import xarray as xr

from massfit.phasor import COMPONENTS
from massfit.screening.finish import CellNumbers
from massfit.screening.grid import ScreenGrid
from massfit.screening.sums import Floats

INFLATION_FACTOR = 1.5
"""Factor on the model's standard deviations where the sea floor is quiet. That models are too quiet in the quiet deep
ocean is published (Liu et al. 2025); the size of the factor is a choice of this package, for the user to set."""

QUIET_SD_PA = 100.0
"""Standard deviation up to which a place counts as quiet, and the factor acts in full, Pa."""


def inflation(sd: Floats, factor: float = INFLATION_FACTOR, quiet_sd: float = QUIET_SD_PA) -> Floats:
    """Factor by which models are taken to be too quiet.

    The variance that is missing is a fixed share of the model's own up to `quiet_sd`, and beyond it stays what it is
    there: the factor falls to one where the sea floor is lively, and a place that is quieter than another stays so.

    Parameters
    ----------
    sd : array
        Standard deviation of the model, Pa.
    factor : float
        Where the sea floor is quiet, 1 or more.
    quiet_sd : float
        Pa.

    Returns
    -------
    array

    Examples
    --------
    >>> inflation(np.array([20.0, 100.0, 1000.0])).round(3)
    array([1.5  , 1.5  , 1.006])
    """
    with np.errstate(divide="ignore", invalid="ignore"):
        missing = (factor**2 - 1.0) * np.minimum(1.0, quiet_sd / sd) ** 2
    return np.asarray(np.where(np.isfinite(sd), np.sqrt(1.0 + missing), np.nan))


def quietness_map(
    models: Mapping[str, CellNumbers],
    grids: Sequence[ScreenGrid],
    *,
    record_years: Sequence[float],
    reference_year: int,
    inflation_factor: float = INFLATION_FACTOR,
    quiet_sd: float = QUIET_SD_PA,
) -> xr.Dataset:
    """Join the models.

    Parameters
    ----------
    models : mapping of str to CellNumbers
        By name, in the order of the cells of their fields.
    grids : sequence of ScreenGrid
        One for each, the same cells.
    record_years : sequence of float
    reference_year : int
    inflation_factor : float
    quiet_sd : float
        Pa.

    Returns
    -------
    xarray.Dataset
        contracts.QUIETNESS_MAP.
    """
    pairs = list(zip(models.values(), grids, strict=True))
    sd, yearly, density, slope, coverage, annual = (
        np.stack([grid.ordered(getattr(numbers, name)) for numbers, grid in pairs])
        for name in ("sd", "annual_mean_sd", "density", "slope", "coverage", "annual_sd")
    )
    phasor = np.stack([np.moveaxis(grid.ordered(numbers.phasor), 0, -1) for numbers, grid in pairs])
    present = np.isfinite(sd).sum(axis=0)
    joint_sd, joint_annual = _rms(sd), _rms(annual)
    factor = inflation(joint_sd, inflation_factor, quiet_sd)
    cell, pascal = ("lat", "lon"), {"units": "Pa"}
    variables = {
        "sd": (cell, joint_sd, pascal),
        "annual_mean_sd": (cell, _rms(yearly), pascal),
        "annual_sd": (("record_years", *cell), joint_annual, pascal),
        "expected_annual_sd": (("record_years", *cell), joint_annual * factor, pascal),
        "inflation": (cell, factor, {"units": "1"}),
        "annual_density": (cell, _mean(density), {"units": "Pa2 yr"}),
        "slope": (cell, _mean(slope), {"units": "1"}),
        "dynamic_phasor": ((*cell, "component"), _mean(phasor), pascal),
        "models": (cell, present.astype(np.int8), {"units": "1"}),
        "model_sd": (("model", *cell), sd, pascal),
        "model_annual_mean_sd": (("model", *cell), yearly, pascal),
        "model_annual_sd": (("model", "record_years", *cell), annual, pascal),
        "model_phasor": (("model", *cell, "component"), phasor, pascal),
        "model_coverage": (("model", *cell), coverage, {"units": "1"}),
    }
    if len(models) > 1:
        variables["disagreement"] = cell, _disagreement(phasor), pascal
    return xr.Dataset(
        variables,
        coords={
            "lat": ("lat", grids[0].latitude_deg, {"units": "degrees_north"}),
            "lon": ("lon", grids[0].longitude_deg, {"units": "degrees_east"}),
            "record_years": ("record_years", np.array(record_years, dtype=float), {"units": "yr"}),
            "component": list(COMPONENTS),
            "model": list(models),
        },
        attrs={
            "reference_year": reference_year,
            "inflation_factor": float(inflation_factor),
            "quiet_sd_pa": float(quiet_sd),
        },
    )


def _mean(values: Floats) -> Floats:
    """Mean over the models that have a value; NaN where none has."""
    known = np.isfinite(values)
    count = known.sum(axis=0)
    total = np.where(known, values, 0.0).sum(axis=0)
    return np.asarray(np.divide(total, count, out=np.full(total.shape, np.nan), where=count > 0))


def _rms(values: Floats) -> Floats:
    return np.asarray(np.sqrt(_mean(values**2)))


def _disagreement(phasor: Floats) -> Floats:
    """Give the standard deviation over the models of one component of (model, n_lat, n_lon, component)."""
    count = np.isfinite(phasor[..., 0]).sum(axis=0)
    squares = np.nansum((phasor - _mean(phasor)) ** 2, axis=(0, -1))
    mean = np.divide(squares, 2.0 * (count - 1), out=np.full(squares.shape, np.nan), where=count > 1)
    return np.asarray(np.sqrt(mean))
