"""What a finished run holds, handed from the pipeline to files and figures."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.diagnostics import SiteDiagnostics
from massfit.annual.fit import SiteFit
from massfit.corrections.phasors import CorrectionPhasor
from massfit.display import Described, Description
from massfit.network import Network
from massfit.posterior.result import Posterior
from massfit.records.record import DailyRecord
from massfit.results.answer import answer_sentence, spoken_range
from massfit.site import Site


@dataclass(frozen=True)
class SiteReduction:
    """One site from daily means to its phasor, with every series kept.

    Parameters
    ----------
    site : Site
    daily : tuple of DailyRecord
        Daily means with short tides removed, nothing else taken off.
    corrections : xarray.Dataset
        Every series that was subtracted (contracts.CORRECTIONS), on all days of the site.
    used : (n_day,) array of bool
        Days of `corrections` on which every model present has a value; the fit used these.
    fit : SiteFit
        Drift, noise and phasor.
    phasors : tuple of CorrectionPhasor
        What each correction did to the phasor.
    diagnostics : SiteDiagnostics or None
        What the fit is judged by, where that was asked for.
    """

    site: Site
    daily: tuple[DailyRecord, ...]
    corrections: xr.Dataset
    used: NDArray[np.bool_]
    fit: SiteFit
    phasors: tuple[CorrectionPhasor, ...] = ()
    diagnostics: SiteDiagnostics | None = None


@dataclass(frozen=True, repr=False)
class Estimate(Described):
    """Everything a run made: the answer, and each step towards it.

    Parameters
    ----------
    network : Network
    fingerprints : xarray.Dataset
        contracts.FINGERPRINTS.
    reductions : tuple of SiteReduction
    site_phasors : xarray.Dataset
        contracts.SITE_PHASORS.
    posterior : Posterior
    summary : mapping
        The content of `estimate.json`.
    provenance : mapping
        Versions, transform backend, thread counts and times of stages.
    calibration : xarray.Dataset, optional
        What surrogates of the network showed, where they were asked for.
    """

    network: Network
    fingerprints: xr.Dataset
    reductions: tuple[SiteReduction, ...]
    site_phasors: xr.Dataset
    posterior: Posterior
    summary: Mapping[str, Any]
    provenance: Mapping[str, Any]
    calibration: xr.Dataset | None = None

    def describe(self) -> Description:
        """Answer, and what to know before it is quoted."""
        summary = self.summary
        mass = summary["mass_gt"]
        doubtful = sum(bool(site["warnings"]) for site in summary["sites"])
        state = "yes" if summary["convergence"]["converged"] else "NO: do not use this number"
        return f"Estimate: {summary['network']}", {
            "answer": answer_sentence(summary),
            "mass": f"{mass['median']:.0f} Gt (95 %: {spoken_range(mass['region95'], '.0f')})",
            "sites": f"{len(summary['sites'])}, {doubtful} with a warning",
            "converged": state,
            "warnings": f"{len(summary['warnings'])} of the network, in .summary['warnings']",
        }
