"""What the sites of a network do for its answer, as `siting.nc` and `estimate.json` hold it."""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.phasor import COMPONENTS, as_complex, peak_date, peak_days
from massfit.posterior.convergence import worse
from massfit.posterior.node_integral import SubsetMoments
from massfit.siting.influence import LeftOut
from massfit.siting.ranking import Ranking

Floats = NDArray[np.float64]

DIAGNOSTIC = (
    "What the phasors themselves drive (leaving out, leverage, pull, agreeable sites) says how the answer hangs "
    "together; a subset chosen by it is no estimate."
)

_MEAN = "mean of the annual phasor of ocean-mean water pressure"
_SD = "standard deviation of the annual phasor of ocean-mean water pressure"


def siting_dataset(ranking: Ranking, sites: Sequence[Mapping[str, Any]], by_name: str) -> xr.Dataset:
    """Everything that was found, as a Dataset.

    Parameters
    ----------
    ranking : Ranking
    sites : sequence of mapping
        `sites` of `estimate.json`.
    by_name : str
        What the sites are ordered by in the sweep.

    Returns
    -------
    xarray.Dataset
        Over `site`, `group`, `subset`, `kept_count` (1 to all sites) and `criterion`; Pa.
    """
    variables: dict[str, tuple[tuple[str, ...], Any, dict[str, str]]] = {
        **_left_out("without_site", "site", ranking.single),
        **(_left_out("without_group", "group", ranking.grouped) if ranking.groups else {}),
        "information_share": _pure(
            ("site", "component"), ranking.information, "part of the precision that is lost without the site"
        ),
        "leverage": _pure(("site", "component"), ranking.leverage, "how far the answer follows the site"),
        "outlier_probability": _pure(
            ("site",), _column(ranking, sites, "outlier_probability"), "probability that the site is wrong"
        ),
        "standardised_residual": _pure(
            ("site",), _column(ranking, sites, "standardised_residual"), "residual under the prediction from the others"
        ),
        "subset_has_site": _pure(("subset", "site"), ranking.sizes.kept.astype(np.int8), "1 where the site is kept"),
        **_answers("subset", ("subset",), ranking.sizes.moments),
        **_sweep("ordered", ranking, "by", by_name),
        **_sweep("agreeable", ranking, "agreeable", "standardised residual: a warning, not an answer"),
    }
    variables |= _paths(ranking)
    coordinates: dict[str, Any] = {
        "site": list(ranking.sites),
        "component": list(COMPONENTS),
        "kept_count": np.arange(1, len(ranking.sites) + 1),
        "criterion": [path.criterion for path in ranking.paths],
    }
    if ranking.groups:
        coordinates["group"] = list(ranking.groups)
    if ranking.pull is not None:
        coordinates["offset"] = ("offset", ranking.pull.offset, {"units": "Pa", "long_name": "site moved off by"})
        text = "shift of the answer along its own direction, in its standard deviations"
        variables["pull_sd"] = _pure(("site", "offset"), ranking.pull.shift_sd, text)
        text = "smallest change of the site's reading that moves the answer by one standard deviation"
        variables["needed_offset"] = ("site",), ranking.pull.needed, {"units": "Pa", "long_name": text}
    return xr.Dataset(variables, coordinates, {"note": DIAGNOSTIC, "ordered_by": by_name})


def _pure(dims: tuple[str, ...], values: Any, text: str) -> tuple[tuple[str, ...], Any, dict[str, str]]:
    return dims, values, {"units": "1", "long_name": text}


def _column(ranking: Ranking, sites: Sequence[Mapping[str, Any]], key: str) -> Floats:
    rows = {str(site["id"]): site[key] for site in sites}
    return np.array([rows[name] for name in ranking.sites], dtype=float)


def _answers(
    name: str, dims: tuple[str, ...], moments: SubsetMoments
) -> dict[str, tuple[tuple[str, ...], Any, dict[str, str]]]:
    return {
        f"{name}_mean": ((*dims, "component"), moments.mean, {"units": "Pa", "long_name": _MEAN}),
        f"{name}_sd": ((*dims, "component"), moments.sd, {"units": "Pa", "long_name": _SD}),
    }


def _left_out(name: str, dim: str, left: LeftOut) -> dict[str, tuple[tuple[str, ...], Any, dict[str, str]]]:
    shift, ratio = "shift of the mean in standard deviations of all sites", "standard deviation over that of all sites"
    return {
        **_answers(name, (dim,), left.moments),
        f"{name}_shift_sd": _pure((dim, "component"), left.shift_sd, shift),
        f"{name}_sd_ratio": _pure((dim, "component"), left.sd_ratio, ratio),
    }


def _sweep(
    name: str, ranking: Ranking, key: str, by_name: str
) -> dict[str, tuple[tuple[str, ...], Any, dict[str, str]]]:
    found = getattr(ranking, key)
    return {
        f"{name}_site": (
            ("kept_count",),
            np.array([ranking.sites[s] for s in found.order], dtype=object),
            {"long_name": f"site that is added; order: {by_name}"},
        ),
        f"{name}_value": (("kept_count",), found.value, {"long_name": by_name}),
        **_answers(name, ("kept_count",), found.moments),
    }


def _paths(ranking: Ranking) -> dict[str, tuple[tuple[str, ...], Any, dict[str, str]]]:
    dims = ("criterion", "kept_count")
    value = np.array([path.value for path in ranking.paths])
    kept = np.array([path.kept for path in ranking.paths]).astype(np.int8)
    text = "criterion at fixed scales, without the phasors"
    return {
        "path_has_site": _pure((*dims, "site"), kept, "1 where the site is kept"),
        "path_value": (dims, value, {"units": "Pa", "long_name": text}),
        "path_mean": (
            (*dims, "component"),
            np.array([path.moments.mean for path in ranking.paths]),
            {"units": "Pa", "long_name": _MEAN},
        ),
        "path_sd": (
            (*dims, "component"),
            np.array([path.moments.sd for path in ranking.paths]),
            {"units": "Pa", "long_name": _SD},
        ),
    }


def siting_summary(
    ranking: Ranking,
    sites: Sequence[Mapping[str, Any]],
    *,
    by_name: str,
    target_hpa: float | None,
    reference_year: int,
) -> dict[str, Any]:
    """Give the content of `siting` in `estimate.json`.

    Parameters
    ----------
    ranking : Ranking
    sites : sequence of mapping
        `sites` of `estimate.json`.
    by_name : str
    target_hpa : float, optional
        Width that a smaller network is to keep; 10 % more than that of all sites by default.
    reference_year : int

    Returns
    -------
    dict
        `whole`, `without_sites`, `without_groups`, `sizes`, `smallest`, `ordered_by`, `ordered`, `agreeable`, `paths`,
        `note`. A width is the root of the mean variance of the two components.
    """
    whole = ranking.whole.width[0] / PASCAL_PER_HPA
    target = 1.1 * whole if target_hpa is None else target_hpa
    return {
        "whole": _answer(ranking.whole, 0, reference_year),
        "without_sites": [
            {**_without(ranking.sites[s], ranking.single, s, reference_year), **_influence(ranking, sites, s)}
            for s in range(len(ranking.sites))
        ],
        "without_groups": [_without(name, ranking.grouped, g, reference_year) for g, name in enumerate(ranking.groups)],
        "sizes": [_size(ranking, size) for size in range(1, len(ranking.sites) + 1)],
        "smallest": _smallest(ranking, target),
        "ordered_by": by_name,
        "ordered": _swept(ranking, "by", reference_year),
        "agreeable": _swept(ranking, "agreeable", reference_year),
        "paths": [_path(ranking, p) for p in range(len(ranking.paths))],
        "note": DIAGNOSTIC,
    }


def _answer(moments: SubsetMoments, i: int, reference_year: int) -> dict[str, Any]:
    phasor = as_complex(moments.mean[i])
    day = float(peak_days(phasor))
    return {
        "in_phase_hpa": float(moments.mean[i, 0] / PASCAL_PER_HPA),
        "quadrature_hpa": float(moments.mean[i, 1] / PASCAL_PER_HPA),
        "amplitude_hpa": float(abs(phasor) / PASCAL_PER_HPA),
        "peak_day": day,
        "peak_date": peak_date(day, reference_year),
        "width_hpa": float(moments.width[i] / PASCAL_PER_HPA),
    }


def _without(name: str, left: LeftOut, i: int, reference_year: int) -> dict[str, Any]:
    return {
        "name": name,
        "sites": int(left.kept[i].sum()),
        "shift_sd": worse(left.shift_sd[i]),
        "sd_ratio": float(np.exp(worse(np.log(left.sd_ratio[i])))),
        **_answer(left.moments, i, reference_year),
    }


def _influence(ranking: Ranking, sites: Sequence[Mapping[str, Any]], s: int) -> dict[str, Any]:
    needed = np.nan if ranking.pull is None else ranking.pull.needed[s] / PASCAL_PER_HPA
    return {
        "information_share": ranking.information[s].tolist(),
        "leverage": ranking.leverage[s].tolist(),
        "outlier_probability": float(_column(ranking, sites, "outlier_probability")[s]),
        "needed_offset_hpa": None if np.isnan(needed) else float(needed),
        "largest_pull_sd": None if ranking.pull is None else float(np.abs(ranking.pull.shift_sd[s]).max()),
    }


def _size(ranking: Ranking, size: int) -> dict[str, Any]:
    own = ranking.sizes.size == size
    widths = ranking.sizes.widths(size) / PASCAL_PER_HPA
    amplitude = np.hypot(*ranking.sizes.moments.mean[own].T) / PASCAL_PER_HPA
    quantiles = [0.05, 0.5, 0.95]
    return {
        "sites": size,
        "subsets": int(own.sum()),
        "width_hpa": np.quantile(widths, quantiles).tolist(),
        "amplitude_hpa": np.quantile(amplitude, quantiles).tolist(),
    }


def _smallest(ranking: Ranking, target_hpa: float) -> dict[str, Any]:
    target = target_hpa * PASCAL_PER_HPA
    path = ranking.paths[0]
    enough = np.flatnonzero(path.moments.width <= target * (1 + 1e-9))
    best = int(enough[0]) if len(enough) else None
    return {
        "target_width_hpa": float(target_hpa),
        "half_of_subsets": ranking.sizes.smallest(target, 0.5),
        "most_subsets": ranking.sizes.smallest(target, 0.95),
        "chosen": None if best is None else best + 1,
        "chosen_sites": [] if best is None else [ranking.sites[s] for s in np.flatnonzero(path.kept[best])],
    }


def _swept(ranking: Ranking, key: str, reference_year: int) -> list[dict[str, Any]]:
    found = getattr(ranking, key)
    return [
        {
            "sites": n + 1,
            "added": ranking.sites[site],
            "value": float(found.value[n]),
            **_answer(found.moments, n, reference_year),
        }
        for n, site in enumerate(found.order)
    ]


def _path(ranking: Ranking, p: int) -> dict[str, Any]:
    path = ranking.paths[p]
    return {
        "criterion": path.criterion,
        "steps": [
            {
                "sites": k + 1,
                "kept": [ranking.sites[s] for s in np.flatnonzero(path.kept[k])],
                "value_hpa": float(path.value[k] / PASCAL_PER_HPA),
                "width_hpa": float(path.moments.width[k] / PASCAL_PER_HPA),
            }
            for k in range(len(path.value))
        ],
    }


def component_widths_hpa(ranking: xr.Dataset, name: str) -> Floats:
    """Root mean square over the two components of standard deviations.

    Parameters
    ----------
    ranking : xarray.Dataset
        From :func:`siting_dataset`.
    name : str
        Variable (..., component), Pa.

    Returns
    -------
    (...) array
        hPa.
    """
    return np.asarray(np.sqrt((ranking[name].values ** 2).mean(axis=-1)) / PASCAL_PER_HPA)


def subset_counts(ranking: xr.Dataset) -> NDArray[np.int64]:
    """Sites (n_subset,) in each random subset."""
    return np.asarray(ranking["subset_has_site"].values.sum(axis=1), dtype=np.int64)


def median_widths_hpa(ranking: xr.Dataset) -> Floats:
    """Median width (n_site,) of the random subsets of every size, hPa; NaN for a size without any."""
    widths, size = component_widths_hpa(ranking, "subset_sd"), subset_counts(ranking)
    counts = ranking["kept_count"].values
    return np.array([np.median(widths[size == k]) if (size == k).any() else np.nan for k in counts])
