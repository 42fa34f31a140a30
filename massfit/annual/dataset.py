"""Site phasors as one Dataset, as the network stage receives them."""

from collections.abc import Sequence

import numpy as np
import xarray as xr

from massfit.annual.fit import SiteFit
from massfit.contracts import SITE_PHASORS
from massfit.errors import Fault, InputError
from massfit.phasor import COMPONENTS

NO_MODEL = "none"
"""Name on the model axis of a phasor from which no model was subtracted."""


def site_phasors(fits: Sequence[SiteFit], *, models: Sequence[str], reference_year: int) -> xr.Dataset:
    """Join the fits of all sites.

    Parameters
    ----------
    fits : sequence of SiteFit
    models : sequence of str
        All circulation models of the network. "none" is appended when some site has no
        model subtracted.
    reference_year : int

    Returns
    -------
    xarray.Dataset
        As declared in `contracts.SITE_PHASORS`; besides, `effective_sample_size` (site).

    Raises
    ------
    InputError
        Repeated sites, or a fit with a model that the network does not have.
    """
    _check(fits, models)
    axis = [*models, NO_MODEL] if any(not fit.models for fit in fits) else list(models)
    shape = (len(fits), max((len(fit.weight) for fit in fits), default=1))
    phasor = np.full((*shape, len(axis), 2), np.nan)
    weight = np.zeros(shape)
    covariance = np.zeros((*shape, 2, 2))
    for row, fit in enumerate(fits):
        used = len(fit.weight)
        # parts that a site does not need repeat its first with no weight
        source = np.where(np.arange(shape[1]) < used, np.arange(shape[1]), 0)
        columns = [axis.index(name) for name in fit.models or (NO_MODEL,)]
        phasor[row][:, columns] = fit.phasor[source]
        covariance[row] = fit.covariance[source]
        weight[row, :used] = fit.weight
    values = {
        "phasor": phasor,
        "weight": weight,
        "covariance": covariance,
        "model_noise": np.array([fit.model_noise for fit in fits]).reshape(-1, 2, 2),
        "reduced_sd": np.array([fit.reduced_sd for fit in fits]),
        "days": np.array([fit.days for fit in fits], float),
    }
    variables = {
        name: (SITE_PHASORS.variables[name].dims, array, {"units": SITE_PHASORS.variables[name].units})
        for name, array in values.items()
    }
    sizes = np.array([fit.effective_sample_size for fit in fits])
    return xr.Dataset(
        {**variables, "effective_sample_size": (("site",), sizes, {"units": "1"})},
        coords={
            "site": [fit.site for fit in fits],
            "model": axis,
            "component": list(COMPONENTS),
            "component2": list(COMPONENTS),
        },
        attrs={"reference_year": reference_year},
    )


def _check(fits: Sequence[SiteFit], models: Sequence[str]) -> None:
    names = [fit.site for fit in fits]
    faults = [
        Fault(name, "site", "two fits are of this site", "One fit per site")
        for name in sorted({name for name in names if names.count(name) > 1})
    ]
    faults += [
        Fault(fit.site, model, "the network has no such model", f"Must be one of {list(models)}")
        for fit in fits
        for model in fit.models
        if model not in models
    ]
    if NO_MODEL in models:
        faults.append(Fault("models", NO_MODEL, "this name is kept for sites without a model", action="Rename it"))
    if faults:
        raise InputError(faults)
