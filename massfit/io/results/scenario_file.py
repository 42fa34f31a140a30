"""Read a scenario that the bench of the page saved."""

import json
from pathlib import Path
from typing import Any

from massfit.errors import Fault, InputError
from massfit.posterior.scenario import Scenario

_LISTS = ("without_sites", "without_models", "without_members")
_NUMBERS = {"truth": (0.0, 10.0), "model_common_hpa": (0.01, 10.0)}


def read_scenario(path: Path, *, network: str, chosen: Scenario) -> Scenario:
    """Read a scenario.

    Parameters
    ----------
    path : Path
        JSON with any of `network`, `without_sites`, `without_models`, `without_members`, `truth` (r) and
        `model_common_hpa` (scale of the prior of s_common).
    network : str
        Name of the network that it must be of, where it says so.
    chosen : Scenario
        What holds where the file says nothing.

    Returns
    -------
    Scenario

    Raises
    ------
    InputError
        Every fault of the file.
    """
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise InputError(Fault(str(path), "", f"the file cannot be read ({error.strerror})")) from error
    except ValueError as error:
        problem, action = "the file is no JSON", "Save the scenario from the page"
        raise InputError(Fault(str(path), "", problem, "", action)) from error
    if not isinstance(content, dict):
        raise InputError(Fault(str(path), "", "the file holds no table of names", "Must be a JSON object"))
    faults = _faults(str(path), content, network)
    if faults:
        raise InputError(faults)
    lists: dict[str, Any] = {name: frozenset(content.get(name, [])) for name in _LISTS}
    numbers: dict[str, Any] = {name: float(content.get(name, getattr(chosen, name))) for name in _NUMBERS}
    return Scenario(**lists, **numbers)


def _faults(source: str, content: dict[str, Any], network: str) -> list[Fault]:
    known = ("network", *_LISTS, *_NUMBERS)
    faults = [
        Fault(source, name, "the key is unknown", f"Known: {', '.join(known)}") for name in content if name not in known
    ]
    if content.get("network", network) != network:
        problem = f"the scenario is of the network {content['network']!r}, the results are of {network!r}"
        faults.append(Fault(source, "network", problem, "", "Name the results that the scenario was made from"))
    for name in _LISTS:
        value = content.get(name, [])
        if not isinstance(value, list) or not all(isinstance(item, str) for item in value):
            faults.append(Fault(source, name, f"the value is {value!r}", "Must be a list of names"))
    for name, (low, high) in _NUMBERS.items():
        value = content.get(name, low)
        if isinstance(value, bool) or not isinstance(value, int | float) or not low <= value <= high:
            faults.append(Fault(source, name, f"the value is {value!r}", f"Must be within [{low:g}, {high:g}]"))
    return faults
