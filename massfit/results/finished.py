"""A finished run as its results folder holds it: what figures and page are drawn from."""

import dataclasses
from collections.abc import Mapping
from typing import Any

import xarray as xr

from massfit.results.datasets import result_datasets
from massfit.results.estimate import Estimate


@dataclasses.dataclass(frozen=True)
class FinishedRun:
    """The content of a results folder, in memory.

    Parameters
    ----------
    summary : mapping
        The content of `estimate.json`.
    provenance : mapping
        The content of `run.json`: command, settings, versions, inputs.
    datasets : mapping of str to xarray.Dataset
        By file name: site_phasors.nc, fingerprints.nc, reduced_records.nc; with the group behind it where the file has
        groups: posterior.nc/posterior.
    """

    summary: Mapping[str, Any]
    provenance: Mapping[str, Any]
    datasets: Mapping[str, xr.Dataset]


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
        "settings": _plain(dataclasses.asdict(estimate.network.settings)),
        "inputs": dict(estimate.network.inputs),
    }
    return FinishedRun(estimate.summary, provenance, result_datasets(estimate))


def _plain(value: Any) -> Any:
    """Turn settings into what JSON knows."""
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, tuple):
        return [_plain(item) for item in value]
    return value if isinstance(value, str | int | float | bool | None) else str(value)
