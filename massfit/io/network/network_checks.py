"""Rules that bind several keys of a network file, or a key and the data behind it."""

from collections.abc import Iterable, Sequence

import numpy as np
from numpy.typing import NDArray

from massfit.constants import JULIAN_YEAR_DAYS
from massfit.fingerprint.ocean import land_fault
from massfit.io.network.locate import KeyPath
from massfit.io.network.reading import Reading, did_you_mean, nearest
from massfit.io.network.schema import SiteEntry
from massfit.io.network.sections import Sections, shown
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.record_checks import check_values
from massfit.network import TWICE, ReducedSite, reduced_faults
from massfit.records.record import Record
from massfit.settings import Corrections, Fingerprint, Frame
from massfit.site import LEAST_NETWORK_DAYS, LEAST_SITE_DAYS, Site

_MOST_SEARCHES = 50  # faults after which no nearest ocean is looked up, which takes its time
_SHORT_YEARS = 1.5  # below it the drift and the annual cycle of one record hardly part
_DAY = np.timedelta64(1, "D")


def check_choices(reading: Reading, sections: Sections) -> None:
    """Note every contradiction between keys.

    Parameters
    ----------
    reading : Reading
        Receives the faults.
    sections : Sections
    """
    frame, corrections = sections.settings["network"], sections.settings["corrections"]
    fingerprint = sections.settings["fingerprint"]
    if frame is not None:
        _check_window(reading, frame)
    if corrections is not None:
        _check_atmosphere(reading, corrections)
    if fingerprint is not None:
        _check_fingerprint(reading, sections, fingerprint, corrections)
    entries = [(table.path, table.entry) for table in sections.sites if table.entry is not None]
    check_unique(reading, [((*path, "id"), entry.id) for path, entry in entries])
    check_unique(reading, _model_names(sections))
    for path, entry in entries:
        _check_place(reading, path, entry)
        _check_exclusions(reading, path, entry)
    _check_deployments(reading, sections)
    _check_reduced(reading, sections)
    if corrections is not None and corrections.air_pressure is None:
        for path, model in sections.circulation:
            if model.air_pressure == "forced-excluded":
                problem = 'the value is "forced-excluded" and [corrections] has no air_pressure'
                allowed = "Such a model needs the air pressure at each site"
                reading.fault((*path, "air_pressure"), problem, allowed, "Add the file of surface air pressure")


def check_unique(reading: Reading, named: Iterable[tuple[KeyPath, str]]) -> None:
    """Note every name that stands twice, with the line where it stood first."""
    first: dict[str, KeyPath] = {}
    for path, name in named:
        if name in first:
            line = reading.lines.get(first[name])
            place = "" if line is None else f" (first on line {line})"
            reading.fault(path, f'"{name}" stands twice{place}', "Must be unique", "Rename or remove one")
        first.setdefault(name, path)


def check_coverage(
    reading: Reading, path: KeyPath, site: Site, records: Sequence[Record], frame: Frame
) -> tuple[tuple[Record, ...], set[int]]:
    """Count the days with data that the window and the exclusions leave at a site.

    Parameters
    ----------
    reading : Reading
        Receives a fault when there are none, and for values that cannot be; a warning when they
        are under 1.5 years, and for a record that lies wholly outside.
    path : tuple
        Where the site stands in the file.
    site : Site
    records : sequence of Record
        All records of the site.
    frame : Frame
        Window.

    Returns
    -------
    used : tuple of Record
        Records with data that are used.
    days : set of int
        Days with data, counted from 1970.
    """
    inside = {record.deployment: _inside(record, site, frame) for record in records}
    found = {record.deployment: _days(record, inside[record.deployment]) for record in records}
    used = tuple(record for record in records if found[record.deployment])
    days = set().union(*found.values())
    if not days:
        action = 'Widen the window, or leave the site out with exclude = "reason"'
        reading.fault(path, "the window and the exclusions leave no data", "Must be some", action)
        return used, days
    for record in records:
        if found[record.deployment]:
            number = int(record.deployment.rpartition("/")[2])
            check_values(reading, (*path, "deployment", number - 1), site, record, inside[record.deployment])
        else:
            reading.warnings.append(f"{record.deployment} has no data inside the window and is not used.")
    if len(days) < LEAST_SITE_DAYS:
        reading.warnings.append(
            f"Site {site.id} has {len(days)} days of data and is left out: a site needs {LEAST_SITE_DAYS}. "
            "Add records of it."
        )
    elif len(days) < _SHORT_YEARS * JULIAN_YEAR_DAYS:
        reading.warnings.append(
            f"Site {site.id} has {len(days)} days of data ({len(days) / JULIAN_YEAR_DAYS:.2f} years): drift and "
            f"annual cycle part only beyond about {_SHORT_YEARS} years, so its uncertainty is wide. "
            "A longer record narrows it."
        )
    return used, days


def check_length(reading: Reading, days: int) -> None:
    """Refuse a network that has data on fewer than 180 days."""
    if days < LEAST_NETWORK_DAYS:
        problem = f"the network has data on {days} days after window and exclusions"
        action = "Add records or widen the window"
        reading.fault(("network",), problem, f"An annual cycle needs at least {LEAST_NETWORK_DAYS}", action)


def _inside(record: Record, site: Site, frame: Frame) -> NDArray[np.bool_]:
    """Find the valid samples in the window and outside the exclusions."""
    keep = np.isfinite(record.pressure) & ~np.isnat(record.time)
    if frame.start is not None:
        keep &= record.time >= np.datetime64(frame.start, "ns")
    if frame.end is not None:
        keep &= record.time < np.datetime64(frame.end, "ns") + _DAY
    for interval in site.exclude:
        keep &= (record.time < interval.start) | (record.time > interval.end)
    return keep


def _days(record: Record, used: NDArray[np.bool_]) -> set[int]:
    return set(np.unique(record.time[used].astype("datetime64[D]").astype(np.int64)).tolist())


def _check_window(reading: Reading, frame: Frame) -> None:
    if frame.start is not None and frame.end is not None and frame.start > frame.end:
        problem = f"the window starts on {frame.start} and ends on {frame.end}"
        reading.fault(("network", "start"), problem, "Must start before it ends", "Exchange the two")


def _check_atmosphere(reading: Reading, corrections: Corrections) -> None:
    path, removed = ("corrections",), corrections.ocean_mean_atmosphere == "already-removed"
    if not corrections.ocean_mean_atmosphere and corrections.air_pressure is None:
        reading.fault(
            (*path, "ocean_mean_atmosphere"),
            "nothing is said about the ocean-mean air pressure",
            'Must be a file or "already-removed" (or air_pressure instead)',
            "State it: left in, it moves the peak by weeks",
        )
    for key in ("ocean_mean_atmosphere", "atmosphere_load"):
        if corrections.air_pressure is not None and getattr(corrections, key) is not None:
            problem = f"both air_pressure and {key} are given"
            reading.fault((*path, key), problem, "air_pressure stands for both of the others", f"Drop {key} or it")
    if removed and corrections.atmosphere_load is not None and corrections.ocean_mean_phasor_hpa is None:
        problem = "atmosphere_load is given and the ocean-mean air pressure is already removed"
        allowed = "The pull of the air needs the annual phasor of its ocean mean"
        reading.fault(
            (*path, "atmosphere_load"), problem, allowed, "Add ocean_mean_phasor_hpa = [in phase, quadrature]"
        )
    if not removed and corrections.ocean_mean_phasor_hpa is not None:
        problem = "the phasor of the ocean-mean air pressure is given beside a file of it"
        allowed = 'Belongs to ocean_mean_atmosphere = "already-removed" only'
        reading.fault((*path, "ocean_mean_phasor_hpa"), problem, allowed, "Remove it")


def _check_fingerprint(
    reading: Reading, sections: Sections, fingerprint: Fingerprint, corrections: Corrections | None
) -> None:
    path: KeyPath = ("fingerprint", "loads")
    check_unique(reading, [((*path, position), text) for position, text in enumerate(fingerprint.loads)])
    if not fingerprint.rotational_feedback:
        return
    if corrections is not None and corrections.pole_tide == "observed":
        reading.fault(("fingerprint", "rotational_feedback"), 'the value is true and pole_tide is "observed"', *TWICE)
    reduced = [table.entry.id for table in sections.sites if table.reduced_elsewhere and table.entry is not None]
    if reduced:
        problem = f"the value is true and site {reduced[0]} was reduced elsewhere, with the pole tide taken off"
        reading.fault(("fingerprint", "rotational_feedback"), problem, *TWICE)


def _check_place(reading: Reading, path: KeyPath, entry: SiteEntry) -> None:
    search = len(reading.faults) < _MOST_SEARCHES
    fault = land_fault(reading.source, entry.id, entry.latitude, entry.longitude, search=search)
    if fault is not None:
        reading.fault((*path, "latitude"), fault.problem, fault.allowed, fault.action)


def _check_exclusions(reading: Reading, path: KeyPath, entry: SiteEntry) -> None:
    for position, interval in enumerate(entry.site().exclude):
        if interval.start > interval.end:
            shown = [np.datetime_as_string(instant, unit="s") for instant in (interval.start, interval.end)]
            problem = f"the interval runs from {shown[0]} to {shown[1]}"
            reading.fault((*path, "exclude", position), problem, "Must start before it ends", "Exchange the two")


def _check_deployments(reading: Reading, sections: Sections) -> None:
    """One record must not count as two."""
    first: dict[tuple[str, str | None, str | None], KeyPath] = {}
    for table in sections.sites:
        for path, entry in table.deployments:
            record = (reading.relative(entry.file), entry.station, entry.variable)
            if record in first:
                place = reading.lines.get((*first[record], "file"))
                problem = f'"{entry.file}" is the record of another deployment too (line {place})'
                action = "Correct the file, or state the station or variable of each"
                reading.fault((*path, "file"), problem, "Must be used once", action)
            first.setdefault(record, path)
            _check_ramps(reading, path, entry)


def _check_ramps(reading: Reading, path: KeyPath, entry: DeploymentFile) -> None:
    for position, (start, end) in enumerate(ramp.span() for ramp in entry.ramps):
        if start >= end:
            shown = [np.datetime_as_string(instant, unit="s") for instant in (start, end)]
            problem = f"the ramp runs from {shown[0]} to {shown[1]}"
            action = "Exchange the two, or declare a step with `steps`"
            reading.fault((*path, "ramps", position), problem, "Must start before it ends", action)


def _check_reduced(reading: Reading, sections: Sections) -> None:
    """Note what cannot be in the sites that were reduced elsewhere."""
    tables = reading.document.get("circulation", [])
    # where a model's own table has a fault its name may be wrong there, not at the site
    models = [name for _, name in _model_names(sections)]
    named = isinstance(tables, list) and len(tables) == len(models)
    for table in sections.sites:
        reduced = None if table.entry is None else table.entry.reduced()
        if table.entry is not None and reduced is not None:
            _check_phasor(reading, table.path, table.entry, reduced)
            if named:
                path = (*table.path, _keys(table.entry)["models"])
                _check_known(reading, path, reduced.models, models)


def _model_names(sections: Sections) -> list[tuple[KeyPath, str]]:
    """Every model with its place, in the order of the file."""
    names: list[tuple[KeyPath, str]] = [((*path, "name"), entry.name) for path, entry in sections.circulation]
    names += [((*path, "name"), entry.name) for path, entry in sections.named_models]
    return sorted(names)


def _check_known(reading: Reading, path: KeyPath, models: Sequence[str], known: Sequence[str]) -> None:
    for model in dict.fromkeys(models):
        if model not in known:
            action = did_you_mean(nearest(model, known), "")
            problem = f'the network has no model "{model}"'
            reading.fault(path, problem, "Must be the name of a [[circulation]]", action)


def _check_phasor(reading: Reading, path: KeyPath, entry: SiteEntry, reduced: ReducedSite) -> None:
    by_name = isinstance(entry.phasor_hpa, dict)
    if by_name and entry.subtracted is not None and set(entry.subtracted) != set(reduced.models):
        problem = f"the models are {shown(entry.subtracted)}, those of phasor_hpa {shown(reduced.models)}"
        reading.fault((*path, "subtracted"), problem, "Must be the same", "Remove it")
    for fault in reduced_faults(reduced, reduced.models):
        key = _keys(entry)[fault.name]
        problem = fault.problem if fault.name == "models" else f"the value is {shown(getattr(entry, key))}"
        reading.fault((*path, key), problem, fault.allowed, fault.action)


def _keys(entry: SiteEntry) -> dict[str, str]:
    """Keys of the network file behind the fields of a site that was reduced elsewhere."""
    return {
        "phasor": "phasor_hpa",
        "covariance": "phasor_covariance_hpa2",
        "model_noise": "model_noise_hpa2",
        "years": "years",
        "models": "phasor_hpa" if isinstance(entry.phasor_hpa, dict) else "subtracted",
    }
