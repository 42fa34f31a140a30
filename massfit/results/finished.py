"""A finished run as its results folder holds it: what figures and page are drawn from."""

import dataclasses
from collections.abc import Mapping, Sequence
from typing import Any

import xarray as xr

from massfit.results.datasets import result_datasets
from massfit.results.estimate import Estimate
from massfit.results.tidal_table import tidal_table
from massfit.settings import Settings


@dataclasses.dataclass(frozen=True)
class FinishedRun:
    """The content of a results folder, in memory.

    Parameters
    ----------
    summary : mapping
        The content of `estimate.json` or `phasors.json`.
    provenance : mapping
        The content of `run.json`: command, settings, versions, inputs.
    datasets : mapping of str to xarray.Dataset
        By file name: site_phasors.nc, fingerprints.nc, reduced_records.nc; with the group behind it where the file has
        groups: posterior.nc/posterior.
    tables : mapping of str to list of dict
        By file name, for people and spreadsheets only: read back as text, to be kept when something joins the run.
    """

    summary: Mapping[str, Any]
    provenance: Mapping[str, Any]
    datasets: Mapping[str, xr.Dataset]
    tables: Mapping[str, Sequence[Mapping[str, Any]]] = dataclasses.field(default_factory=dict)


def finished_run(estimate: Estimate, *, command: str) -> FinishedRun:
    """Turn a run into what its results folder holds.

    Parameters
    ----------
    estimate : Estimate
    command : str
        What repeats the run.

    Returns
    -------
    FinishedRun
    """
    provenance = {
        "command": command,
        **estimate.provenance,
        "settings": plain_settings(estimate.network.settings),
        "inputs": dict(estimate.network.inputs),
    }
    tides = tidal_table([record for reduction in estimate.reductions for record in reduction.daily])
    tables = {"tides.csv": tides} if tides else {}
    return FinishedRun(estimate.summary, provenance, result_datasets(estimate), tables)


def plain_settings(settings: Settings) -> dict[str, Any]:
    """Turn settings into what JSON knows."""
    return dict(_plain(dataclasses.asdict(settings)))


def _plain(value: Any) -> Any:
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, tuple):
        return [_plain(item) for item in value]
    return value if isinstance(value, str | int | float | bool | None) else str(value)
