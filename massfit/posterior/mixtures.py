"""Which sites enter the network by their mixture and not by one Gaussian."""

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.importance import Proposal, integrate_scales
from massfit.posterior.network_model import Choices, network_model, scale_priors
from massfit.posterior.observations import Observations
from massfit.posterior.regression import with_parts
from massfit.posterior.sites import mixture_effect

MIXTURE_LIMIT = 0.02
"""Largest effect on the network mean (in standard deviations) and standard deviation that one Gaussian may have."""


def sites_by_mixture(
    observations: Observations, admittance: NDArray[np.complex128], choices: Choices, *, start: Proposal | None = None
) -> tuple[str, ...]:
    """Find the sites whose single Gaussian would move the network answer by more than 2 %.

    Parameters
    ----------
    observations : Observations
    admittance : (n_member, n_site) array of complex
        The mean over the load members is used.
    choices : Choices
    start : Proposal, optional
        Fitted to the network at that mean with one Gaussian a site.

    Returns
    -------
    tuple of str
        Each is tried alone, the others and the scales at their posterior.
    """
    several = np.flatnonzero((observations.weight > 0).sum(axis=1) > 1).tolist()
    if not several:
        return ()
    mean = admittance.mean(axis=0)[None]
    model = network_model(observations, mean, choices)
    rng = np.random.default_rng(choices.settings.seed)
    route = integrate_scales(model, scale_priors(choices.priors, model.scale_count), rng=rng, draws=500, start=start)
    point = replace(
        model.at((route.weight @ route.log_scales)[None]), stretch=np.exp(route.weight @ np.log(route.stretch))[None]
    )
    mixed = network_model(observations, mean, choices, mixed=[observations.sites[s] for s in several])
    effects = {s: mixture_effect(model, with_parts(model, mixed, s), point, s) for s in several}
    return tuple(
        observations.sites[s]
        for s, effect in effects.items()
        if max(abs(effect.shift_sd), abs(effect.sd_ratio - 1.0)) > MIXTURE_LIMIT
    )
