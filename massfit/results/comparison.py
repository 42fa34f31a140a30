"""A comparison with satellite gravity as what `estimate.json` and `comparison.nc` hold."""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA, STANDARD_GRAVITY, TROPICAL_YEAR_DAYS
from massfit.gravity.bridge import BridgeStep
from massfit.gravity.compare import GEOCENTRE_ITRF2020, GravityComparison
from massfit.gravity.comparison import Agreement
from massfit.gravity.definitions import in_units
from massfit.gravity.inputs import Determination
from massfit.phasor import COMPONENTS, as_components, peak_date, peak_days, polar_sd

_MM = 1000.0


def comparison_summary(found: GravityComparison, *, reference_year: int, ocean_area_m2: float) -> dict[str, Any]:
    """Give the content of `comparison` in `estimate.json`.

    Parameters
    ----------
    found : GravityComparison
    reference_year : int
    ocean_area_m2 : float

    Returns
    -------
    dict
    """
    return {
        "network": _determination(found.network, reference_year),
        "satellite": _determination(found.satellite, reference_year),
        "difference": _agreement(found.agreement, reference_year),
        "solutions": [
            {
                "name": each.name,
                **_phasor(each.phasor),
                "covariance_hpa2": _hpa2(each.covariance),
                "kernel": _phasor(each.kernel_phasor),
                "kernel_covariance_hpa2": _hpa2(each.kernel_covariance),
                "whole_ocean_factor": [abs(complex(each.factors.mean())), _spread(np.abs(each.factors))],
                "land_leakage": abs(complex(each.leakage.mean())),
                "kind": each.kind,
                "error_from": each.error_from,
                "months": each.fit.months,
                "lines": list(each.fit.lines),
                "red_share": each.fit.red_share,
                "memory_days": each.fit.memory_days,
                "actions": list(each.actions),
                "left_out": list(each.monthly.left_out),
            }
            for each in found.solutions
        ],
        "others": [
            {**_determination(other, reference_year), "difference": _agreement(apart, reference_year)}
            for other, apart in found.others
        ],
        "choices_of": found.choices_of,
        "choices": [
            {
                "name": each.name,
                "kernel": None if each.kernel_phasor is None else _phasor(each.kernel_phasor),
                "whole_ocean": None if each.phasor is None else _phasor(each.phasor),
                "problem": each.problem,
            }
            for each in found.choices
        ],
        "sites": [
            {
                "id": each.site,
                "recorder": _with_errors(each.recorder, each.recorder_covariance),
                "satellite": _with_errors(each.satellite, each.satellite_covariance),
                "chi_square": _finite(each.chi_square),
                "probability": _finite(each.probability),
            }
            for each in found.sites
        ],
        "geocentre_mm": {axis: _geocentre(axis, *motion) for axis, motion in found.geocentre.items()},
        "definitions": [
            {
                "determination": each.determination,
                "name": each.name,
                "quantity": each.quantity,
                **in_units(each.phasor, ocean_area_m2),
            }
            for each in found.definitions
        ],
        "bridge": [
            {
                "start": str(each.span.start)[:10],
                "end": str(each.span.end - np.timedelta64(1, "D"))[:10],
                **_determination(Determination(each.name, "network", each.phasor, each.covariance), reference_year),
            }
            for each in found.bridge
        ],
        "bridge_step": None if found.step is None else _step(found.step),
        "warnings": list(found.warnings),
    }


def comparison_dataset(found: GravityComparison, summary: Mapping[str, Any]) -> xr.Dataset:
    """Give the content of `comparison.nc`.

    Parameters
    ----------
    found : GravityComparison
    summary : mapping
        Of the run, for its network, conventions and reference year.

    Returns
    -------
    xarray.Dataset
        Determinations, choices and sites as phasors (Pa), the monthly series of every solution (kg m-2), end to end.
    """
    every = [found.network, found.satellite, *(other for other, _ in found.others)]
    lengths = [each.series.size for each in found.solutions]
    middles = [span.middle for each in found.solutions for span in each.monthly.spans]
    pascal, pascal2 = {"units": "Pa"}, {"units": "Pa2"}
    at_sites = ("site", "component", "component2")
    choices = [each for each in found.choices if each.phasor is not None]
    return xr.Dataset(
        {
            "phasor": (("determination", "component"), _stack([each.phasor for each in every]), pascal),
            "covariance": (
                ("determination", "component", "component2"),
                np.array([each.covariance for each in every]),
                pascal2,
            ),
            "choice_phasor": (("choice", "component"), _stack([each.phasor for each in choices]), pascal),
            "choice_kernel_phasor": (("choice", "component"), _stack([each.kernel_phasor for each in choices]), pascal),
            "recorder_phasor": (("site", "component"), _stack([each.recorder for each in found.sites]), pascal),
            "satellite_phasor": (("site", "component"), _stack([each.satellite for each in found.sites]), pascal),
            "recorder_covariance": (
                at_sites,
                _covariances([each.recorder_covariance for each in found.sites]),
                pascal2,
            ),
            "satellite_covariance": (
                at_sites,
                _covariances([each.satellite_covariance for each in found.sites]),
                pascal2,
            ),
            "solution_phasor": (("solution", "component"), _stack([each.phasor for each in found.solutions]), pascal),
            "kernel_phasor": (
                ("solution", "component"),
                _stack([each.kernel_phasor for each in found.solutions]),
                pascal,
            ),
            "fitted_phasor": (
                ("solution", "component"),
                _stack([each.fit.phasor for each in found.solutions]),
                {"units": "kg m-2", "long_name": "annual phasor of the series, degree 0 of the vapour not in it"},
            ),
            "ocean_mean": (
                ("obs",),
                np.concatenate([each.series for each in found.solutions]),
                {"units": "kg m-2", "long_name": "kernel mean of each month, less the mean of all"},
            ),
            "row_size": (("solution",), np.array(lengths, dtype=np.int32), {"units": "1", "sample_dimension": "obs"}),
            "geocentre": (
                ("axis", "component"),
                _stack([phasor for phasor, _ in found.geocentre.values()]),
                {"units": "m", "long_name": "centre of figure in the centre of mass that the water implies"},
            ),
        },
        coords={
            "determination": [each.label for each in every],
            "choice": [each.name for each in choices],
            "site": [each.site for each in found.sites],
            "solution": [each.name for each in found.solutions],
            "axis": list(found.geocentre),
            "component": list(COMPONENTS),
            "time": (("obs",), np.array(middles, dtype="datetime64[ns]"), {"long_name": "middle of the month, UTC"}),
        },
        attrs={
            "Conventions": "CF-1.13, ACDD-1.3",
            "title": f"{summary['network']}: comparison with satellite gravity",
            "summary": " ".join(action for each in found.solutions for action in each.actions),
            "phase_reference": f"1 January {summary['reference_year']} 00:00 UTC",
            "comment": "; ".join(found.warnings),
        },
    )


def _stack(phasors: Sequence[complex | None]) -> NDArray[np.float64]:
    return as_components(np.array(phasors, dtype=complex)).reshape(-1, 2)


def _covariances(covariances: Sequence[NDArray[np.float64]]) -> NDArray[np.float64]:
    return np.array(covariances).reshape(-1, 2, 2)


def _hpa2(covariance: NDArray[np.float64]) -> list[list[float]]:
    return [[float(value) for value in row] for row in covariance / PASCAL_PER_HPA**2]


def _phasor(phasor: complex) -> dict[str, Any]:
    return {
        "in_phase_hpa": phasor.real / PASCAL_PER_HPA,
        "quadrature_hpa": phasor.imag / PASCAL_PER_HPA,
        "amplitude_hpa": abs(phasor) / PASCAL_PER_HPA,
        "water_mm": abs(phasor) / STANDARD_GRAVITY,  # kg m-2 are mm of fresh water
        "peak_day": float(peak_days(phasor)),
    }


def _with_errors(phasor: complex, covariance: NDArray[np.float64]) -> dict[str, Any] | None:
    """Phasor with the errors of amplitude and day, null where they are not known; nothing without a phasor."""
    if not np.isfinite(phasor):
        return None
    amplitude_sd, day_sd = polar_sd(phasor, covariance)
    errors = {"amplitude_sd_hpa": _finite(amplitude_sd / PASCAL_PER_HPA), "peak_day_sd": _finite(day_sd)}
    return {**_phasor(phasor), **errors}


def _determination(each: Determination, reference_year: int) -> dict[str, Any]:
    amplitude_sd, day_sd = polar_sd(each.phasor, each.covariance)
    return {
        "label": each.label,
        "method": each.method,
        **_phasor(each.phasor),
        "amplitude_sd_hpa": amplitude_sd / PASCAL_PER_HPA if each.error_stated else None,
        "peak_day_sd": day_sd if each.error_stated else None,
        "peak_date": peak_date(float(peak_days(each.phasor)), reference_year),
        "covariance_hpa2": _hpa2(each.covariance),
    }


def _agreement(apart: Agreement, reference_year: int) -> dict[str, Any]:
    joint = None
    if apart.joint_phasor is not None and apart.joint_covariance is not None:
        joint = _determination(
            Determination("joint", "generalised least squares of the two", apart.joint_phasor, apart.joint_covariance),
            reference_year,
        )
    return {
        "in_phase_hpa": apart.difference.real / PASCAL_PER_HPA,
        "quadrature_hpa": apart.difference.imag / PASCAL_PER_HPA,
        "covariance_hpa2": _hpa2(apart.covariance),
        "chi_square": _finite(apart.chi_square),
        "degrees_of_freedom": 2,
        "probability": _finite(apart.probability),
        "compatible": apart.compatible,
        "amplitude_hpa": apart.amplitude_difference / PASCAL_PER_HPA,
        "amplitude_sd_hpa": _finite(apart.amplitude_difference_sd / PASCAL_PER_HPA),
        "days": apart.day_difference,
        "days_sd": _finite(apart.day_difference_sd),
        "joint": joint,
    }


def _step(step: BridgeStep) -> dict[str, Any]:
    return {
        "in_phase_hpa": step.phasor.real / PASCAL_PER_HPA,
        "quadrature_hpa": step.phasor.imag / PASCAL_PER_HPA,
        "covariance_hpa2": _hpa2(step.covariance),
        "assumed_sd_hpa": step.assumed_sd / PASCAL_PER_HPA,
        "learned": step.learned,
    }


def _geocentre(axis: str, value: complex, covariance: NDArray[np.float64]) -> dict[str, float]:
    amplitude, error, phase = GEOCENTRE_ITRF2020[axis]
    amplitude_sd, day_sd = polar_sd(value, covariance)
    return {
        "amplitude": _MM * abs(value),
        "amplitude_sd": _MM * amplitude_sd,
        "peak_day": float(peak_days(value)),
        "peak_day_sd": day_sd,
        "itrf2020_amplitude": amplitude,
        "itrf2020_sd": error,
        "itrf2020_peak_day": float(phase / 360.0 * TROPICAL_YEAR_DAYS % TROPICAL_YEAR_DAYS),
    }


def _spread(values: NDArray[np.float64]) -> float:
    return float(np.std(values, ddof=1)) if values.size > 1 else 0.0


def _finite(value: float) -> float | None:
    return value if np.isfinite(value) else None
