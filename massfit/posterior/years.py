"""The cycle of each year, where the records allow it."""

from typing import Any

import numpy as np

from massfit.constants import PASCAL_PER_HPA
from massfit.phasor import as_complex, unwrapped_peak_days
from massfit.posterior.observations import Observations
from massfit.posterior.regions import scalar_summary
from massfit.posterior.result import Posterior


def yearly_cycles(posterior: Posterior, observations: Observations) -> list[dict[str, Any]]:
    """Summarise the annual cycle of every calendar year.

    Parameters
    ----------
    posterior : Posterior
    observations : Observations

    Returns
    -------
    list of dict
        `year`; `period_share`, its share of the stated period; `seen`, the share of what was not known beforehand of
        its difference from the mean of the period that the records tell (0: it is assumed, 1: it is known); and
        `in_phase_hpa`, `quadrature_hpa`, `amplitude_hpa`, `peak_day` as in the answer. Empty where the model holds
        no year-to-year term.
    """
    if not posterior.years:
        return []
    draws = posterior.year_annual.reshape(-1, len(posterior.years), 2)
    away = draws - posterior.draws[:, None]
    prior_sd = posterior.priors.year_sd_hpa * PASCAL_PER_HPA
    share = observations.period_share
    return [
        {
            "year": year,
            "period_share": float(share[y]),
            # variance beforehand of one of several independent years less their weighted mean
            "seen": float(
                np.clip(
                    1.0 - away[:, y].var(axis=0).mean() / (prior_sd**2 * (1.0 - 2.0 * share[y] + share @ share)),
                    0.0,
                    1.0,
                )
            ),
            "in_phase_hpa": scalar_summary(draws[:, y, 0] / PASCAL_PER_HPA),
            "quadrature_hpa": scalar_summary(draws[:, y, 1] / PASCAL_PER_HPA),
            "amplitude_hpa": scalar_summary(np.hypot(*draws[:, y].T) / PASCAL_PER_HPA),
            "peak_day": scalar_summary(unwrapped_peak_days(as_complex(draws[:, y]))),
        }
        for y, year in enumerate(posterior.years)
    ]
