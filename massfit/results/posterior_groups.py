"""The posterior in the groups and with the leading axes (chain, draw) that ArviZ reads."""

from collections.abc import Hashable
from typing import Any

import numpy as np
import xarray as xr

from massfit.posterior.result import Posterior

POSTERIOR = "posterior.nc/posterior"
"""The group of the draws, as it is named among the Datasets of a run."""

_OBSERVED = ("phasor", "reduced_sd", "days")


def posterior_groups(posterior: Posterior, site_phasors: xr.Dataset, fingerprints: xr.Dataset) -> dict[str, xr.Dataset]:
    """Draws, what they were drawn from, and what was known beforehand.

    Parameters
    ----------
    posterior : Posterior
    site_phasors, fingerprints : xarray.Dataset
        What it was drawn from.

    Returns
    -------
    dict of str to xarray.Dataset
        `posterior`: `annual_phasor` (chain, draw, component), the answer; `member_annual_phasor`, the same draws
        before the spread of the load members was inflated; and every scale by its name, (chain, draw); all in Pa.
        The load members alternate from draw to draw, so that halves of a chain hold the same mixture.
        `sample_stats`: `load_member` (chain, draw), from 0. `observed_data`: the phasors of the sites.
        `constant_data`: their covariances and weights, and the fingerprints.
    """
    drawn = posterior.to_dataset()
    members = drawn.sizes["member"]
    pooled: dict[str, tuple[tuple[Hashable, ...], Any, Any]] = {}
    for name, variable in drawn.data_vars.items():
        if "member_draw" in variable.dims:
            rest = [dim for dim in variable.dims if dim not in ("member", "chain", "member_draw")]
            turned = variable.transpose("chain", "member_draw", "member", *rest)
            values = turned.values.reshape(turned.shape[0], -1, *turned.shape[3:])
            pooled[str(name)] = (("chain", "draw", *rest), values, variable.attrs)
        elif "draw" in variable.dims:
            # the members stand one after the other in the draws: deal them out in turn
            order = np.arange(drawn.sizes["draw"]).reshape(members, -1).T.ravel()
            dealt = variable.isel(draw=order)
            pooled[str(name)] = (dealt.dims, dealt.values, variable.attrs)
        else:
            pooled[str(name)] = (variable.dims, variable.values, variable.attrs)
    member = np.tile(pooled.pop("member_of_draw")[1], (drawn.sizes["chain"], 1))
    coordinates = {name: drawn[name] for name in drawn.coords if set(drawn[name].dims) <= {"component", "year"}}
    variables = xr.Dataset(pooled, {**coordinates, **_numbered(member.shape)}, drawn.attrs)
    scale_names = [str(name) for name in drawn["scale_name"].values]
    scales = {name: variables["scale"][..., k].assign_attrs(units="Pa") for k, name in enumerate(scale_names)}
    words = {"units": "1", "long_name": "load member, from 0", "members": ", ".join(posterior.members)}
    phasors = site_phasors.transpose("site", ...)
    return {
        "posterior": variables.drop_vars("scale").assign(scales),
        "sample_stats": xr.Dataset({"load_member": (("chain", "draw"), member, words)}, _numbered(member.shape)),
        "observed_data": phasors[[name for name in _OBSERVED if name in phasors]],
        "constant_data": xr.merge(
            [phasors.drop_vars(list(_OBSERVED)), fingerprints.sel(site=phasors["site"].values)],
            combine_attrs="drop_conflicts",
        ),
    }


def _numbered(shape: tuple[int, ...]) -> dict[str, np.ndarray]:
    return {name: np.arange(size) for name, size in zip(("chain", "draw"), shape, strict=True)}
