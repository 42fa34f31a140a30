"""A run from a network file to a results folder, whole or not at all."""

from pathlib import Path

from massfit.fingerprint.ocean import OceanFunction
from massfit.io.network_file import read_network
from massfit.io.results_folder import check_output, write_results
from massfit.pipeline.estimate import estimate
from massfit.pipeline.progress import Progress, ignore
from massfit.report.draw import draw_figures, png
from massfit.report.page import report_page
from massfit.results.estimate import Estimate
from massfit.results.finished import finished_run


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
    command = f"massfit estimate {network}" if network else "massfit.estimate(network) in Python"
    run = finished_run(result, command=command)
    pictures = {name: png(figure) for name, figure in draw_figures(run, OceanFunction.builtin()).items()}
    write_results(
        folder,
        summary=run.summary,
        run=run.provenance,
        datasets=run.datasets,
        pictures={f"{name}.png": picture for name, picture in pictures.items()},
        page=report_page(run, pictures),
    )
