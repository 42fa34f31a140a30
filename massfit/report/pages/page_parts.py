"""What every page holds: pictures, and what it was made with."""

import base64
import json
from collections.abc import Mapping
from typing import Any


def as_data(pictures: Mapping[str, bytes]) -> dict[str, str]:
    """Write pictures as addresses that hold them.

    Parameters
    ----------
    pictures : mapping of str to bytes
        PNG images.

    Returns
    -------
    dict of str to str
    """
    return {name: "data:image/png;base64," + base64.b64encode(data).decode() for name, data in pictures.items()}


def as_json(content: Any) -> str:
    r"""Write data for a script of the page; no name in it can end the element it stands in.

    Parameters
    ----------
    content
        What JSON knows.

    Returns
    -------
    str

    Examples
    --------
    >>> as_json({"site": "</script>"})
    '{"site":"\\u003c/script>"}'
    """
    return json.dumps(content, allow_nan=False, separators=(",", ":")).replace("<", "\\u003c")


def made_with(provenance: Mapping[str, Any]) -> list[tuple[str, str]]:
    """Name what a run was made with.

    Parameters
    ----------
    provenance : mapping
        The content of `run.json`.

    Returns
    -------
    list of (str, str)
    """
    versions = ", ".join(f"{name} {value}" for name, value in provenance["versions"].items())
    facts = {
        "command": provenance["command"],
        "massfit": provenance["massfit"],
        "seed": provenance.get("seed"),
        "Python": provenance.get("python"),
        "machine": provenance.get("machine"),
        "processes": provenance.get("processes"),
        "spherical-harmonic transforms": provenance.get("transform_backend"),
        "polar motion": provenance.get("polar_motion"),
        "libraries": versions,
    }
    return [(name, str(value)) for name, value in facts.items() if value is not None]
