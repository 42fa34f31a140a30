"""Read a network file and every file it names."""

import os
from dataclasses import fields
from typing import Any

from massfit.errors import Fault, InputError
from massfit.io.fields.circulation_file import read_circulation
from massfit.io.fields.field_file import read_air_pressure, read_atmosphere_load
from massfit.io.fields.fingerprint_inputs import read_network_earth, read_network_loads
from massfit.io.network.locate import KeyPath
from massfit.io.network.network_checks import check_choices, check_coverage, check_length
from massfit.io.network.reading import Reading, open_reading
from massfit.io.network.schema import CirculationEntry
from massfit.io.network.sections import Sections, SiteTable, parse_sections
from massfit.io.records.record_file import read_record
from massfit.io.records.series_file import read_series
from massfit.network import CirculationModel, Network, ReducedSite, Series
from massfit.records.record import Record
from massfit.settings import Corrections, Settings


def read_network(path: str | os.PathLike[str], *, outside: bool = False) -> Network:
    """Read a network file, validate it and read every file it names.

    Parameters
    ----------
    path : path
        A network.toml, or the folder that holds one.
    outside : bool
        Whether its paths may leave its folder. No address is ever opened.

    Returns
    -------
    Network
        Records as they are: window and exclusions are applied when they are reduced. The
        files of a site that is left out as a whole are not opened.

    Raises
    ------
    InputError
        With every fault that was found, in the order of the file; a syntax error is
        reported alone.

    Examples
    --------
    A network of one site, whose phasor was made elsewhere:

    >>> import pathlib, tempfile
    >>> text = '''
    ... network = { name = "One site", reference_year = 2016 }
    ... corrections = { ocean_mean_atmosphere = "already-removed" }
    ... [[site]]
    ... id = "A3"
    ... latitude = -11.25
    ... longitude = 205.5
    ... phasor_hpa = [0.12, 0.81]
    ... phasor_covariance_hpa2 = [[0.01, 0.0], [0.0, 0.01]]
    ... years = [2014, 2018]
    ... subtracted = []
    ... '''
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     _ = pathlib.Path(folder, "network.toml").write_text(text)
    ...     network = read_network(folder)
    >>> network.sites[0].id, (network.reduced[0].phasor / 100.0).round(2).tolist()
    ('A3', [0.12, 0.81])
    """
    network, faults = read_what_can_be(path, outside=outside)
    if faults or network is None:
        raise InputError(faults)
    return network


def read_what_can_be(
    path: str | os.PathLike[str], *, outside: bool = False
) -> tuple[Network | None, tuple[Fault, ...]]:
    """Read as much of a network as has no fault, to be shown beside the faults and not to be used.

    Parameters
    ----------
    path, outside
        As for :func:`read_network`.

    Returns
    -------
    network : Network or None
        Without the records, models and fields that have a fault; None where a section has one.
    faults : tuple of Fault
        All of them; the network is whole where there is none.

    Raises
    ------
    InputError
        The file is not there, or its syntax is wrong.
    """
    reading = open_reading(path, outside=outside)
    sections = parse_sections(reading)
    check_choices(reading, sections)
    sites = {table.path: table.entry.site() for table in sections.sites if table.entry is not None}
    records = _records(reading, sections)
    corrections = sections.settings["corrections"]
    loads = read_network_loads(reading, sections.settings["network"], sections.settings["fingerprint"])
    earth = read_network_earth(reading, sections.settings["fingerprint"])
    circulation = _circulation(reading, sections, {site.id for site in sites.values()})
    air = _air(reading, corrections) if corrections is not None else {}
    faults = tuple(_in_order(reading))
    if any(section is None for section in sections.settings.values()):
        return None, faults
    network = Network(
        settings=_settings(sections),
        sites=tuple(sites.values()),
        records=records,
        loads=loads,
        circulation=circulation,
        reduced=_reduced(sections),
        earth=earth,
        models_elsewhere=tuple(entry.name for _, entry in sections.named_models),
        source=reading.source,
        inputs=reading.inputs,
        warnings=tuple(reading.warnings),
        **air,
    )
    return network, faults


def read_sites_and_loads(path: str | os.PathLike[str], *, outside: bool = False) -> Network:
    """Read what the fingerprint of a network needs: settings, sites and loads, no record and no ocean model.

    Parameters
    ----------
    path, outside
        As for :func:`read_network`.

    Returns
    -------
    Network
        Without records and models, which need not be there. Air pressure on land is read where its files are
        there; a warning says so where they are not.

    Raises
    ------
    InputError
        With every fault of the network file and of the files of loads and air pressure.
    """
    reading = open_reading(path, outside=outside)
    sections = parse_sections(reading, records=False)
    check_choices(reading, sections)
    corrections = sections.settings["corrections"]
    loads = read_network_loads(reading, sections.settings["network"], sections.settings["fingerprint"])
    earth = read_network_earth(reading, sections.settings["fingerprint"])
    air = _air_over_land(reading, corrections) if corrections is not None else {}
    if reading.faults:
        raise InputError(_in_order(reading))
    return Network(
        settings=_settings(sections),
        sites=tuple(table.entry.site() for table in sections.sites if table.entry is not None),
        records=(),
        loads=loads,
        earth=earth,
        source=reading.source,
        inputs=reading.inputs,
        warnings=tuple(reading.warnings),
        **air,
    )


def _settings(sections: Sections) -> Settings:
    own = {"frame" if name == "network" else name: value for name, value in sections.settings.items()}
    own["gravity"] = sections.gravity
    return Settings(**{field.name: own[field.name] for field in fields(Settings)})


def _records(reading: Reading, sections: Sections) -> tuple[Record, ...]:
    """Read the records of the sites that are used; days are counted only where nothing failed to be read."""
    frame = sections.settings["network"]
    records: list[Record] = []
    days: set[int] = set()
    if frame is not None and frame.start is not None and frame.end is not None and frame.start > frame.end:
        frame = None  # a fault already; no days can be counted
    all_read = frame is not None
    for table in sections.sites:
        site = None if table.entry is None else table.entry.site()
        if table.reduced_elsewhere or (site is not None and site.excluded_because is not None):
            continue
        own = _site_records(reading, table)
        if site is None or frame is None or own is None:
            all_read = False
            continue
        used, found = check_coverage(reading, table.path, site, own, frame)
        records += used
        days |= found
    if all_read and sections.sites and not any(table.reduced_elsewhere for table in sections.sites):
        check_length(reading, len(days))
    return tuple(records)


def _reduced(sections: Sections) -> tuple[ReducedSite, ...]:
    entries = [table.entry for table in sections.sites if table.entry is not None]
    return tuple(reduced for reduced in (entry.reduced() for entry in entries) if reduced is not None)


def _site_records(reading: Reading, table: SiteTable) -> list[Record] | None:
    """Every record of a site, or None when one could not be read."""
    site = "?" if table.entry is None else table.entry.id
    records: list[Record | None] = []
    for path, entry in table.deployments:
        label = f"{site}/{int(path[-1]) + 1}"
        found = [reading.find((*path, "file"), entry.file)]
        if entry.calibrations is not None:
            found.append(reading.find((*path, "calibrations"), entry.calibrations))
        if None in found:
            records.append(None)
        else:
            records.append(reading.attempt(read_record, reading.folder, entry, site=site, deployment=label))
    complete = [record for record in records if record is not None]
    return complete if table.complete and len(complete) == len(records) else None


def _circulation(reading: Reading, sections: Sections, sites: set[str]) -> tuple[CirculationModel, ...]:
    models = [_model(reading, path, entry, sites) for path, entry in sections.circulation]
    _check_distinct(reading, sections)
    return tuple(model for model in models if model is not None)


def _check_distinct(reading: Reading, sections: Sections) -> None:
    """One model under two names would be counted as two that agree."""
    first: dict[tuple[str, str | None], str] = {}
    for path, entry in sections.circulation:
        content = reading.inputs.get(reading.relative(entry.file))
        if content is None:
            continue
        key = (content, entry.variable)
        if key in first:
            problem = f'"{entry.file}" has the same content as the file of "{first[key]}"'
            reading.fault((*path, "file"), problem, "Must be another model", "Correct the file, or drop one of the two")
        first.setdefault(key, entry.name)


def _model(reading: Reading, path: KeyPath, entry: CirculationEntry, sites: set[str]) -> CirculationModel | None:
    mean = None
    if entry.ocean_mean != "removed":
        mean = _series(reading, (*path, "ocean_mean"), entry.ocean_mean, f"ocean mean of {entry.name}")
    file = reading.find((*path, "file"), entry.file)
    if file is None:
        return None
    return reading.attempt(read_circulation, file, entry, ocean_mean=mean, sites=sites, source=entry.file)


def _series(reading: Reading, path: KeyPath, text: str, name: str) -> Series | None:
    file = reading.find(path, text)
    return None if file is None else reading.attempt(read_series, file, name=name, source=text)


def _air(reading: Reading, corrections: Corrections) -> dict[str, Any]:
    air: dict[str, Any] = {}
    mean = corrections.ocean_mean_atmosphere
    if mean not in (None, "", "already-removed"):
        path = ("corrections", "ocean_mean_atmosphere")
        air["ocean_mean_atmosphere"] = _series(reading, path, str(mean), "ocean-mean air pressure")
    for key, reader in (("atmosphere_load", read_atmosphere_load), ("air_pressure", read_air_pressure)):
        text = getattr(corrections, key)
        if text is not None and (file := reading.find(("corrections", key), text)) is not None:
            air[key] = reading.attempt(reader, file, source=text)
    return air


def _air_over_land(reading: Reading, corrections: Corrections) -> dict[str, Any]:
    """Read the air pressure where its load on land is asked for and the files are there."""
    if corrections.atmosphere_load is None and corrections.air_pressure is None:
        return {}
    keys = ("ocean_mean_atmosphere", "atmosphere_load", "air_pressure")
    named = [text for text in (getattr(corrections, key) for key in keys) if text not in (None, "already-removed")]
    missing = [text for text in named if not reading.is_there(text)]
    if not missing:
        return _air(reading, corrections)
    reading.warnings.append(f"Air pressure on land is left out: there is no {', no '.join(missing)}.")
    return {}


def _in_order(reading: Reading) -> list[Fault]:
    """Faults of the network file by line, then those of the files it names."""
    return sorted(reading.faults, key=lambda fault: (fault.source != reading.source, fault.line or 0))
