"""How well the regions of a network held known truth: where it lies among the draws, counted over surrogates."""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray
from scipy.stats import beta, binom

from massfit.phasor import COMPONENTS, as_complex

Floats = NDArray[np.float64]

QUANTITIES = ("region", "in_phase", "quadrature", "amplitude", "peak_day")
"""The two-dimensional region, then the equal-tailed ones."""

LEVELS = (0.5, 0.95)

_ALARM = 0.0025  # probability of a count so far off on one side: one right network in a hundred is called wrong


def truth_among(draws: Floats, truth: Floats) -> dict[str, Any]:
    """Say where a truth lies among the draws of an answer.

    Parameters
    ----------
    draws : (n, 2) array
        Pa.
    truth : (2,) array
        Pa.

    Returns
    -------
    dict
        `mean` (2,) and `covariance` (2, 2) of the draws, Pa; the share of draws below the truth in `in_phase`,
        `quadrature`, `amplitude` and `peak_day`; and `region`, the share that is nearer to the mean than the truth in
        the metric of the covariance.

    Examples
    --------
    >>> draws = np.random.default_rng(1).standard_normal((20000, 2)) + [0.0, 80.0]
    >>> found = truth_among(draws, np.array([0.0, 81.0]))
    >>> round(found["in_phase"], 1), round(found["quadrature"], 1), round(found["region"], 1)
    (0.5, 0.8, 0.4)
    """
    mean, covariance = draws.mean(axis=0), np.cov(draws.T)
    points = np.vstack([draws, truth])
    away = points - mean
    phasors = as_complex(points)
    values = {
        "region": np.einsum("ni,ij,nj->n", away, np.linalg.inv(covariance), away),
        "in_phase": away[:, 0],
        "quadrature": away[:, 1],
        "amplitude": np.abs(phasors),
        "peak_day": np.angle(phasors * np.conj(phasors[:-1].mean())),
    }
    ranks = {name: float(np.mean(own[:-1] < own[-1])) for name, own in values.items()}
    return {"mean": mean, "covariance": covariance, **ranks}


def calibration_dataset(found: Sequence[Mapping[str, Any]], sites: Sequence[str]) -> xr.Dataset:
    """Gather the surrogates of a network.

    Parameters
    ----------
    found : sequence of mapping
        One a surrogate: what :func:`truth_among` gives, and `truth` (2,), `site_square` (n_site,) and `converged`.
    sites : sequence of str
        With records.

    Returns
    -------
    xarray.Dataset
        Over `surrogate`.
    """

    def stacked(name: str) -> Floats:
        return np.array([each[name] for each in found])

    pascal = {"units": "Pa"}
    return xr.Dataset(
        {
            "truth": (("surrogate", "component"), stacked("truth"), {**pascal, "long_name": "annual phasor put in"}),
            "mean": (("surrogate", "component"), stacked("mean"), {**pascal, "long_name": "mean of the draws"}),
            "covariance": (
                ("surrogate", "component", "component2"),
                stacked("covariance"),
                {"units": "Pa2", "long_name": "covariance of the draws"},
            ),
            "rank": (
                ("surrogate", "quantity"),
                np.column_stack([stacked(name) for name in QUANTITIES]),
                {"units": "1", "long_name": "share of the draws below the truth; of the region, nearer to the mean"},
            ),
            "site_square": (
                ("surrogate", "site"),
                stacked("site_square").reshape(len(found), len(sites)),
                {"units": "1", "long_name": "squared whitened error of a site's phasor per degree of freedom"},
            ),
            "converged": (("surrogate",), stacked("converged").astype(np.int8), {"units": "1"}),
        },
        coords={
            "surrogate": np.arange(1, len(found) + 1),
            "component": list(COMPONENTS),
            "component2": list(COMPONENTS),
            "quantity": list(QUANTITIES),
            "site": list(sites),
        },
    )


def calibration_summary(calibration: xr.Dataset) -> dict[str, Any]:
    """Count what the regions held, beside what chance allows.

    Parameters
    ----------
    calibration : xarray.Dataset
        Of :func:`calibration_dataset`.

    Returns
    -------
    dict
        `surrogates`; `coverage`, a list of {`quantity`, `level`, `inside`, `expected` (the counts that 95 of 100
        right regions give), `share`, `limits` (95 % limits of the true share, Clopper & Pearson 1934)}; `bias_sd`, the
        mean error of each component in standard deviations of the answer, and `bias_error_sd`, its standard error;
        `site_square`, the mean squared whitened error of the sites' phasors per degree of freedom, 1 where their
        covariances are right (None without records); `not_converged`; `holds`, false where the counts of the
        two-dimensional regions are such as one right network in a hundred has; and `sentence`.
    """
    count = calibration.sizes["surrogate"]
    ranks = calibration["rank"]
    coverage = [_coverage(name, level, ranks.sel(quantity=name).values) for name in QUANTITIES for level in LEVELS]
    sd = np.sqrt(np.diagonal(calibration["covariance"].values, axis1=1, axis2=2))
    errors = (calibration["mean"].values - calibration["truth"].values) / sd
    squares = calibration["site_square"].values
    standard = errors.std(axis=0, ddof=1) / np.sqrt(count) if count > 1 else np.full(2, np.nan)
    region = [row for row in coverage if row["quantity"] == "region"]
    holds = all(binom.cdf(row["inside"], count, row["level"]) >= _ALARM for row in region) and all(
        binom.sf(row["inside"] - 1, count, row["level"]) >= _ALARM for row in region
    )
    summary = {
        "surrogates": count,
        "coverage": coverage,
        "bias_sd": errors.mean(axis=0).tolist(),
        "bias_error_sd": [None if np.isnan(value) else float(value) for value in standard],
        "site_square": float(squares.mean()) if squares.size else None,
        "not_converged": int((calibration["converged"].values == 0).sum()),
        "holds": holds,
    }
    return {**summary, "sentence": _sentence(count, region, holds)}


def _coverage(name: str, level: float, ranks: Floats) -> dict[str, Any]:
    tail = 0.5 * (1.0 - level)
    inside = ranks < level if name == "region" else (ranks >= tail) & (ranks <= 1.0 - tail)
    held, count = int(inside.sum()), len(ranks)
    return {
        "quantity": name,
        "level": level,
        "inside": held,
        "expected": [int(binom.ppf(0.025, count, level)), int(binom.ppf(0.975, count, level))],
        "share": held / count,
        "limits": [
            float(beta.ppf(0.025, held, count - held + 1)) if held else 0.0,
            float(beta.ppf(0.975, held + 1, count - held)) if held < count else 1.0,
        ],
    }


def _sentence(count: int, region: Sequence[Mapping[str, Any]], holds: bool) -> str:
    said = " and ".join(
        f"the {100 * row['level']:.0f} % region held {row['inside']} (chance allows "
        f"{row['expected'][0]} to {row['expected'][1]})"
        for row in reversed(region)
    )
    verdict = "" if holds else " The regions of this network are not what they say: do not quote them as they are."
    return f"Of {count} surrogates of this network with a known cycle {said}.{verdict}"
