"""The analyst's data, each with what the network states of it."""

import numpy as np

from massfit.corrections.series import COARSE_STEP_DAYS
from massfit.network import Network


def stated_data(network: Network) -> list[dict[str, str]]:
    """List the data behind a run, with the references that the network states.

    Parameters
    ----------
    network : Network

    Returns
    -------
    list of dict
        Each with `what` kind it is, its `name` and its `reference`, empty where none is stated. Sites, and load
        members, of one reference stand together.
    """
    settings, used = network.settings, [site for site in network.sites if site.excluded_because is None]
    elsewhere = {reduced.site for reduced in network.reduced}
    entries = []
    for what, sites in (
        ("records", [site for site in used if site.id not in elsewhere]),
        ("sites reduced elsewhere", [site for site in used if site.id in elsewhere]),
    ):
        entries += _together(what, [(site.id, site.reference) for site in sites])
    for model in network.circulation:
        entries.append(_entry("ocean model", model.name, model.reference))
    entries += [_entry("ocean model, subtracted elsewhere", name, "") for name in network.models_elsewhere]
    entries += _together("annual loads", [(load.name, load.reference) for load in network.loads])
    if network.earth is not None:
        entries.append(_entry("Earth profile", network.earth.name, network.earth.reference))
    air = settings.corrections.ocean_mean_atmosphere
    if network.air_pressure is not None or network.ocean_mean_atmosphere is not None:
        name = settings.corrections.air_pressure if network.air_pressure is not None else air
        entries.append(_entry("air pressure", str(name or "given in memory"), ""))
    return entries


def series_of_means(network: Network) -> list[str]:
    """Name the series that hold means over more than a day, between which values are interpolated.

    Parameters
    ----------
    network : Network

    Returns
    -------
    list of str
    """
    times = {model.name: model.pressure["time"].values for model in network.circulation}
    times |= {model.ocean_mean.name: model.ocean_mean.time for model in network.circulation if model.ocean_mean}
    if network.ocean_mean_atmosphere is not None:
        times[network.ocean_mean_atmosphere.name] = network.ocean_mean_atmosphere.time
    if network.air_pressure is not None:
        times["air pressure"] = network.air_pressure["time"].values
    longest = COARSE_STEP_DAYS * np.timedelta64(86_400_000_000_000, "ns")
    return [name for name, time in times.items() if len(time) > 1 and np.median(np.diff(time)) > longest]


def _together(what: str, named: list[tuple[str, str]]) -> list[dict[str, str]]:
    groups: dict[str, list[str]] = {}
    for name, reference in named:
        groups.setdefault(reference, []).append(name)
    return [_entry(what, ", ".join(names), reference) for reference, names in groups.items()]


def _entry(what: str, name: str, reference: str) -> dict[str, str]:
    return {"what": what, "name": name, "reference": reference}
