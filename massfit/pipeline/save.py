"""A run from a network file to a results folder, whole or not at all."""

import dataclasses
from pathlib import Path

from massfit.fingerprint.ocean import OceanFunction
from massfit.io.network_file import read_network
from massfit.io.partial_folder import PartialFolder, claimed
from massfit.io.read_results import read_results
from massfit.io.results_folder import check_output, redraw_results, write_results
from massfit.pipeline.estimate import estimate
from massfit.pipeline.progress import Progress, StageTimes, ignore
from massfit.report.draw import draw_figures, png
from massfit.report.page import report_page
from massfit.results.estimate import Estimate
from massfit.results.finished import FinishedRun, finished_run


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
    what_if: bool = False,
    surrogates: int = 0,
) -> Estimate:
    """Read a network, do the main job and write the results folder.

    Finished parts are kept in a partial folder beside the results until these are in place. A run that was
    interrupted goes on from them, with the same numbers, when it is started again.

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
    what_if : bool
        Answer the network under every other choice too.
    surrogates : int
        Number of surrogates of the network, with a known cycle, to be analysed too.

    Returns
    -------
    Estimate

    Raises
    ------
    InputError
        Every fault of the input or of the output folder; nothing was written.
    """
    times = StageTimes(progress)
    check_output(folder, overwrite=overwrite)
    with claimed(folder) as partial:
        check_output(folder, overwrite=overwrite)
        times("reading", 0, 1)
        inputs = read_network(network, outside=outside)
        times("reading", 1, 1)
        result = estimate(
            inputs, progress=times, workers=workers, store=partial, what_if=what_if, surrogates=surrogates
        )
        times("report", 0, 1)
        _save(result, partial, command=f"massfit estimate {network}", times=times)
        times("report", 1, 1)
    return result


def save_results(result: Estimate, folder: Path, *, overwrite: bool = False) -> None:
    """Write a run to a results folder: numbers, Datasets, figures and page.

    Parameters
    ----------
    result : Estimate
    folder : Path
    overwrite : bool
        Replace finished results.

    Raises
    ------
    InputError
        The folder cannot or must not be written.
    """
    check_output(folder, overwrite=overwrite)
    with claimed(folder) as partial:
        check_output(folder, overwrite=overwrite)
        _save(result, partial, command="massfit.estimate(network) in Python")


def report_to_folder(folder: Path) -> FinishedRun:
    """Draw figures and page of finished results anew, from the results folder alone.

    Parameters
    ----------
    folder : Path
        The results folder; each of its files must be as it was made.

    Returns
    -------
    FinishedRun

    Raises
    ------
    InputError
        It is no results folder, a file was changed, or it cannot be written.
    """
    read_results(folder)
    with claimed(folder) as partial:
        run = read_results(folder)
        pictures = _pictures(run)
        redraw_results(partial, run, pictures=pictures, page=report_page(run, pictures))
    return run


def _save(result: Estimate, partial: PartialFolder, *, command: str, times: StageTimes | None = None) -> None:
    run = finished_run(result, command=command)
    pictures = _pictures(run)
    page = report_page(run, pictures)
    if times is not None:
        run = dataclasses.replace(run, provenance={**run.provenance, "elapsed_s": times.seconds()})
    write_results(partial, run, pictures=pictures, page=page)


def _pictures(run: FinishedRun) -> dict[str, bytes]:
    return {name: png(figure) for name, figure in draw_figures(run, OceanFunction.builtin()).items()}
