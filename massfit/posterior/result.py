"""The network posterior as it is handed on."""

from dataclasses import dataclass

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.display import Described, Description, counted
from massfit.phasor import COMPONENTS
from massfit.posterior.convergence import Convergence
from massfit.posterior.explore import walkers_of_member
from massfit.posterior.importance import ScalePosterior
from massfit.posterior.regression import SCALES
from massfit.settings import PosteriorSettings, Priors


@dataclass(frozen=True, repr=False)
class Posterior(Described):
    """Draws of the annual phasor of ocean mass, and whether they can be trusted.

    Parameters
    ----------
    annual : (n_chain, n_draw, 2) array
        Pa, in phase and quadrature, all load members pooled in equal numbers; the
        members' means stand apart by their inflated spread.
    member_of_draw : (n_draw,) array of int
        Load member of each pooled draw.
    member_annual : (n_member, n_chain, n_member_draw, 2) array
        Pa, the members' own draws.
    scales : (n_member, n_chain, n_member_draw, n_scale) array
        Pa: s_site, s_local, s_common, and s_group where sites share scatter.
    year_annual : (n_chain, n_draw, n_year, 2) array
        Pa, the annual phasor of each year, drawn together with `annual`.
    years : tuple of int
        Empty where the model holds no year-to-year term.
    members, sites, models : tuple of str
        Names of the load members, the sites and the columns of ocean models.
    convergence : Convergence
        Worst over the members.
    member_convergence : tuple of Convergence
    second_route : tuple of ScalePosterior
        Importance-weighted nodes of each member.
    settings : PosteriorSettings
    priors : Priors
    atmosphere_sd_hpa : float
    mixed : tuple of str
        Sites that entered by their mixture.
    warnings : tuple of str
        What a reader of the answer has to know.
    method : tuple of str
        How the answer was computed.
    """

    annual: NDArray[np.float64]
    member_of_draw: NDArray[np.int64]
    member_annual: NDArray[np.float64]
    scales: NDArray[np.float64]
    year_annual: NDArray[np.float64]
    years: tuple[int, ...]
    members: tuple[str, ...]
    sites: tuple[str, ...]
    models: tuple[str, ...]
    convergence: Convergence
    member_convergence: tuple[Convergence, ...]
    second_route: tuple[ScalePosterior, ...]
    settings: PosteriorSettings
    priors: Priors
    atmosphere_sd_hpa: float
    mixed: tuple[str, ...]
    warnings: tuple[str, ...]
    method: tuple[str, ...]

    def describe(self) -> Description:
        """Phasor with its width, and whether the draws can be trusted."""
        draws = self.draws / PASCAL_PER_HPA
        low, median, high = np.quantile(np.hypot(draws[:, 0], draws[:, 1]), [0.025, 0.5, 0.975])
        parts = zip(draws.mean(axis=0), draws.std(axis=0), strict=True)
        in_phase, quadrature = (f"{value:.3f} (sd {sd:.3f}) hPa" for value, sd in parts)
        network = (counted(len(self.sites), "site"), counted(len(self.models), "model column"))
        return "Posterior of the annual phasor of ocean mass", {
            "amplitude": f"{median:.3f} hPa (95 %: {low:.3f} to {high:.3f})",
            "in phase": in_phase,
            "quadrature": quadrature,
            "from": ", ".join([*network, counted(len(self.members), "load member")]),
            "draws": f"{len(draws)}, {'converged' if self.converged else 'NOT CONVERGED: do not use'}",
        }

    @property
    def seed(self) -> int:
        """Seed of every random number."""
        return self.settings.seed

    @property
    def converged(self) -> bool:
        """Whether every member met every threshold."""
        return self.convergence.converged

    @property
    def draws(self) -> NDArray[np.float64]:
        """(n, 2), Pa, the pooled draws of all chains."""
        return self.annual.reshape(-1, 2)

    def to_dataset(self) -> xr.Dataset:
        """Draws and diagnostics as a Dataset.

        Returns
        -------
        xarray.Dataset
            `annual_phasor` (chain, draw, component) and `member_of_draw` (draw,) pooled;
            `member_annual_phasor` (member, chain, member_draw, component) and `scale`
            (member, chain, member_draw, scale_name); `year_phasor` (chain, draw, year, component) where the model
            holds a year-to-year term; all in Pa.
        """
        per_member = ("member", "chain", "member_draw")
        of_year = {"units": "Pa", "long_name": "annual phasor of ocean-mean water pressure of one year"}
        years = {"year_phasor": (("chain", "draw", "year", "component"), self.year_annual, of_year)}
        return xr.Dataset(
            {
                **(years if self.years else {}),
                "annual_phasor": (
                    ("chain", "draw", "component"),
                    self.annual,
                    {"units": "Pa", "long_name": "annual phasor of ocean-mean water pressure, load members pooled"},
                ),
                "member_of_draw": (("draw",), self.member_of_draw, {"units": "1", "long_name": "load member, from 0"}),
                "member_annual_phasor": (
                    (*per_member, "component"),
                    self.member_annual,
                    {"units": "Pa", "long_name": "annual phasor of ocean-mean water pressure, one load member"},
                ),
                "scale": (
                    (*per_member, "scale_name"),
                    self.scales,
                    {"units": "Pa", "long_name": "standard deviations of the network model"},
                ),
            },
            coords={
                "component": list(COMPONENTS),
                "member": list(self.members),
                "scale_name": list(SCALES[: self.scales.shape[-1]]),
                "site": list(self.sites),
                "model": list(self.models),
                **({"year": list(self.years)} if self.years else {}),
            },
            attrs={
                "seed": self.seed,
                "load_members": len(self.members),
                "walkers": walkers_of_member(len(self.members)),
                "converged": int(self.converged),
                "rhat_max": self.convergence.rhat_max,
                "ess_bulk_min": self.convergence.ess_bulk_min,
                "ess_tail_min": self.convergence.ess_tail_min,
                "second_route_mean_shift_sd": self.convergence.second_route_mean_shift_sd,
                "second_route_sd_ratio": self.convergence.second_route_sd_ratio,
                "method": "; ".join(self.method),
                "warnings": "; ".join(self.warnings),
            },
        )
