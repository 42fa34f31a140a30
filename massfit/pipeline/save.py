"""A run from a network file to a results folder, whole or not at all."""

import dataclasses
from pathlib import Path
from typing import Any

from massfit.fingerprint.ocean import OceanFunction
from massfit.io.network_file import read_network
from massfit.io.results_folder import check_output, write_results
from massfit.pipeline.estimate import estimate
from massfit.pipeline.progress import Progress, ignore
from massfit.report.draw import draw_figures, png
from massfit.report.page import report_page
from massfit.results.datasets import result_datasets
from massfit.results.estimate import Estimate


def results_folder(network: Path, output: Path | None) -> Path:
    """Where the results go: as asked, or `results` beside the network file.

    Parameters
    ----------
    network : Path
        A network.toml or the folder that holds one.
    output : Path or None

    Returns
    -------
    Path
    """
    return output or (network if network.is_dir() else network.parent) / "results"


def estimate_to_folder(
    network: Path,
    folder: Path,
    *,
    overwrite: bool = False,
    outside: bool = False,
    progress: Progress = ignore,
    workers: int = 1,
) -> Estimate:
    """Read a network, do the main job and write the results folder.

    Parameters
    ----------
    network : Path
        A network.toml or the folder that holds one.
    folder : Path
        The results folder.
    overwrite : bool
        Replace finished results.
    outside : bool
        Allow paths outside the network's folder.
    progress : callable
    workers : int
        Processes that share the work.

    Returns
    -------
    Estimate

    Raises
    ------
    InputError
        Every fault of the input or of the output folder; nothing was written.
    """
    check_output(folder, overwrite=overwrite)
    progress("reading", 0, 1)
    inputs = read_network(network, outside=outside)
    progress("reading", 1, 1)
    result = estimate(inputs, progress=progress, workers=workers)
    progress("report", 0, 1)
    save_results(result, folder, network=str(network), overwrite=overwrite)
    progress("report", 1, 1)
    return result


def save_results(result: Estimate, folder: Path, *, network: str = "", overwrite: bool = False) -> None:
    """Write a run to a results folder: numbers, Datasets, figures and page.

    Parameters
    ----------
    result : Estimate
    folder : Path
    network : str
        Network file as the analyst wrote it, for the command that repeats the run.
    overwrite : bool
        Replace finished results.

    Raises
    ------
    InputError
        The folder cannot or must not be written.
    """
    check_output(folder, overwrite=overwrite)
    pictures = {name: png(figure) for name, figure in draw_figures(result, OceanFunction.builtin()).items()}
    command = f"massfit estimate {network}" if network else "massfit.estimate(network) in Python"
    write_results(
        folder,
        summary=result.summary,
        run=_run(result, command),
        datasets=result_datasets(result),
        pictures={f"{name}.png": picture for name, picture in pictures.items()},
        page=report_page(result, pictures, command=command),
    )


def _run(result: Estimate, command: str) -> dict[str, Any]:
    return {
        "command": command,
        **result.provenance,
        "settings": _plain(dataclasses.asdict(result.network.settings)),
        "inputs": dict(result.network.inputs),
    }


def _plain(value: Any) -> Any:
    """Turn settings into what JSON knows."""
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, tuple):
        return [_plain(item) for item in value]
    return value if isinstance(value, str | int | float | bool | None) else str(value)
