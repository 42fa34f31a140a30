"""The chains of a run as its results folder holds them: how they moved, and whether they agree."""

from collections.abc import Callable

import numpy as np
import xarray as xr
from arviz_stats.base import array_stats  # type: ignore[attr-defined]
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.posterior.convergence import ESS_MIN, RHAT_MAX

Floats = NDArray[np.float64]

MOST_LAGS = 25


def chain_diagnostics(posterior: xr.Dataset) -> xr.Dataset:
    """Say of every quantity of a posterior how its chains moved and how well they agree.

    R-hat is the rank-normalised split one and the effective sizes are those of Vehtari et al. (2021, Bayesian Analysis
    16, 667-718), as in the run itself; scales count by their logarithms.

    Parameters
    ----------
    posterior : xarray.Dataset
        The group `posterior` of posterior.nc: `member_annual_phasor` (chain, draw, component) and the scales
        (chain, draw), Pa, the load members dealt out in turn; attributes `load_members` and `walkers`, 1 where they
        are missing.

    Returns
    -------
    xarray.Dataset
        Over (quantity,): `rhat`, `ess_bulk`, `ess_tail`, each the worst over the load members. Over (quantity, lag):
        `autocorrelation` of the walkers, mean over all, `lag` in steps that were kept. Over (quantity, chain, step):
        `trace`, median over the walkers and members, hPa. Attributes: `rhat_allowed`, `ess_needed`.

    Examples
    --------
    >>> rng = np.random.default_rng(1)
    >>> drawn = xr.Dataset({"member_annual_phasor": (("chain", "draw", "component"), rng.normal(size=(4, 300, 2)))})
    >>> found = chain_diagnostics(drawn)
    >>> found["quantity"].values.tolist(), bool((found["rhat"] < 1.02).all())
    (['in phase', 'quadrature'], True)
    """
    members, walkers = (int(posterior.attrs.get(name, 1)) for name in ("load_members", "walkers"))
    walks = {name: _walks(values, members, walkers) for name, values in _quantities(posterior).items()}
    judged = {name: np.log(values) if name.startswith("s_") else values for name, values in walks.items()}

    def worst(of: Callable[[Floats], float], choose: Callable[[list[float]], float], by_walker: bool) -> Floats:
        laid = {name: np.swapaxes(walk, 2, 3) if by_walker else walk for name, walk in judged.items()}
        flat = {name: walk.reshape(*walk.shape[:2], -1) for name, walk in laid.items()}
        return np.array([choose([float(of(member)) for member in walk]) for walk in flat.values()])

    lags = min(MOST_LAGS, min(walk.shape[2] for walk in walks.values()) // 2)
    return xr.Dataset(
        {
            "rhat": ("quantity", worst(array_stats.rhat, max, False)),
            "ess_bulk": ("quantity", worst(lambda draws: array_stats.ess(draws, method="bulk"), min, True)),  # type: ignore[no-untyped-call]
            "ess_tail": ("quantity", worst(_tail, min, True)),
            "autocorrelation": (("quantity", "lag"), np.array([_correlation(walk, lags) for walk in judged.values()])),
            "trace": (
                ("quantity", "chain", "step"),
                np.array([np.median(walk, axis=(0, 3)) for walk in walks.values()]) / PASCAL_PER_HPA,
                {"units": "hPa"},
            ),
        },
        coords={"quantity": list(walks), "lag": np.arange(lags + 1)},
        attrs={"rhat_allowed": RHAT_MAX, "ess_needed": ESS_MIN},
    )


def _quantities(posterior: xr.Dataset) -> dict[str, Floats]:
    """Both components and every scale, (chain, draw)."""
    phasor = posterior["member_annual_phasor"].values
    found = {"in phase": phasor[..., 0], "quadrature": phasor[..., 1]}
    return found | {str(name): posterior[name].values for name in posterior.data_vars if str(name).startswith("s_")}


def _walks(values: Floats, members: int, walkers: int) -> Floats:
    """From (chain, draw) to (member, chain, step, walker)."""
    chains = values.shape[0]
    return np.moveaxis(values.reshape(chains, -1, walkers, members), 3, 0)


def _tail(draws: Floats) -> float:
    return float(array_stats.ess(draws, method="tail", prob=(0.05, 0.95)))  # type: ignore[no-untyped-call]


def _correlation(walk: Floats, lags: int) -> Floats:
    """Autocorrelation along the steps of every walker about the mean of its member, mean over all."""
    away = walk - walk.mean(axis=(1, 2, 3), keepdims=True)
    variance = (away**2).mean()
    steps = away.shape[2]
    return np.array([(away[:, :, : steps - lag] * away[:, :, lag:]).mean() / variance for lag in range(lags + 1)])
