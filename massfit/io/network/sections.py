"""From the parsed network file to entries and settings, with every fault of form."""

import json
from collections.abc import Iterator
from dataclasses import dataclass, fields
from datetime import date, datetime, time
from typing import Any, TypeVar

from pydantic import TypeAdapter, ValidationError
from pydantic_core import ErrorDetails

from massfit.io.network.locate import KeyPath
from massfit.io.network.reading import Reading, did_you_mean, nearest
from massfit.io.network.schema import ALREADY_REDUCED, SECTIONS, SETTINGS, CirculationEntry, NamedModelEntry, SiteEntry
from massfit.io.records.deployment import DeploymentFile
from massfit.settings import Gravity

_T = TypeVar("_T")

_ALLOWED = {
    "string_type": "text in quotes",
    "string_too_short": "not empty",
    "int_type": "a whole number",
    "float_type": "a number",
    "bool_type": "true or false",
    "tuple_type": "a list",
    "dict_type": "a table",
    "too_short": "a longer list",
    "too_long": "a shorter list",
    "dataclass_type": "a table",
    "date_type": "a date such as 2016-03-01",
    "date_parsing": "a date such as 2016-03-01",
    "date_from_datetime_parsing": "a date such as 2016-03-01",
    "datetime_type": "a UTC time such as 2016-03-01T00:00:00Z",
    "datetime_parsing": "a UTC time such as 2016-03-01T00:00:00Z",
    "string_pattern_mismatch": 'a month and a day, "07-15"',
}
"""What is allowed, by kind of error, where the validator's own words are not plain."""

_MISSING = {
    "ocean_mean": (
        'Must be "removed" or the file of the model\'s own whole-ocean mean',
        "State it: a mean that is left in holds part of the answer",
    ),
    "air_pressure": (
        'Must be "not-forced", "forced-included" or "forced-excluded"',
        "State whether air pressure drives the model and its load is in the bottom pressure",
    ),
    "reference_year": ("Must be a year", "State the year from whose 1 January phases count"),
    "reason": ("Must be text", "Say why the interval is left out; every output repeats it"),
}

_OF_REDUCED = {
    "phasor_hpa": ("Must be [in phase, quadrature], or a table of them by model", "Add it"),
    "phasor_covariance_hpa2": ("Must be [[a, c], [c, b]]", "Add it"),
    "years": ("Must be the first and the last year of the record", "Add it"),
    "subtracted": ("Must be the names of the models whose mean was subtracted", "Add it; [] where none was"),
}
"""What is allowed, and what to do, where a site that was reduced elsewhere lacks a key."""


@dataclass(frozen=True)
class SiteTable:
    """One `[[site]]`: where it stands, its entry, its deployments, whether all of those are well formed.

    A site that was reduced elsewhere has none.
    """

    path: KeyPath
    entry: SiteEntry | None
    deployments: tuple[tuple[KeyPath, DeploymentFile], ...]
    complete: bool
    reduced_elsewhere: bool


@dataclass(frozen=True)
class Sections:
    """Everything of a network file that is well formed; the rest is among the faults."""

    settings: dict[str, Any]
    sites: tuple[SiteTable, ...]
    circulation: tuple[tuple[KeyPath, CirculationEntry], ...]
    named_models: tuple[tuple[KeyPath, NamedModelEntry], ...]
    gravity: Gravity | None


def parse_sections(reading: Reading, *, records: bool = True) -> Sections:
    """Validate every table on its own, so that one fault does not hide another.

    Parameters
    ----------
    reading : Reading
        Receives the faults.
    records : bool
        Whether a site needs a deployment or a phasor.

    Returns
    -------
    Sections
    """
    for name in reading.document.keys() - set(SECTIONS):
        _unknown_key(reading, (name,), SECTIONS)
    settings = {name: _settings(reading, name, kind) for name, kind in SETTINGS.items()}
    sites = tuple(_site(reading, path, table, records) for path, table in _tables(reading, reading.document, ("site",)))
    if not sites and not reading.document.get("site"):
        reading.fault(("site",), "the network has no site", "Must be at least one", "Add a [[site]]")
    circulation: list[tuple[KeyPath, CirculationEntry]] = []
    named_models: list[tuple[KeyPath, NamedModelEntry]] = []
    for path, table in _tables(reading, reading.document, ("circulation",)):
        if "subtracted_elsewhere" in table:
            _append(named_models, path, parse_table(reading, NamedModelEntry, table, path))
        else:
            _append(circulation, path, parse_table(reading, CirculationEntry, table, path))
    return Sections(settings, sites, tuple(circulation), tuple(named_models), _gravity(reading))


def _append(entries: list[tuple[KeyPath, _T]], path: KeyPath, entry: _T | None) -> None:
    if entry is not None:
        entries.append((path, entry))


def parse_table(reading: Reading, kind: type[_T], table: dict[str, Any], path: KeyPath) -> _T | None:
    """Build one entry or section from a table; None when it has faults.

    JSON is the road because the validator's strict mode takes its lists as tuples and
    its dates as text, and nothing else: a quoted number is not a number.
    """
    try:
        return TypeAdapter(kind).validate_json(json.dumps(table, default=_iso), strict=True)
    except ValidationError as error:
        _note_errors(reading, kind, table, path, error.errors(include_url=False))
        return None


def shown(value: object) -> str:
    """Write a value as the network file would, shortened."""
    text = json.dumps(value, default=_iso, ensure_ascii=False).replace("Infinity", "inf")
    return text if len(text) <= 60 else text[:57] + "..."


def _settings(reading: Reading, name: str, kind: type[_T]) -> _T | None:
    table = reading.document.get(name, {})
    if not isinstance(table, dict):
        reading.fault((name,), f"the value is {shown(table)}", f"Must be one table, [{name}]")
        return None
    return parse_table(reading, kind, table, (name,))


def _tables(reading: Reading, parent: dict[str, Any], path: KeyPath) -> Iterator[tuple[KeyPath, dict[str, Any]]]:
    tables = parent.get(str(path[-1]), [])
    header = ".".join(part for part in path if isinstance(part, str))
    if not isinstance(tables, list) or not all(isinstance(table, dict) for table in tables):
        action = f"Write [[{header}]]" if isinstance(tables, dict) else ""
        reading.fault(path, f"the value is {shown(tables)}", f"Must be a list of tables, [[{header}]]", action)
        return
    for position, table in enumerate(tables):
        yield (*path, position), table


def _site(reading: Reading, path: KeyPath, table: dict[str, Any], records: bool) -> SiteTable:
    own = {key: value for key, value in table.items() if key != "deployment"}
    entry = parse_table(reading, SiteEntry, own, path)
    deployments = [
        (place, parse_table(reading, DeploymentFile, _deployment(fields), place))
        for place, fields in _tables(reading, table, (*path, "deployment"))
    ]
    reduced = [key for key in ALREADY_REDUCED if key in table]
    if reduced:
        _reduced_elsewhere(reading, path, table, reduced[0])
    elif records and not table.get("deployment"):
        reading.fault(path, "the site has no deployment", "Must be at least one", "Add a [[site.deployment]]")
    made = tuple((place, one) for place, one in deployments if one is not None)
    complete = bool(made) and len(made) == len(deployments)
    return SiteTable(path, entry, made, complete, reduced_elsewhere=bool(reduced))


def _reduced_elsewhere(reading: Reading, path: KeyPath, table: dict[str, Any], first: str) -> None:
    """Note what a site that was reduced elsewhere lacks, and what it has too much."""
    needed = ["phasor_hpa", "phasor_covariance_hpa2", "years"]
    if not isinstance(table.get("phasor_hpa"), dict):
        needed.append("subtracted")
    for key in needed:
        if key not in table:
            problem = f"the key is missing beside {first}"
            reading.fault((*path, key), problem, *_OF_REDUCED[key])
    if table.get("deployment"):
        problem = f"the site has a deployment and {first}, of a site that was reduced elsewhere"
        reading.fault((*path, first), problem, "Must be one of the two", "Remove one")
    if isinstance(table.get("exclude"), list):
        problem = "intervals are left out of a site that was reduced elsewhere"
        reading.fault((*path, "exclude"), problem, "Must be a reason, for the whole site", "Remove it")


def _deployment(table: dict[str, Any]) -> dict[str, Any]:
    """Write out the shorthands of a deployment: one missing value, dates for instants."""
    out = dict(table)
    missing, steps = out.get("missing"), out.get("steps")
    if isinstance(missing, int | float) and not isinstance(missing, bool):
        out["missing"] = [missing]
    if isinstance(steps, list):
        out["steps"] = [_instant(step) for step in steps]
    if "start_time" in out:
        out["start_time"] = _instant(out["start_time"])
    return out


def _instant(value: Any) -> Any:
    """Write out a date as its first instant."""
    return datetime.combine(value, time()) if type(value) is date else value


def _gravity(reading: Reading) -> Gravity | None:
    table = reading.document.get("gravity")
    if table is None:
        return None
    if not isinstance(table, dict):
        reading.fault(("gravity",), f"the value is {shown(table)}", "Must be one table, [gravity]")
        return None
    one = isinstance(table.get("fields"), str)
    return parse_table(reading, Gravity, table | {"fields": [table["fields"]]} if one else table, ("gravity",))


def _note_errors(
    reading: Reading, kind: type, table: dict[str, Any], path: KeyPath, errors: list[ErrorDetails]
) -> None:
    by_place: dict[KeyPath, list[ErrorDetails]] = {}
    unknown = [_place(table, error) for error in errors if error["type"] == "unexpected_keyword_argument"]
    for error in errors:
        place = _place(table, error)
        siblings = [str(other[-1]) for other in unknown if other[:-1] == place[:-1]]
        # a key that is missing because it is misspelled is one fault, not two
        if error["type"] != "missing" or nearest(str(place[-1]), siblings) is None:
            by_place.setdefault(place, []).append(error)
    for place, found in by_place.items():
        # a value that fits no member of a union fails once a member: the deepest failure is the meant one
        if not any(other != place and other[: len(place)] == place for other in by_place):
            _note(reading, kind, (*path, *place), found)


def _place(table: dict[str, Any], error: ErrorDetails) -> KeyPath:
    """Path of an error inside the table, without the validator's labels of union members."""
    value: Any = table
    place: list[str | int] = []
    for part in error["loc"]:
        inside = part in value if isinstance(value, dict) else isinstance(value, list) and isinstance(part, int)
        if inside:
            value = value[part]
            place.append(part)
    if error["type"] == "missing":
        place.append(error["loc"][-1])
    return tuple(place)


def _note(reading: Reading, kind: type, path: KeyPath, errors: list[ErrorDetails]) -> None:
    first, key = errors[0], str(path[-1])
    if first["type"] == "unexpected_keyword_argument":
        _unknown_key(reading, path, _known_keys(kind, path))
    elif first["type"] == "missing":
        allowed, action = _MISSING.get(key, ("", "Add it"))
        reading.fault(path, "the key is missing", allowed, action)
    else:
        choices = dict.fromkeys(_allowed(error) for error in errors)
        reading.fault(path, f"the value is {shown(first['input'])}", "Must be " + ", or ".join(choices))


def _allowed(error: ErrorDetails) -> str:
    return _ALLOWED.get(error["type"], error["msg"].removeprefix("Input should be "))


def _known_keys(kind: type, path: KeyPath) -> list[str]:
    if kind is SiteEntry and "exclude" in path:
        return ["from", "to", "reason"]
    if kind is DeploymentFile and "ramps" in path:
        return ["from", "to"]
    names = [item.name for item in fields(kind)]
    if kind is CirculationEntry:
        return [*names, "subtracted_elsewhere"]
    return [*names, "deployment"] if kind is SiteEntry else names


def _unknown_key(reading: Reading, path: KeyPath, known: tuple[str, ...] | list[str]) -> None:
    key = str(path[-1])
    action = did_you_mean(nearest(key, known), "Remove it")
    reading.fault(path, f'unknown key "{key}"', "Known keys are " + ", ".join(known), action)


def _iso(value: object) -> str:
    return value.isoformat() if isinstance(value, date | time) else str(value)
