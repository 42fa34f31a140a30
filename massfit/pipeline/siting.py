"""Site selection of a finished run, written into its results folder."""

from dataclasses import dataclass, replace
from pathlib import Path

import xarray as xr

from massfit.constants import PASCAL_PER_HPA
from massfit.errors import Fault, InputError, collect
from massfit.io.fields.site_column import read_site_column
from massfit.io.fields.siting_files import read_candidates, read_depths, read_quietness
from massfit.io.network.network_file import read_sites_and_loads
from massfit.io.results.partial_folder import claimed
from massfit.io.results.read_results import read_results
from massfit.network import Network
from massfit.pipeline.executor import make_executor
from massfit.pipeline.progress import Progress, ignore
from massfit.pipeline.rank_sites import SUBSETS, rank_sites, with_ranking
from massfit.pipeline.save import save_run
from massfit.pipeline.site_plan import PlanOptions, network_now, plan_sites
from massfit.pipeline.site_service import plan_service
from massfit.results.datasets import with_description
from massfit.results.finished import FinishedRun
from massfit.siting.gain_map import unknown_depth

FILE = "siting.nc"

_TITLES = {
    "candidate_map": "what one recorder more would do, everywhere",
    "best_places": "the best places for one recorder more",
    "asked_places": "places asked about",
    "record_length": "errors against the years of record",
    "service": "the answer if a recorder fails, is recovered or is redeployed",
}


@dataclass(frozen=True)
class SitingFiles:
    """What the user gives on the command line.

    Parameters
    ----------
    years : float
        Length of the planned record.
    noise_hpa, target_hpa : float, optional
        Standard deviation of the daily means of the planned recorder; error of a component to be reached.
    candidates, quietness, depths : pathlib.Path, optional
    by : pathlib.Path, optional
        CSV ``site,value``: sites of small values are kept first.
    subsets : int
        Random subsets of each size.
    """

    years: float = 2.0
    noise_hpa: float | None = None
    target_hpa: float | None = None
    candidates: Path | None = None
    quietness: Path | None = None
    depths: Path | None = None
    by: Path | None = None
    subsets: int = SUBSETS

    def read(self) -> PlanOptions:
        """Read the files, with the faults of all of them."""
        faults: list[Fault] = []
        options = PlanOptions(
            years=self.years,
            noise_sd=None if self.noise_hpa is None else PASCAL_PER_HPA * self.noise_hpa,
            target_sd=None if self.target_hpa is None else PASCAL_PER_HPA * self.target_hpa,
            source=str(self.candidates),
        )
        with collect(faults):
            options = replace(options, candidates=read_candidates(self.candidates) if self.candidates else ())
        with collect(faults):
            options = replace(options, quietness=read_quietness(self.quietness) if self.quietness else None)
        with collect(faults):
            options = replace(options, depth=read_depths(self.depths) if self.depths else unknown_depth)
        if faults:
            raise InputError(faults)
        return options


def siting_to_folder(
    folder: Path,
    network: Path | None = None,
    files: SitingFiles = SitingFiles(),
    *,
    outside: bool = False,
    workers: int | None = None,
    scheduler: str | None = None,
    progress: Progress = ignore,
) -> FinishedRun:
    """Say which sites carry finished results, where and how long to measure next, and add that to their folder.

    Parameters
    ----------
    folder : Path
        The results folder.
    network : Path, optional
        The network file that the results were made with; by default that in the folder the results stand in.
    files : SitingFiles
    outside : bool
        Allow paths outside the network's folder.
    workers, scheduler : optional
        Who shares the random subsets, as :func:`massfit.pipeline.executor.make_executor` takes them; this process
        otherwise.
    progress : callable

    Returns
    -------
    FinishedRun
        With `siting.nc`, as the folder now holds it.

    Raises
    ------
    InputError
        It is no results folder, or a file has a fault; the results are untouched then.
    """
    progress("reading", 0, 1)
    _require_converged(read_results(folder), folder)
    options = files.read()
    column = read_site_column(files.by) if files.by else None
    inputs = read_sites_and_loads(network or folder.absolute().parent, outside=outside)
    progress("reading", 1, 1)
    with make_executor(workers=workers, scheduler=scheduler) as executor, claimed(folder) as partial:
        run = with_siting(read_results(folder), inputs, options, progress=progress)
        ranking = rank_sites(
            run,
            subsets=files.subsets,
            by=column,
            by_name=str(files.by.name) if files.by else "",
            target_width_hpa=files.target_hpa,
            executor=executor,
            progress=progress,
        )
        run = with_ranking(run, ranking)
        save_run(run, partial)
    return run


def with_siting(
    run: FinishedRun, network: Network, options: PlanOptions, *, progress: Progress = ignore
) -> FinishedRun:
    """Add site selection to a finished run.

    Parameters
    ----------
    run : FinishedRun
    network : Network
        Settings, sites and loads that it was made with.
    options : PlanOptions
    progress : callable

    Returns
    -------
    FinishedRun
    """
    now = network_now(run)
    found = plan_sites(run, now, network, options, progress=progress)
    service = plan_service(run, now, progress=progress)
    if service is not None:
        found["service"] = service
    kept = {name: data for name, data in run.datasets.items() if name not in _ours(run)}
    described = {f"{FILE}/{name}": _described(run, name, data) for name, data in found.items()}
    return replace(run, datasets={**kept, **described})


def _ours(run: FinishedRun) -> set[str]:
    """Name the groups of an earlier study that this one makes anew."""
    return {name for name in run.datasets if name.partition("/")[0] == FILE and name.partition("/")[2] in _TITLES}


def _described(run: FinishedRun, name: str, data: xr.Dataset) -> xr.Dataset:
    return with_description(data, _TITLES[name], run.summary, run.provenance)


def _require_converged(run: FinishedRun, folder: Path) -> None:
    if not run.summary["convergence"]["converged"]:
        problem = "the run did not converge: nothing can be planned on its error"
        raise InputError(Fault(str(folder), "", problem, "", "Make it anew with another seed"))
