"""What is known of each site before the network is looked at as a whole, as plain numbers for JSON."""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.cautions import site_cautions
from massfit.annual.dataset import NO_MODEL
from massfit.annual.fit import DriftFit, Estimate
from massfit.constants import ANNUAL_RATE, PASCAL_PER_HPA
from massfit.corrections.long_period_tides import line_table
from massfit.corrections.phasors import CALIBRATIONS, CIRCULATION, COMMON, RECORD
from massfit.phasor import COMPONENTS, peak_days
from massfit.results.estimate import SiteReduction
from massfit.site import Site

Floats = NDArray[np.float64]

LEAST_P = 0.001
"""Chance of the portmanteau statistic below which a caution is given; with twenty sites one of fifty runs has one."""


def site_entry(site: Site, phasors: xr.Dataset) -> dict[str, Any]:
    """Phasor of one site as the network receives it.

    Parameters
    ----------
    site : Site
    phasors : xarray.Dataset
        contracts.SITE_PHASORS.

    Returns
    -------
    dict
        `id`, `depth_m`, `group`, `phasor_hpa` (mean over the models), `phasor_covariance_hpa2`, `amplitude_hpa` and
        `peak_day` with their standard deviations to first order, `parts` (Gaussians of the mixture),
        `phasor_by_model_hpa`, `exclude` and `warnings`.
    """
    own = phasors.sel(site=site.id)
    weight = own["weight"].values
    by_part = own["phasor"].values / PASCAL_PER_HPA
    there = np.isfinite(by_part).all(axis=(0, 2))
    mean, covariance = _moments(weight, by_part[:, there].mean(axis=1), own["covariance"].values / PASCAL_PER_HPA**2)
    names = [str(name) for name in own["model"].values[there]]
    models = [name for name in names if name != NO_MODEL]
    single = np.einsum("k,kmc->mc", weight, by_part[:, there])
    return {
        "id": site.id,
        "depth_m": site.depth_m,
        "group": site.group,
        "phasor_hpa": mean.tolist(),
        "phasor_covariance_hpa2": covariance.tolist(),
        **_amplitude_and_peak(mean, covariance),
        "parts": int(np.count_nonzero(weight)),
        "phasor_by_model_hpa": dict(zip(names, single.tolist(), strict=True)),
        "exclude": [[str(each.start)[:19], str(each.end)[:19], each.reason] for each in site.exclude],
        "warnings": site_cautions(float(own["reduced_sd"]), models),
    }


def _moments(weight: Floats, means: Floats, covariances: Floats) -> tuple[Floats, Floats]:
    mean = weight @ means
    away = means - mean
    return mean, np.einsum("k,kij->ij", weight, covariances) + np.einsum("k,ki,kj->ij", weight, away, away)


def _amplitude_and_peak(mean: Floats, covariance: Floats) -> dict[str, Any]:
    amplitude = float(np.hypot(*mean))
    along = mean / amplitude
    across = np.array([-along[1], along[0]])
    return {
        "amplitude_hpa": amplitude,
        "amplitude_sd_hpa": float(np.sqrt(along @ covariance @ along)),
        "peak_day": float(peak_days(complex(*mean))),
        "peak_sd_days": float(np.sqrt(across @ covariance @ across) / amplitude / ANNUAL_RATE),
    }


def record_entry(reduction: SiteReduction, zonal_response: float) -> dict[str, Any]:
    """Drift, noise, tides and judgement of one site that has records.

    Parameters
    ----------
    reduction : SiteReduction
        With its diagnostics.
    zonal_response : float
        Of the site per metre of the zonal tide, Pa.

    Returns
    -------
    dict
        `drift` (one entry a deployment), `noise`, `long_period_tides` (one entry a line), `judged`.
    """
    fit = reduction.fit
    return {
        "drift": [_drift(drift) for drift in fit.drifts],
        "noise": {
            "forms": dict(fit.noise.form_weight),
            "red_hpa": _number(fit.noise.red, PASCAL_PER_HPA),
            "memory_days": _number(fit.noise.memory_days),
            "white_hpa": [_number(white, PASCAL_PER_HPA) for white in fit.noise.white],
        },
        "long_period_tides": [
            {name if name != "amplitude" else "amplitude_hpa": value for name, value in row.items()}
            for row in line_table(zonal_response / PASCAL_PER_HPA)
        ],
        "judged": _judged(reduction),
    }


def _number(value: Estimate | None, unit: float = 1.0) -> list[float] | None:
    """Mean and standard deviation."""
    return None if value is None else [value.mean / unit, value.sd / unit]


def _drift(drift: DriftFit) -> dict[str, Any]:
    return {
        "deployment": drift.deployment,
        "first_day": str(drift.time[0])[:10],
        "last_day": str(drift.time[-1])[:10],
        "days": len(drift.time),
        "slope_hpa_per_year": _number(drift.slope, PASCAL_PER_HPA),
        "forms": dict(drift.form_weight),
        "exponential_hpa": _number(drift.exponential, PASCAL_PER_HPA),
        "logarithm_hpa": _number(drift.logarithm, PASCAL_PER_HPA),
        "time_constant_days": _number(drift.time_constant_days),
        "steps": [[str(time)[:19], *(_number(size, PASCAL_PER_HPA) or ())] for time, size in drift.steps],
    }


def _judged(reduction: SiteReduction) -> dict[str, Any] | None:
    own = reduction.diagnostics
    if own is None:
        return None
    white = own.whiteness
    return {
        "inflation": own.inflation,
        "portmanteau": white.statistic,
        "portmanteau_degrees": white.degrees,
        "portmanteau_p": white.p_value,
        "whitened_mean_square": white.mean_square,
        "years": [
            {
                "year": each.year,
                "days": each.days,
                "phasor_hpa": (each.phasor / PASCAL_PER_HPA).tolist(),
                "covariance_hpa2": (each.covariance / PASCAL_PER_HPA**2).tolist(),
            }
            for each in own.years
        ],
    }


def judgement(judged: Mapping[str, Any] | None) -> list[str]:
    """Say what is doubtful about the fit of a site.

    Parameters
    ----------
    judged : mapping or None
        From :func:`record_entry`.

    Returns
    -------
    list of str
    """
    if judged is None or judged["portmanteau_p"] >= LEAST_P:
        return []
    return [
        f"The whitened residuals are not white (portmanteau {judged['portmanteau']:.0f} for "
        f"{judged['portmanteau_degrees']} degrees of freedom): the noise fitted is not quite that of the record. Look "
        "at its spectrum; what counts for the phasor is the spectrum about one cycle a year."
    ]


def site_rows(sites: Sequence[Mapping[str, Any]]) -> list[dict[str, str]]:
    """Spell the table of the sites, one mapping of column to text a site.

    Parameters
    ----------
    sites : sequence of mapping
        From `phasors.json`.

    Returns
    -------
    list of dict
        Empty where something is not known.
    """
    return [_row(site) for site in sites]


def _row(site: Mapping[str, Any]) -> dict[str, str]:
    (variance_a, covariance), (_, variance_b) = site["phasor_covariance_hpa2"]
    judged = site.get("judged") or {}
    series = {row["series"]: row["phasor_hpa"] for row in site.get("corrections", []) if _told(row)}
    numbers = {
        "latitude": site["latitude"],
        "longitude": site["longitude"],
        "depth_m": site["depth_m"],
        "days": site["days"],
        "coverage": site.get("coverage"),
        "in_phase_hpa": site["phasor_hpa"][0],
        "quadrature_hpa": site["phasor_hpa"][1],
        "variance_in_phase_hpa2": variance_a,
        "covariance_hpa2": covariance,
        "variance_quadrature_hpa2": variance_b,
        **{name: site[name] for name in ("amplitude_hpa", "amplitude_sd_hpa", "peak_day", "peak_sd_days")},
        "reduced_sd_hpa": site["reduced_sd_hpa"],
        **{name: judged.get(name) for name in ("inflation", "portmanteau_p", "whitened_mean_square")},
        **{
            f"{name}_{part}_hpa": series.get(name, [0.0, 0.0])[place] if series else None
            for name in (RECORD, *COMMON, CIRCULATION, CALIBRATIONS)
            for place, part in enumerate(COMPONENTS)
        },
    }
    return {
        "id": site["id"],
        "group": site["group"] or "",
        "first_day": site.get("first_day") or "",
        "last_day": site.get("last_day") or "",
        **{name: "" if value is None else f"{value:.6g}" for name, value in numbers.items()},
        "models": " | ".join(site["models"]),
        "warnings": " | ".join(site["warnings"]),
    }


def _told(row: Mapping[str, Any]) -> bool:
    """Whether a series stands in the table: the record, and what it is made of besides the phasor of the site."""
    return bool(row["summand"]) or row["series"] == RECORD
