"""Whether the fitted model reproduces the scatter of the site phasors.

Realised discrepancies (Gelman, Meng & Stern 1996, Statistica Sinica 6, 733-807): each is computed from the phasors
observed and from phasors replicated by the model, at the same draws of the answer and of the scales. The share of
replicates that scatter at least as much is the p-value: near 0 the network scatters more than the model can,
near 1 less.
"""

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.phasor import admittance_matrix
from massfit.posterior.network_model import Choices
from massfit.posterior.observations import Observations, read_observations
from massfit.posterior.regression import FREEDOM
from massfit.posterior.replicate import draw_errors, replicate_phasors
from massfit.posterior.result import Posterior

Floats = NDArray[np.float64]

DRAWS = 2000
"""Replicates: the standard error of a p-value is 0.011 or less."""

EXTREME = 0.01
"""A p-value nearer to 0 or 1 than this is called out."""

_NAMES = {
    "site_scatter": "scatter of the sites about the answer",
    "largest_residual": "the site that lies farthest off",
    "models_together": "how far the models lie apart as a whole",
    "models_at_sites": "how far the models lie apart from site to site",
}


def predictive_check(posterior: Posterior, site_phasors: xr.Dataset, fingerprints: xr.Dataset) -> dict[str, Any]:
    """Hold the scatter of the site phasors against what the fitted model expects.

    Parameters
    ----------
    posterior : Posterior
    site_phasors, fingerprints : xarray.Dataset
        What the posterior was drawn from.

    Returns
    -------
    dict
        `draws`; `checks`, a list of {`name`, `meaning`, `observed` (median over the draws), `expected` (central 95 % of
        the replicates), `p`}: sums of squares in units of their expectation by the model, but `largest_residual`, which
        is the residual of one site over the root mean square of the others; `farthest_site`, the one that most often
        has the largest residual; `agrees`, whether no p-value is below 0.01 or above 0.99; and `sentences`. A check
        that the network cannot make (one site, one model) is left out.

    Raises
    ------
    InputError
        Every fault of the two Datasets.
    """
    observations, admittance = read_observations(site_phasors, fingerprints)
    member, annual, scales = _chosen_draws(posterior)
    rng = np.random.default_rng([posterior.seed, len(annual)])
    choices = Choices(posterior.settings, posterior.priors, posterior.atmosphere_sd_hpa)
    errors = draw_errors(observations, scales, choices, rng)
    replicated = replicate_phasors(observations, admittance[member], annual, errors, rng)
    signal = np.einsum("nsij,nj->nsi", admittance_matrix(admittance[member]), annual)[:, :, None]
    student = posterior.settings.site_scatter == "student-t"
    spread = _Spread(observations, scales, FREEDOM / (FREEDOM - 2.0) if student else 1.0)
    pair = (observations.phasor - signal, replicated - signal)
    checks = [_check(name, pair, measure) for name, measure in spread.measures().items()]
    squares = spread.site_squares(pair[0])
    farthest = observations.sites[int(np.bincount(squares.argmax(axis=1)).argmax())]
    return {
        "draws": len(annual),
        "checks": checks,
        "farthest_site": farthest,
        "agrees": not _odd(checks),
        "sentences": _sentences(checks, farthest),
    }


def _chosen_draws(posterior: Posterior) -> tuple[NDArray[np.int64], Floats, dict[str, Floats]]:
    """Load member (n,), phasor (n, 2) and scales of equally spaced draws, in equal numbers a member."""
    annual, scale = (
        values.reshape(len(posterior.members), -1, values.shape[-1])
        for values in (posterior.member_annual, posterior.scales)
    )
    members, draws, _ = annual.shape
    chosen = np.linspace(0, draws - 1, max(1, min(draws, DRAWS // members))).astype(int)
    names = [str(name) for name in posterior.to_dataset()["scale_name"].values]
    scales = scale[:, chosen].reshape(-1, len(names))
    member = np.repeat(np.arange(members), len(chosen))
    return member, annual[:, chosen].reshape(-1, 2), dict(zip(names, scales.T, strict=True))


class _Spread:
    """Measures of scatter of residuals (n, n_site, n_model, 2), each at its own draw of the scales."""

    def __init__(self, observations: Observations, scales: Mapping[str, Floats], site_factor: float) -> None:
        self._seen = observations
        identity = np.eye(2)
        site, local = (scales[name][:, None, None, None] ** 2 * identity for name in ("s_site", "s_local"))
        count = observations.model_count[:, None, None]
        self._site_precision = np.linalg.inv(observations.covariance + site_factor * site + local / count)
        self._local_precision = np.linalg.inv(observations.model_noise + local + 1e-9 * identity)
        self._common = scales["s_common"]

    def measures(self) -> dict[str, Callable[[Floats], Floats]]:
        """Name every measure that the network allows."""
        found: dict[str, Callable[[Floats], Floats]] = {}
        if len(self._seen.sites) > 1:
            found["site_scatter"] = self._site_scatter
        if len(self._seen.sites) > 2:
            found["largest_residual"] = self._largest_residual
        contrasting = int(self._seen.has_contrasts.sum())
        if contrasting:
            found["models_together"] = self._models_together
        if contrasting > 1:
            found["models_at_sites"] = self._models_at_sites
        return found

    def site_squares(self, residual: Floats) -> Floats:
        """Squared whitened residual (n, n_site) of each site's mean over models, about the mean of the sites."""
        means = np.nanmean(residual, axis=2)
        weighted = np.einsum("nsij,nsj->ni", self._site_precision, means)
        centre = np.linalg.solve(self._site_precision.sum(axis=1), weighted[..., None])[..., 0]
        away = means - centre[:, None]
        return np.asarray(np.einsum("nsi,nsij,nsj->ns", away, self._site_precision, away))

    def _site_scatter(self, residual: Floats) -> Floats:
        return np.asarray(self.site_squares(residual).sum(axis=1) / (2.0 * (len(self._seen.sites) - 1)))

    def _largest_residual(self, residual: Floats) -> Floats:
        """Residual of the farthest site over the root mean square of the others: no scale can absorb it."""
        squares = self.site_squares(residual)
        largest = squares.max(axis=1)
        others = (squares.sum(axis=1) - largest) / (squares.shape[1] - 1)
        return np.asarray(np.sqrt(largest / others))

    def _contrasts(self, residual: Floats) -> tuple[Floats, Floats]:
        """Each model about the mean of its site, (n, site, model, 2), and the mean of that over the sites."""
        own = residual[:, self._seen.has_contrasts]
        away = own - np.nanmean(own, axis=2, keepdims=True)
        return away, _mean_over_sites(away)

    def _models_together(self, residual: Floats) -> Floats:
        _, offsets = self._contrasts(residual)
        return np.asarray(np.nansum(offsets**2, axis=(1, 2)) / (2.0 * max(offsets.shape[1] - 1, 1) * self._common**2))

    def _models_at_sites(self, residual: Floats) -> Floats:
        away, offsets = self._contrasts(residual)
        own = np.nan_to_num(away - offsets[:, None])
        precision = self._local_precision[:, self._seen.has_contrasts]
        squares = np.einsum("nsmi,nsij,nsmj->n", own, precision, own)
        free = (self._seen.model_count - 1)[self._seen.has_contrasts].sum() - (offsets.shape[1] - 1)
        return np.asarray(squares / (2.0 * max(free, 1)))


def _mean_over_sites(away: Floats) -> Floats:
    """Mean over the sites that have a model; zero for a model that no site has beside another."""
    there = np.isfinite(away)
    return np.asarray(np.nansum(away, axis=1) / np.maximum(there.sum(axis=1), 1))


def _check(name: str, pair: tuple[Floats, Floats], measure: Callable[[Floats], Floats]) -> dict[str, Any]:
    observed, replicated = (measure(residual) for residual in pair)
    return {
        "name": name,
        "meaning": _NAMES[name],
        "observed": float(np.median(observed)),
        "expected": np.quantile(replicated, [0.025, 0.975]).tolist(),
        "p": float(np.mean(replicated >= observed)),
    }


def _odd(checks: list[dict[str, Any]]) -> list[dict[str, Any]]:
    return [check for check in checks if min(check["p"], 1.0 - check["p"]) < EXTREME]


def _sentences(checks: list[dict[str, Any]], farthest: str) -> list[str]:
    """Say what disagrees, or that nothing does."""
    said = {
        ("largest_residual", True): f"{farthest} lies farther from the others than any site should by the fitted model",
        ("largest_residual", False): "The sites lie closer together than the fitted model expects",
        ("site_scatter", True): "The sites scatter more than the fitted model expects",
        ("site_scatter", False): "The sites scatter less than the fitted model expects",
        ("models_together", True): "The models lie farther apart as a whole than the fitted model expects",
        ("models_together", False): "The models lie closer together as a whole than the fitted model expects",
        ("models_at_sites", True): "The models differ more from site to site than the fitted model expects",
        ("models_at_sites", False): "The models differ less from site to site than the fitted model expects",
    }
    if _odd(checks):
        return [f"{said[check['name'], check['p'] < 0.5]} (p = {check['p']:.3f})." for check in _odd(checks)]
    if not checks:
        return ["One site and one model at most: the network cannot show whether its scatter is as expected."]
    values = ", ".join(f"{check['meaning']} p = {check['p']:.2f}" for check in checks)
    return [f"The scatter of the site phasors is what the fitted model expects: {values}."]
