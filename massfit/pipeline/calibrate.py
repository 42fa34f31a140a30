"""Does the answer hold for networks like this one? Surrogates with a known cycle, analysed like the records."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr

from massfit.annual.fit import SiteFit
from massfit.pipeline.parts import Mapped
from massfit.pipeline.progress import Progress
from massfit.pipeline.sites import reduce_site
from massfit.pipeline.surrogate import Surrogate, SurrogateBase, make_surrogate
from massfit.posterior.sample import sample_posterior
from massfit.results.calibration import calibration_dataset, truth_among


@dataclass(frozen=True)
class CalibrationTask:
    """One surrogate to be made and analysed.

    Parameters
    ----------
    base : SurrogateBase
    number : int
        Of the surrogate; its random stream is this number and the seed of the network.
    """

    base: SurrogateBase
    number: int


def calibrate(base: SurrogateBase, count: int, *, progress: Progress, mapped: Mapped, expected_s: float) -> xr.Dataset:
    """Analyse surrogates of a network.

    Parameters
    ----------
    base : SurrogateBase
    count : int
        Number of surrogates.
    progress : callable
    mapped : callable
        Applies a function to each of a sequence and gives the results in order.
    expected_s : float
        Time that it will take, told with the progress, s.

    Returns
    -------
    xarray.Dataset
        As :func:`massfit.results.calibration.calibration_dataset`.
    """
    tasks = [CalibrationTask(base, number) for number in range(count)]
    stage = f"calibration, about {_spoken(expected_s)}"
    progress(stage, 0, count)
    found = []
    for result in mapped(calibrate_one, tasks):
        found.append(result)
        progress(stage, len(found), count)
    return calibration_dataset(found, [each.task.site.id for each in base.sites])


def calibrate_one(task: CalibrationTask) -> dict[str, Any]:
    """Make one surrogate, fit its sites, draw its posterior and hold it against the truth.

    Parameters
    ----------
    task : CalibrationTask

    Returns
    -------
    dict
        As :func:`massfit.results.calibration.truth_among`, with `truth`, `site_square` and `converged`.
    """
    base = task.base
    surrogate = make_surrogate(base, np.random.default_rng([base.settings.seed, 7, task.number]))
    fits = [reduce_site(each).fit for each in surrogate.tasks]
    return judged(base, surrogate, fits)


def judged(base: SurrogateBase, surrogate: Surrogate, fits: Sequence[SiteFit]) -> dict[str, Any]:
    """Draw the posterior of a surrogate's fits and hold both against the truth.

    Parameters
    ----------
    base : SurrogateBase
    surrogate : Surrogate
    fits : sequence of SiteFit
        Of its sites.

    Returns
    -------
    dict
        As :func:`calibrate_one`.
    """
    posterior = sample_posterior(
        base.table.of(fits, surrogate.elsewhere),
        base.fingerprints,
        settings=base.settings,
        priors=base.priors,
        atmosphere_sd_hpa=base.atmosphere_sd_hpa,
    )
    return {
        **truth_among(posterior.draws, surrogate.annual),
        "truth": surrogate.annual,
        "site_square": np.array([_square(fit, surrogate) for fit in fits]),
        "converged": posterior.converged,
    }


def _square(fit: SiteFit, surrogate: Surrogate) -> float:
    """Squared whitened error of a site's phasor, mean over its models, per degree of freedom."""
    mean, covariance = fit.single_gaussian()
    away = mean.mean(axis=0) - surrogate.at_sites[fit.site]
    return float(0.5 * away @ np.linalg.solve(covariance, away))


def _spoken(seconds: float) -> str:
    return f"{seconds:.0f} s" if seconds < 90.0 else f"{seconds / 60.0:.0f} min"
