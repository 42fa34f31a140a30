"""What a finished run holds, handed from the pipeline to files and figures."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.fit import SiteFit
from massfit.network import Network
from massfit.posterior.result import Posterior
from massfit.records.record import DailyRecord
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
    """

    site: Site
    daily: tuple[DailyRecord, ...]
    corrections: xr.Dataset
    used: NDArray[np.bool_]
    fit: SiteFit


@dataclass(frozen=True)
class Estimate:
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
    """

    network: Network
    fingerprints: xr.Dataset
    reductions: tuple[SiteReduction, ...]
    site_phasors: xr.Dataset
    posterior: Posterior
    summary: Mapping[str, Any]
    provenance: Mapping[str, Any]
