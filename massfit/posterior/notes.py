"""What a reader of the answer has to know about the network and the model, in words."""

import numpy as np
import xarray as xr

from massfit.annual.dataset import NO_MODEL
from massfit.display import counted
from massfit.posterior.explore import ENSEMBLES
from massfit.posterior.observations import Observations
from massfit.posterior.regression import LinearModel
from massfit.posterior.sharing import SAME_PLACE_KM, UNMODELLED_KM
from massfit.settings import PosteriorSettings, Priors


def method_notes(model: LinearModel, settings: PosteriorSettings, mixed: tuple[str, ...]) -> tuple[str, ...]:
    """Say how the answer was computed.

    Parameters
    ----------
    model : LinearModel
    settings : PosteriorSettings
    mixed : tuple of str
        Sites that enter by their mixture.

    Returns
    -------
    tuple of str
    """
    scatter = "Student site scatter (4 degrees of freedom)" if model.student else "normal site scatter"
    shared = "no scatter shared between sites"
    if model.sharing.has_group:
        shared = "scatter shared within groups"
        if not isinstance(settings.group_scatter, bool):
            shared = f"scatter shared over {settings.group_scatter:g} km"
    count = len(model.sharing.period_share)
    years = f"cycles of {counted(count, 'year')}" if count else "no year-to-year term"
    return (
        f"{scatter}, {shared}, {years}",
        f"scales of all load members by emcee, {ENSEMBLES} independent ensembles; network phasor drawn exactly",
        "second route: importance-weighted nodes over the scales",
        *([f"by their mixture: {', '.join(mixed)}"] if mixed else []),
    )


def network_warnings(
    observations: Observations,
    model: LinearModel,
    members: tuple[str, ...],
    priors: Priors,
    fingerprints: xr.Dataset,
) -> list[str]:
    """Say what the network lacks.

    Parameters
    ----------
    observations : Observations
    model : LinearModel
    members : tuple of str
        Load members.
    priors : Priors
    fingerprints : xarray.Dataset

    Returns
    -------
    list of str
    """
    real = [name for name in observations.models if name != NO_MODEL]
    without = [
        site
        for site, there in zip(observations.sites, observations.present, strict=True)
        if not any(here and name != NO_MODEL for name, here in zip(observations.models, there, strict=True))
    ]
    return [
        text
        for applies, text in (
            (
                len(members) == 1,
                "One load member: the uncertainty of the fingerprint is taken as zero. Give more "
                "patterns in [fingerprint] loads.",
            ),
            (
                len(real) < 2,
                f"{'One ocean model' if real else 'No ocean model'}: the spread between models is assumed from its "
                "prior, not seen. Give two or more.",
            ),
            (
                len(real) > 1 and not observations.has_contrasts.any(),
                "No site says how two ocean models differ: their local spread is assumed from its prior, not seen.",
            ),
            (len(observations.sites) == 1, "One site: its scatter is assumed from its prior, not seen."),
            (
                bool(without),
                f"No ocean model was subtracted at: {', '.join(without)}. The annual cycle of the circulation there is "
                f"taken as unknown, {priors.unmodelled_annual_hpa:g} hPa in phase and in quadrature (1 sd), alike "
                f"over some {UNMODELLED_KM:.0f} km. Give an ocean model.",
            ),
            *((True, text) for text in _same_places(observations, model)),
            (
                "air_load_response" not in fingerprints,
                "The gravitational effect of the air over land was not taken off (no atmosphere load was given). "
                "Give [corrections] atmosphere_load or air_pressure.",
            ),
        )
        if applies
    ]


def _same_places(observations: Observations, model: LinearModel) -> list[str]:
    return [
        f"{' and '.join(observations.sites[s] for s in np.flatnonzero(model.sharing.place == place))} lie within "
        f"{SAME_PLACE_KM:.0f} km: they see the same ocean and share one scatter. Where their records overlap, give "
        "them as deployments of one site."
        for place in model.columns.shared_place
    ]
