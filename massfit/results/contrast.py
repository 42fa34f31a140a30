"""What differs between two finished runs."""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from massfit.constants import ANNUAL_RATE
from massfit.phasor import admittance_matrix, delay_days
from massfit.results.finished import FinishedRun

Floats = NDArray[np.float64]


def contrast(first: FinishedRun, second: FinishedRun) -> dict[str, Any]:
    """Compare two runs: what went in, how it was treated, and what came out.

    Parameters
    ----------
    first, second : FinishedRun

    Returns
    -------
    dict
        Ready for JSON. `inputs`: names `only_first`, `only_second`, `changed` (another SHA-256). `settings` and
        `versions`: by name, [first, second]. `sites`: `only_first`, `only_second`, and `shared` with the `shift_hpa` of
        each phasor and `shift_sd`. `answer`: `shift_hpa`, `shift_sd`, `amplitude_hpa` and `peak_days` (later is
        positive) of the second less the first, and `sd_ratio`, the ratio of the sizes of the two uncertainties
        (fourth root of the ratio of determinants). `warnings`: `only_first`, `only_second`.

    Notes
    -----
    A shift d is told in standard deviations as sqrt(d' V^-1 d / 2), V the mean of the two covariances, so that a shift
    by one standard deviation of each component is 1. Two runs on the same records share most of their errors: shifts
    well below 1 matter then. Phasors of another reference year are turned to that of the first.
    """
    turn = _turn(first.summary["reference_year"], second.summary["reference_year"])
    return {
        "networks": [first.summary["network"], second.summary["network"]],
        "commands": [first.provenance["command"], second.provenance["command"]],
        "inputs": _inputs(first.provenance["inputs"], second.provenance["inputs"]),
        "settings": _unequal(_flat(first.provenance["settings"]), _flat(second.provenance["settings"])),
        "versions": _unequal(_versions(first.provenance), _versions(second.provenance)),
        "sites": _sites(first.summary["sites"], second.summary["sites"], turn),
        "answer": _answer(first.summary, second.summary, turn),
        "warnings": _sides(_warnings(first.summary), _warnings(second.summary)),
    }


def _turn(first_year: int, second_year: int) -> complex:
    """Factor that turns a phasor of the second reference year to the first: its origin lies so much later."""
    days = (np.datetime64(f"{second_year:04d}-01-01") - np.datetime64(f"{first_year:04d}-01-01")).astype(int)
    return complex(np.exp(1j * ANNUAL_RATE * days))


def _inputs(first: Mapping[str, str], second: Mapping[str, str]) -> dict[str, list[str]]:
    changed = [name for name in first if name in second and first[name] != second[name]]
    return {**_sides(list(first), list(second)), "changed": changed}


def _sides(first: Sequence[str], second: Sequence[str]) -> dict[str, list[str]]:
    return {
        "only_first": [name for name in first if name not in second],
        "only_second": [name for name in second if name not in first],
    }


def _unequal(first: Mapping[str, Any], second: Mapping[str, Any]) -> dict[str, list[Any]]:
    names = dict.fromkeys([*first, *second])
    return {name: [first.get(name), second.get(name)] for name in names if first.get(name) != second.get(name)}


def _flat(settings: Mapping[str, Any], prefix: str = "") -> dict[str, Any]:
    flat: dict[str, Any] = {}
    for key, value in settings.items():
        flat.update(_flat(value, f"{prefix}{key}.") if isinstance(value, Mapping) else {f"{prefix}{key}": value})
    return flat


def _versions(provenance: Mapping[str, Any]) -> dict[str, Any]:
    return {name: provenance.get(name) for name in ("massfit", "python", "machine")} | dict(provenance["versions"])


def _warnings(summary: Mapping[str, Any]) -> list[str]:
    return [*summary["warnings"], *(f"{site['id']}: {text}" for site in summary["sites"] for text in site["warnings"])]


def _sites(
    first: Sequence[Mapping[str, Any]], second: Sequence[Mapping[str, Any]], turn: complex
) -> dict[str, list[Any]]:
    others = {site["id"]: site for site in second}
    shared = []
    for site in first:
        if site["id"] in others:
            other = others[site["id"]]
            shift, sd = _shift(
                site["phasor_hpa"], site["phasor_covariance_hpa2"],
                other["phasor_hpa"], other["phasor_covariance_hpa2"], turn,
            )  # fmt: skip
            shared.append({"id": site["id"], "shift_hpa": shift.tolist(), "shift_sd": sd})
    return {**_sides([site["id"] for site in first], list(others)), "shared": shared}


def _answer(first: Mapping[str, Any], second: Mapping[str, Any], turn: complex) -> dict[str, Any]:
    one, two = _mean(first), _mean(second)
    shift, sd = _shift(one, first["covariance_hpa2"], two, second["covariance_hpa2"], turn)
    ratio = np.linalg.det(second["covariance_hpa2"]) / np.linalg.det(first["covariance_hpa2"])
    return {
        "shift_hpa": shift.tolist(),
        "shift_sd": sd,
        "amplitude_hpa": abs(complex(*two)) - abs(complex(*one)),
        "peak_days": float(delay_days(complex(*two) * turn / complex(*one))),
        "sd_ratio": float(ratio**0.25),
    }


def _mean(summary: Mapping[str, Any]) -> list[float]:
    return [summary["in_phase_hpa"]["mean"], summary["quadrature_hpa"]["mean"]]


def _shift(
    one: Sequence[float], one_covariance: Any, two: Sequence[float], two_covariance: Any, turn: complex
) -> tuple[Floats, float]:
    """Second less first, (2,) hPa, and its size in standard deviations."""
    matrix = admittance_matrix(turn)
    shift = matrix @ np.asarray(two) - np.asarray(one)
    covariance = 0.5 * (np.asarray(one_covariance) + matrix @ np.asarray(two_covariance) @ matrix.T)
    return shift, float(np.sqrt(0.5 * shift @ np.linalg.solve(covariance, shift)))
