"""What a run would use, gathered without computing: no sea-level equation, no fit."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import JULIAN_YEAR_DAYS
from massfit.corrections.circulation import CirculationAtSites, circulation_at_sites
from massfit.corrections.series import daily_values_at
from massfit.corrections.site import site_corrections
from massfit.errors import Fault, InputError, collect
from massfit.fingerprint.ocean import OceanFunction
from massfit.gravity.inputs import gravity_sentence
from massfit.io.gravity.read_gravity import read_gravity
from massfit.io.network.network_file import read_what_can_be
from massfit.network import Network, ReducedSite, Series
from massfit.pipeline.air import network_air
from massfit.records.clean import usable_samples
from massfit.records.interval import distinct_stamps, spoken_interval, usual_interval_ns
from massfit.records.record import Record
from massfit.results.assumptions import stated_assumptions
from massfit.site import LEAST_SITE_DAYS, Site

LONG_ENOUGH_YEARS = 1.5
"""Below it the drift and the annual cycle of one record hardly part."""

_COARSE = np.timedelta64(6, "h")  # such samples pass as they are; finer ones become daily means
_LEAST_SHARE = 0.75  # of a day
_DAY = np.timedelta64(1, "D")
_SECOND = np.timedelta64(1, "s")
_NOON = np.timedelta64(12, "h")
_NOTHING = np.array([], "datetime64[ns]")
_UNREAD = "no record of it was read: see the faults"
_NO_FOOTPRINTS = "no footprints were given"


@dataclass(frozen=True)
class Check:
    """A network that was looked at.

    Parameters
    ----------
    found : mapping
        As JSON knows it: network, sites, assumptions, warnings and faults. With faults it holds what could be read,
        without assumptions; without a network nothing could.
    faults : tuple of Fault
        Everything that stops a run.
    """

    found: Mapping[str, Any]
    faults: tuple[Fault, ...]


def check_network(path: Path, *, outside: bool = False) -> Check:
    """Read a network with every file it names and say what a run would use.

    Parameters
    ----------
    path : pathlib.Path
        A network.toml or the folder that holds one.
    outside : bool
        Allow paths outside the network's folder.

    Returns
    -------
    Check
    """
    try:
        network, faults = read_what_can_be(path, outside=outside)
    except InputError as error:
        network, faults = None, error.faults
    if network is None:
        return Check({"source": str(path), "sites": [], "faults": _plain(faults)}, faults)
    satellites, told = _satellites(path, outside)
    faults = tuple(dict.fromkeys((*faults, *told)))
    whole = look_at(network)
    whole.found["assumptions"].extend(satellites)
    return _in_part(whole, faults) if faults else whole


def _satellites(path: Path, outside: bool) -> tuple[list[str], tuple[Fault, ...]]:
    """Say what the comparison with satellite gravity would use."""
    try:
        gravity = read_gravity(path, outside=outside)
    except InputError as error:
        return [], error.faults
    return [] if gravity is None else [gravity_sentence(gravity)], ()


def _in_part(check: Check, faults: tuple[Fault, ...]) -> Check:
    """Show what could be read beside the faults of reading; what will be assumed is not known yet."""
    told = [fault.name for fault in faults]
    further = (fault for fault in check.faults if not any(name.endswith(fault.name) for name in told))
    faults = (*faults, *further)
    return Check({**check.found, "assumptions": [], "faults": _plain(faults)}, faults)


def look_at(network: Network) -> Check:
    """Say what a run of a network would use.

    Parameters
    ----------
    network : Network

    Returns
    -------
    Check

    Examples
    --------
    >>> from massfit.simulate.network import simulate_network
    >>> from massfit.simulate.options import SimulationOptions
    >>> invented = simulate_network(SimulationOptions(sites=2, years=2, sampling="daily"), seed=1)
    >>> check = look_at(invented.network)
    >>> len(check.found["sites"]), check.faults
    (2, ())
    """
    faults: list[Fault] = []
    ocean = OceanFunction.builtin()
    air: Series | None = None
    with collect(faults):
        air = network_air(network, ocean).ocean_mean
    used = [site for site in network.sites if site.excluded_because is None]
    models: list[CirculationAtSites] = []
    for model in network.circulation if used else ():
        with collect(faults):
            models.append(circulation_at_sites(model, used, ocean=ocean, air_pressure=network.air_pressure))
    sites = [_site(network, site, ocean, air, models, faults) for site in network.sites]
    frame = network.settings.frame
    notes = [note for model in models for note in model.notes if _NO_FOOTPRINTS not in note]
    found = {
        "network": frame.name,
        "source": network.source,
        "reference_year": frame.reference_year,
        "window": [None if day is None else day.isoformat() for day in (frame.start, frame.end)],
        "sites": sites,
        "loads": [load.name for load in network.loads],
        "assumptions": list(stated_assumptions(network)),
        "warnings": [*network.warnings, *notes],
        "faults": _plain(faults),
    }
    return Check(found, tuple(faults))


def _plain(faults: Sequence[Fault]) -> list[dict[str, Any]]:
    names = ("source", "line", "name", "problem", "allowed", "action")
    return [{name: getattr(fault, name) for name in names} for fault in faults]


def _site(
    network: Network,
    site: Site,
    ocean: OceanFunction,
    air: Series | None,
    models: Sequence[CirculationAtSites],
    faults: list[Fault],
) -> dict[str, Any]:
    records = [record for record in network.records if record.site == site.id]
    left_out = site.excluded_because is not None
    days = np.unique(np.concatenate([_NOTHING, *(_days(network, site, record) for record in records)]))
    present: dict[str, bool] = {}
    notes = _tides_left(network, records)
    if days.size and not left_out:
        with collect(faults):
            corrections = _corrections(network, site, days, air, models)
            present = dict(zip(corrections["model"].values.tolist(), corrections["present"].values == 1, strict=True))
            notes += [note for note in str(corrections.attrs["notes"]).split("\n") if note]
    reduced = next((each for each in network.reduced if each.site == site.id), None)
    return {
        "id": site.id,
        "latitude": site.latitude_deg,
        "longitude": site.longitude_deg,
        "depth_m": site.depth_m,
        "group": site.group,
        "ocean_fraction": float(ocean.fraction_at(site.latitude_deg, site.longitude_deg)),
        "left_out": site.excluded_because or _unusable(days, records, reduced),
        "reduced_elsewhere": None if reduced is None else _reduced(reduced),
        "days": int(days.size),
        "years": round(days.size / JULIAN_YEAR_DAYS, 2),
        "long_enough": bool(days.size >= LONG_ENOUGH_YEARS * JULIAN_YEAR_DAYS),
        "months": _months(days, records),
        "deployments": [_deployment(record) for record in records],
        "models": [] if left_out else [_model(model, site, days, present) for model in models],
        "notes": notes,
    }


def _unusable(days: NDArray[np.datetime64], records: Sequence[Record], reduced: ReducedSite | None) -> str | None:
    if reduced is not None or days.size >= LEAST_SITE_DAYS:
        return None
    if not records:
        return _UNREAD
    return f"{days.size} days that are well covered; a site needs {LEAST_SITE_DAYS}"


def _tides_left(network: Network, records: Sequence[Record]) -> list[str]:
    if network.settings.corrections.tides != "remove":
        return []
    spaced = ((record.deployment, _spacing(record.time)) for record in records)
    return [
        f"{name}: its samples are {spoken_interval(spacing / _SECOND)} apart, so short tides cannot be taken off here: "
        "they must be out of it already"
        for name, spacing in spaced
        if spacing >= _COARSE
    ]


def _spacing(time: NDArray[np.datetime64]) -> np.timedelta64:
    stamps = distinct_stamps(time)
    return np.timedelta64(round(usual_interval_ns(stamps)) if stamps.size > 1 else 0, "ns")


def _reduced(reduced: ReducedSite) -> dict[str, Any]:
    return {"years": list(reduced.years), "subtracted": list(reduced.models)}


def _days(network: Network, site: Site, record: Record) -> NDArray[np.datetime64]:
    """Find the times of the daily values of a record: its own where coarse, else the noons of days well covered."""
    frame = network.settings.frame
    time, _, _ = usable_samples(record.time, record.pressure, exclude=site.exclude, start=frame.start, end=frame.end)
    if time.size < 2:
        return time
    spacing = _spacing(time)
    if spacing >= _COARSE:
        return time
    days, counts = np.unique(time.astype("datetime64[D]"), return_counts=True)
    enough = counts * (spacing / _DAY) >= _LEAST_SHARE
    return np.asarray(days[enough].astype("datetime64[ns]") + _NOON)


def _corrections(
    network: Network, site: Site, days: NDArray[np.datetime64], air: Series | None, models: Sequence[CirculationAtSites]
) -> xr.Dataset:
    """Correct as a run does, but for the response of the ocean to tides and to the pole, which takes computing."""
    zero = {
        name: ("site", [0.0], {"units": units})
        for name, units in (("zonal", "Pa m-1"), ("wobble_m1", "Pa rad-1"), ("wobble_m2", "Pa rad-1"))
    }
    attrs = {"long_period_tides": "none", "pole_tide": network.settings.corrections.pole_tide}
    responses = xr.Dataset(zero, {"site": [site.id]}, attrs)
    return site_corrections(site, days, responses=responses, atmosphere=air, circulation=models)


def _months(days: NDArray[np.datetime64], records: Sequence[Record]) -> dict[str, list[float | None]]:
    """Share of the days of each month that is used; None where there is not even raw data."""
    raw = [record.time[np.isfinite(record.pressure) & ~np.isnat(record.time)] for record in records]
    stamps = np.concatenate([_NOTHING, *raw])
    if not stamps.size:
        return {}
    known = np.unique(stamps.astype("datetime64[M]"))
    used, counts = np.unique(np.unique(days.astype("datetime64[D]")).astype("datetime64[M]"), return_counts=True)
    share = dict(zip(used.tolist(), counts.tolist(), strict=True))
    first, last = known[0].astype("datetime64[Y]"), known[-1].astype("datetime64[Y]")
    table: dict[str, list[float | None]] = {}
    for year in np.arange(first, last + 1):
        months = np.arange(year.astype("datetime64[M]"), (year + 1).astype("datetime64[M]"))
        lengths = np.diff(np.append(months, months[-1] + 1).astype("datetime64[D]")).astype(int)
        table[str(year)] = [
            round(share.get(month, 0) / int(length), 3) if month in known.tolist() else None
            for month, length in zip(months.tolist(), lengths, strict=True)
        ]
    return table


def _deployment(record: Record) -> dict[str, Any]:
    valid = np.isfinite(record.pressure) & ~np.isnat(record.time)
    time = distinct_stamps(record.time[valid])
    spacing = _spacing(time)
    return {
        "label": record.deployment,
        "file": record.source,
        "units": record.units,
        "start": _shown(time[0]) if time.size else None,
        "end": _shown(time[-1]) if time.size else None,
        "sampling_s": float(spacing / _SECOND) if time.size > 1 else None,
        "samples": int(valid.size),
        "missing": int(np.count_nonzero(~valid)),
        "median_hpa": round(record.reference / 100.0, 3),
        "drift": record.drift,
        "calibrations": 0 if record.calibrations is None else len(record.calibrations.time),
        "ramps": [[_shown(start), _shown(end)] for start, end in record.ramps],
        "settling": record.settling,
        "steps": [_shown(step) for step in record.steps] or ("find" if record.find_steps else "none"),
        "notes": [f"{action.what}: {action.count}, {action.detail}" for action in record.actions],
    }


def _model(
    model: CirculationAtSites, site: Site, days: NDArray[np.datetime64], present: Mapping[str, bool]
) -> dict[str, Any]:
    values = model.at(site.id)
    known = model.time[np.isfinite(values)]
    covered = np.isfinite(daily_values_at(model.time, values, days)).mean() if days.size and known.size > 1 else 0.0
    return {
        "name": model.name,
        "present": bool(present.get(model.name, False)),
        "start": _shown(known[0]) if known.size else None,
        "end": _shown(known[-1]) if known.size else None,
        "covered": round(float(covered), 3),
    }


def _shown(instant: np.datetime64) -> str:
    return str(instant.astype("datetime64[s]"))


def refuse(check: Check) -> None:
    """Raise what stops a run.

    Parameters
    ----------
    check : Check

    Raises
    ------
    InputError
        There is a fault.
    """
    if check.faults:
        raise InputError(check.faults)
