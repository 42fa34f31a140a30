"""What every page holds: pictures, and what it was made with."""

import base64
import csv
import gzip
import io
import json
from collections.abc import Iterable, Mapping, Sequence
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


def as_packed_csv(head: Sequence[str], rows: Iterable[Sequence[object]]) -> str:
    """Write rows as CSV, packed so that a page can carry it.

    Parameters
    ----------
    head : sequence of str
    rows : iterable of sequence
        Text, numbers and None; text that a spreadsheet would take for a formula gets an apostrophe before it.

    Returns
    -------
    str
        Gzip (RFC 1952) in Base64; the same for the same rows.

    Examples
    --------
    >>> packed = as_packed_csv(("site", "hPa"), [("=A1", 0.25), ("B", None)])
    >>> gzip.decompress(base64.b64decode(packed)).decode().splitlines()
    ['site,hPa', "'=A1,0.25", 'B,']
    """
    text = io.StringIO()
    table = csv.writer(text, lineterminator="\n")
    table.writerow(head)
    for row in rows:
        table.writerow([_csv_cell(cell) for cell in row])
    return base64.b64encode(gzip.compress(text.getvalue().encode(), mtime=0)).decode()


def _csv_cell(cell: object) -> object:
    if isinstance(cell, float):
        return f"{cell:.6g}"
    return f"'{cell}" if isinstance(cell, str) and cell.startswith(("=", "+", "-", "@", "\t", "\r")) else cell


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
