"""A run from a network file to a results folder, whole or not at all."""

import dataclasses
from pathlib import Path

from massfit.errors import Fault, InputError, collect
from massfit.fingerprint.ocean import OceanFunction
from massfit.gravity.inputs import GravityInputs
from massfit.io.gravity.gravity_folder import read_gravity_folder
from massfit.io.gravity.read_gravity import read_gravity
from massfit.io.network.network_file import read_network, read_sites_and_loads
from massfit.io.results.partial_folder import PartialFolder, claimed
from massfit.io.results.read_results import read_results
from massfit.io.results.results_folder import check_output, redraw_results, write_results
from massfit.network import Network
from massfit.pipeline.compare import with_comparison
from massfit.pipeline.estimate import estimate
from massfit.pipeline.progress import Progress, StageTimes, ignore
from massfit.report.figures.draw import draw_figures
from massfit.report.figures.render import png
from massfit.report.pages.run_page import report_page
from massfit.results.estimate import Estimate
from massfit.results.finished import FinishedRun, finished_run


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
        inputs, gravity = _read(network, outside)
        times("reading", 1, 1)
        result = estimate(
            inputs, progress=times, workers=workers, store=partial, what_if=what_if, surrogates=surrogates
        )
        run = finished_run(result, command=f"massfit estimate {network}")
        if gravity is not None:
            times("satellite comparison", 0, 1)
            run = with_comparison(run, inputs, gravity)
            times("satellite comparison", 1, 1)
        times("report", 0, 1)
        save_run(run, partial, times=times)
        times("report", 1, 1)
    return dataclasses.replace(result, summary=run.summary)


def _read(network: Path, outside: bool) -> tuple[Network, GravityInputs | None]:
    """Read all that a run needs before anything is computed, with the faults of all of it."""
    faults: list[Fault] = []
    inputs: list[Network] = []
    gravity: list[GravityInputs | None] = []
    with collect(faults):
        inputs.append(read_network(network, outside=outside))
    with collect(faults):
        gravity.append(read_gravity(network, outside=outside))
    if faults:
        raise InputError(dict.fromkeys(faults))
    return inputs[0], gravity[0]


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
        save_run(finished_run(result, command="massfit.estimate(network) in Python"), partial)


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


def compare_to_folder(
    folder: Path,
    network: Path | None = None,
    gravity: Path | None = None,
    *,
    outside: bool = False,
    progress: Progress = ignore,
) -> FinishedRun:
    """Compare finished results with satellite gravity and add the comparison to their folder.

    Parameters
    ----------
    folder : Path
        The results folder.
    network : Path, optional
        The network file that has [gravity]; by default that in the folder the results stand in.
    gravity : Path, optional
        Folder, archive or file of satellite gravity, in place of the files that [gravity] names.
    outside : bool
        Allow paths outside the network's folder.
    progress : callable

    Returns
    -------
    FinishedRun
        With the comparison, as the folder now holds it.

    Raises
    ------
    InputError
        It is no results folder, the network file has no [gravity], or a file it names has a fault; the results are
        untouched then.
    """
    place = network or folder.absolute().parent
    progress("reading", 0, 1)
    read_results(folder)
    satellites = _satellites(place, gravity, outside)
    inputs = read_sites_and_loads(place, outside=outside)
    progress("reading", 1, 1)
    with claimed(folder) as partial:
        run = read_results(folder)
        progress("satellite comparison", 0, 1)
        run = with_comparison(run, inputs, satellites)
        progress("satellite comparison", 1, 1)
        save_run(run, partial)
    return run


def _satellites(network: Path, gravity: Path | None, outside: bool) -> GravityInputs:
    if gravity is not None:
        return read_gravity_folder(gravity, network=network, outside=outside)
    found = read_gravity(network, outside=outside)
    if found is None:
        problem = "the network file has no [gravity]"
        action = "Add the table (docs/network_file.md lists its keys), or name the files with --gravity"
        raise InputError(Fault(str(network), "gravity", problem, "", action))
    return found


def save_run(run: FinishedRun, partial: PartialFolder, *, times: StageTimes | None = None) -> None:
    """Draw a run and write its results folder.

    Parameters
    ----------
    run : FinishedRun
    partial : PartialFolder
        Of the results folder.
    times : StageTimes, optional
        What each stage has taken so far.
    """
    pictures = _pictures(run)
    page = report_page(run, pictures)
    if times is not None:
        run = dataclasses.replace(run, provenance={**run.provenance, "elapsed_s": times.seconds()})
    write_results(partial, run, pictures=pictures, page=page)


def _pictures(run: FinishedRun) -> dict[str, bytes]:
    return {name: png(figure) for name, figure in draw_figures(run, OceanFunction.builtin()).items()}
