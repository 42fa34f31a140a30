"""Write a network as the folder that `read_network` reads."""

import json
import re
import shutil
import tempfile
from collections.abc import Iterable, Mapping
from dataclasses import replace
from pathlib import Path, PurePosixPath
from typing import Any

from massfit.errors import Fault, InputError
from massfit.fingerprint.pattern import LoadPattern
from massfit.gravity.inputs import GravityInputs
from massfit.io.fields.earth_file import write_earth_profile
from massfit.io.fields.write_fields import (
    TEXT_MISSING,
    text_columns,
    write_air_pressure,
    write_atmosphere_load,
    write_calibrations,
    write_circulation,
    write_loads,
    write_record,
    write_series,
)
from massfit.io.gravity.write_gravity import write_gravity
from massfit.io.network.network_text import calibration_file, circulation_table, deployment_table, network_text
from massfit.network import Network
from massfit.records.record import Record
from massfit.settings import PREM, Settings

_SUFFIXES = (".nc", ".txt")


def check_empty(folder: Path) -> None:
    """Refuse a folder that holds anything.

    Parameters
    ----------
    folder : pathlib.Path

    Raises
    ------
    InputError
        It exists and is not an empty folder.
    """
    if folder.exists() and not folder.is_dir():
        raise InputError(Fault(str(folder), "", "it is a file", "Must be a folder", "Choose a new or an empty folder"))
    if folder.exists() and any(folder.iterdir()):
        raise InputError(Fault(str(folder), "", "the folder is not empty", "", "Choose a new or an empty folder"))


def write_network(
    network: Network,
    folder: Path,
    *,
    truth: Mapping[str, Any] | None = None,
    readme: str | None = None,
    gravity: GravityInputs | None = None,
) -> None:
    """Write network.toml and every file it names.

    The folder is made aside and moved into place, so that it is whole or not there. Records keep the file
    name in `source` where that lies in records/; names that end with .txt become text (to a tenth of a
    pascal like the rest), all others NetCDF.

    Parameters
    ----------
    network : Network
        Built-in load patterns are written like any other member.
    folder : pathlib.Path
        Must not exist or be empty.
    truth : mapping, optional
        Written to truth.json.
    readme : str, optional
        Written to README.md.
    gravity : GravityInputs, optional
        Written under the names of its own settings, which must be those of the network.

    Raises
    ------
    InputError
        The folder is not empty.
    """
    check_empty(folder)
    folder.parent.mkdir(parents=True, exist_ok=True)
    partial = Path(tempfile.mkdtemp(prefix=f".{folder.name}-partial-", dir=folder.parent))
    try:
        for name in ("records", "fields"):
            (partial / name).mkdir()
        settings, models = _write_fields(network, partial), _write_models(network, partial)
        sites = _write_records(network, partial)
        text = network_text(settings, sites, models, network.reduced, network.models_elsewhere)
        (partial / "network.toml").write_text(text, encoding="utf-8")
        if gravity is not None:
            write_gravity(gravity, partial)
        if truth is not None:
            (partial / "truth.json").write_text(json.dumps(truth, indent=2) + "\n", encoding="utf-8")
        if readme is not None:
            (partial / "README.md").write_text(readme, encoding="utf-8")
        partial.chmod(0o755)
        partial.rename(folder)
    finally:
        shutil.rmtree(partial, ignore_errors=True)


def _write_records(network: Network, folder: Path) -> list[tuple[Any, list[Mapping[str, Any]]]]:
    files = _record_files(network.records)
    sites = []
    for site in network.sites:
        tables = []
        for record, file in zip(network.records, files, strict=True):
            if record.site != site.id:
                continue
            (folder / file).parent.mkdir(parents=True, exist_ok=True)
            write_record(folder / file, record, site, title=network.settings.frame.name)
            if record.calibrations is not None:
                write_calibrations(folder / calibration_file(file), record.calibrations)
            tables.append(deployment_table(record, file, text=_text_keys(record, file)))
        sites.append((site, tables))
    return sites


def _text_keys(record: Record, file: str) -> dict[str, Any]:
    if not file.endswith(".txt"):
        return {}
    return {"units": "dbar", "columns": text_columns(record), "missing": [TEXT_MISSING]}


def _record_files(records: Iterable[Record]) -> list[str]:
    """Choose the file of each record: its own where that lies in records/, under a name not yet taken."""
    files: list[str] = []
    for record in records:
        own = PurePosixPath(record.source)
        inside = own.parts[:1] == ("records",) and ".." not in own.parts and own.suffix in _SUFFIXES
        name = str(own) if inside else f"records/{_slug(record.deployment)}.nc"
        files.append(_unlike(name, files))
    return files


def _write_models(network: Network, folder: Path) -> list[Mapping[str, Any]]:
    tables: list[Mapping[str, Any]] = []
    files: list[str] = []
    for model in network.circulation:
        files.append(_unlike(f"fields/{_slug(model.name)}.nc", files))
        write_circulation(folder / files[-1], model)
        mean = "removed"
        if model.ocean_mean is not None:
            mean = files[-1].replace(".nc", "_ocean_mean.csv")
            write_series(folder / mean, model.ocean_mean)
        tables.append(circulation_table(model, files[-1], mean))
    return tables


def _write_fields(network: Network, folder: Path) -> Settings:
    """Write loads, air and Earth profile, and name their files in the settings."""
    air: dict[str, str] = {}
    if network.ocean_mean_atmosphere is not None:
        air["ocean_mean_atmosphere"] = "fields/ocean_mean_atmosphere.csv"
        write_series(folder / air["ocean_mean_atmosphere"], network.ocean_mean_atmosphere)
    if network.atmosphere_load is not None:
        air["atmosphere_load"] = "fields/atmosphere_load.nc"
        write_atmosphere_load(folder / air["atmosphere_load"], network.atmosphere_load)
    if network.air_pressure is not None:
        air["air_pressure"] = "fields/air_pressure.nc"
        write_air_pressure(folder / air["air_pressure"], network.air_pressure)
    loads: list[str] = []
    for members in _by_grid(network.loads):
        loads.append(_unlike("fields/loads.nc", loads))
        write_loads(folder / loads[-1], members)
    earth_model = PREM if network.earth is None else "fields/earth.csv"
    if network.earth is not None:
        write_earth_profile(folder / earth_model, network.earth)
    return replace(
        network.settings,
        corrections=replace(network.settings.corrections, **air),  # type: ignore[arg-type]
        fingerprint=replace(network.settings.fingerprint, loads=tuple(loads), earth_model=earth_model),
    )


def _by_grid(members: Iterable[LoadPattern]) -> list[list[LoadPattern]]:
    grids: dict[tuple[bytes, bytes], list[LoadPattern]] = {}
    for member in members:
        grids.setdefault((member.latitude_deg.tobytes(), member.longitude_deg.tobytes()), []).append(member)
    return list(grids.values())


def _unlike(name: str, taken: Iterable[str]) -> str:
    stem, suffix = name.rsplit(".", 1)
    number, free = 1, name
    while free in taken:
        number += 1
        free = f"{stem}_{number}.{suffix}"
    return free


def _slug(name: str) -> str:
    return re.sub(r"[^a-z0-9]+", "_", name.lower()).strip("_") or "unnamed"
