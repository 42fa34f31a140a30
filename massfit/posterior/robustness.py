"""How far one wrong site pulls the answer, under normal and under Student site scatter."""

from collections.abc import Callable, Iterable, Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from massfit.constants import PASCAL_PER_HPA
from massfit.phasor import admittance_matrix, as_complex
from massfit.posterior.network_model import Choices, network_model
from massfit.posterior.observations import read_observations
from massfit.posterior.result import Posterior
from massfit.posterior.shares import site_shares
from massfit.posterior.what_if import Variant, variant_answer

OFFSETS_HPA = (0.0, 0.5, 1.0, 1.5, 2.0, 3.0, 5.0)
"""How far the site is moved."""

SCATTERS = ("normal", "student-t")


def weightiest_site(given: Variant, posterior: Posterior) -> str:
    """Name the site that makes the largest share of the answer.

    Parameters
    ----------
    given : massfit.posterior.what_if.Variant
        What the answer was drawn from.
    posterior : Posterior
        The answer.

    Returns
    -------
    str
    """
    observations, admittance = read_observations(given.phasors, given.fingerprints)
    choices = Choices(given.settings, given.priors, given.atmosphere_sd_hpa)
    model = network_model(observations, admittance, choices, mixed=posterior.mixed)
    return observations.sites[int(np.argmax(site_shares(model, posterior.second_route)))]


def moved_site(
    given: Variant,
    site: str,
    *,
    offsets_hpa: Sequence[float] = OFFSETS_HPA,
    mapped: Callable[[Callable[[Any], Any], Sequence[Any]], Iterable[Any]] = map,
) -> dict[str, Any]:
    """Answer the network again as one of its sites is moved farther and farther off.

    Parameters
    ----------
    given : massfit.posterior.what_if.Variant
        What the answer was drawn from; the mean of its load members serves as fingerprint.
    site : str
        The phasor of this site grows by each offset in the direction of its own response to the answer, at all models.
    offsets_hpa : sequence of float
        From 0 upwards, hPa.
    mapped : callable
        Applies a function to each of a sequence and gives the results in order.

    Returns
    -------
    dict
        `site`, `offset_hpa`; and for each of "normal" and "student-t" `shift_hpa`, how far the mean of the answer moved
        from where it is without an offset, and `sd_hpa`, the root mean square of its two standard deviations.
    """
    mean = given.fingerprints["admittance"].mean("member", keepdims=True, keep_attrs=True)
    prints = given.fingerprints.isel(member=[0]).assign(admittance=(mean.dims, mean.values, mean.attrs))
    start = variant_answer(replace(given, fingerprints=prints))
    place = [str(name) for name in given.phasors["site"].values].index(site)
    own = as_complex(prints["admittance"].sel(site=site).values[0])
    response = admittance_matrix(own) @ np.array(start["mean_hpa"])
    direction = response / np.hypot(*response)
    variants = []
    for scatter in SCATTERS:
        for offset in offsets_hpa:
            phasors = given.phasors.copy(deep=True)
            phasors["phasor"].values[place] += PASCAL_PER_HPA * offset * direction
            settings = replace(given.settings, site_scatter=scatter)  # type: ignore[arg-type]
            variants.append(replace(given, phasors=phasors, fingerprints=prints, settings=settings))
    answers = list(mapped(variant_answer, variants))
    count = len(offsets_hpa)
    found = {scatter: answers[k * count : (k + 1) * count] for k, scatter in enumerate(SCATTERS)}
    return {
        "site": site,
        "offset_hpa": [float(offset) for offset in offsets_hpa],
        **{scatter: _moved(own_answers) for scatter, own_answers in found.items()},
    }


def _moved(answers: Sequence[dict[str, Any]]) -> dict[str, list[float]]:
    means = np.array([answer["mean_hpa"] for answer in answers])
    widths = np.array([answer["sd_hpa"] for answer in answers])
    return {
        "shift_hpa": np.hypot(*(means - means[0]).T).tolist(),
        "sd_hpa": np.sqrt((widths**2).mean(axis=1)).tolist(),
    }
