"""The sites alone: from raw records to their phasors, each judged, without a network posterior."""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

from massfit.io.network.network_file import read_network
from massfit.io.results.partial_folder import claimed
from massfit.io.results.read_results import read_site_run
from massfit.io.results.results_folder import PHASORS_FILE, check_output, redraw_results, write_folder
from massfit.network import Network
from massfit.pipeline.context import sites_in_context
from massfit.pipeline.parts import Store, kept
from massfit.pipeline.progress import Progress, StageTimes, ignore
from massfit.pipeline.provenance import provenance
from massfit.pipeline.site_stage import SiteStage, site_stage
from massfit.pipeline.workers import Workers
from massfit.report.figures.site_sheet import sheet_png
from massfit.report.pages.site_page import picture_name, site_page
from massfit.results.assumptions import site_assumptions
from massfit.results.datasets import reduced_records, with_description
from massfit.results.diagnostics import with_diagnostics
from massfit.results.finished import FinishedRun, plain_settings
from massfit.results.site_entries import judgement, record_entry, site_entry, site_rows
from massfit.results.site_sheet import site_sheets
from massfit.results.tidal_table import tidal_table

PAGE_FILE = "phasors.html"


def site_run(
    network: Network,
    *,
    command: str = "massfit phasors",
    progress: Progress = ignore,
    workers: int = 1,
    store: Store | None = None,
) -> FinishedRun:
    """Reduce, correct, fit and judge every site of a network.

    Parameters
    ----------
    network : Network
    command : str
        What repeats the run.
    progress : callable, optional
        Called with the stage, how many parts of it are done, and how many there are.
    workers : int
        Processes that share the sites. The numbers do not depend on it.
    store : Store, optional
        Keeps finished sites and gives them back.

    Returns
    -------
    FinishedRun
        `summary`: the content of `phasors.json`; `datasets`: `site_phasors.nc`, `reduced_records.nc`; `tables`:
        `sites.csv` and, where short tides were removed, `tides.csv`.

    Raises
    ------
    InputError
        Every fault of the network that was found before the first one that stops the run.

    Examples
    --------
    >>> from massfit.simulate.network import simulate_network
    >>> from massfit.simulate.options import SimulationOptions
    >>> options = SimulationOptions(sites=1, years=2, sampling="daily", incidents=False, bad_site=False)
    >>> run = site_run(simulate_network(options, seed=1).network)
    >>> [year["year"] for year in run.summary["sites"][0]["judged"]["years"]]
    [2014, 2015]
    """
    times = StageTimes(progress)
    with Workers(workers) as pool:
        stage = site_stage(network, times, kept(pool.results, store), judge=True)
        return _finished(network, stage, command, times, pool.count)


def _finished(network: Network, stage: SiteStage, command: str, times: StageTimes, processes: int) -> FinishedRun:
    summary = _summary(network, stage)
    made = {
        "command": command,
        **provenance(network, processes=processes),
        "settings": plain_settings(network.settings),
        "inputs": dict(network.inputs),
        "elapsed_s": times.seconds(),
    }
    judged = with_diagnostics(stage.phasors, stage.reductions)
    titled = {"site_phasors.nc": (judged, "annual phasor of each site, and what its fit is judged by")}
    if stage.reductions:
        text = "daily records, every series subtracted, and what remains"
        titled["reduced_records.nc"] = reduced_records(stage.reductions), text
    datasets = {name: with_description(data, text, summary, made) for name, (data, text) in titled.items()}
    tides = tidal_table([record for reduction in stage.reductions for record in reduction.daily])
    tables: dict[str, Sequence[Mapping[str, Any]]] = {"sites.csv": site_rows(summary["sites"])}
    if tides:
        tables["tides.csv"] = tides
    return FinishedRun(summary, made, datasets, tables)


def _summary(network: Network, stage: SiteStage) -> dict[str, Any]:
    context = sites_in_context(network, stage.reductions, stage.circulation)
    reductions = {each.site.id: each for each in stage.reductions}
    entries = []
    for site in stage.sites:
        entry = {**site_entry(site, stage.phasors), "judged": None, **context.facts[site.id]}
        if site.id in reductions:
            response = float(stage.responses["zonal"].sel(site=site.id))
            entry |= record_entry(reductions[site.id], response)
        entry["warnings"] = [*entry["warnings"], *judgement(entry["judged"]), *context.notes[site.id]]
        entries.append(entry)
    return {
        **context.head,
        "sites": entries,
        "left_out": context.left_out,
        "assumptions": list(site_assumptions(context.used)),
        "warnings": context.warnings,
        "actions": context.actions,
    }


def phasors_to_folder(
    network: Path,
    folder: Path,
    *,
    overwrite: bool = False,
    outside: bool = False,
    progress: Progress = ignore,
    workers: int = 1,
) -> FinishedRun:
    """Read a network, reduce and judge its sites, and write a folder with tables, Datasets, a figure a site and a page.

    Finished sites are kept in a partial folder until the whole is in place, as for `massfit estimate`.

    Parameters
    ----------
    network : Path
        A network.toml or the folder that holds one.
    folder : Path
    overwrite : bool
        Replace what a finished run left there.
    outside : bool
        Allow paths outside the network's folder.
    progress : callable
    workers : int
        Processes that share the work.

    Returns
    -------
    FinishedRun

    Raises
    ------
    InputError
        Every fault of the input or of the output folder; nothing was written.
    """
    times = StageTimes(progress)
    check_output(folder, overwrite=overwrite, holds=PHASORS_FILE)
    with claimed(folder) as aside, Workers(workers) as pool:
        check_output(folder, overwrite=overwrite, holds=PHASORS_FILE)
        times("reading", 0, 1)
        inputs = read_network(network, outside=outside)
        times("reading", 1, 1)
        stage = site_stage(inputs, times, kept(pool.results, aside), judge=True)
        run = _finished(inputs, stage, f"massfit phasors {network}", times, pool.count)
        pictures = _pictures(run, times, pool)
        times("page", 0, 1)
        page = site_page(run, pictures)
        times("page", 1, 1)
        run = replace(run, provenance={**run.provenance, "elapsed_s": times.seconds()})
        write_folder(
            aside,
            run,
            summary_file=PHASORS_FILE,
            page_file=PAGE_FILE,
            page=page,
            pictures=pictures,
        )
    return run


def redraw_phasors(folder: Path, *, workers: int = 1) -> Path:
    """Draw figures and page of what `massfit phasors` wrote anew, from its folder alone.

    Parameters
    ----------
    folder : Path
        Each of its files must be as it was made.
    workers : int
        Processes that share the figures.

    Returns
    -------
    Path
        The page.

    Raises
    ------
    InputError
        A file was changed, or the folder cannot be written.
    """
    read_site_run(folder)
    with claimed(folder) as aside, Workers(workers) as pool:
        run = read_site_run(folder)
        pictures = _pictures(run, StageTimes(ignore), pool)
        redraw_results(aside, run, pictures=pictures, page=site_page(run, pictures), page_file=PAGE_FILE)
    return folder / PAGE_FILE


def _pictures(run: FinishedRun, times: StageTimes, pool: Workers) -> dict[str, bytes]:
    sheets = site_sheets(run)
    times("figures", 0, len(sheets))
    drawn: list[bytes] = []
    for picture in pool.results(sheet_png, sheets):
        drawn.append(picture)
        times("figures", len(drawn), len(sheets))
    names: Sequence[str] = [picture_name(place, sheet.site) for place, sheet in enumerate(sheets, 1)]
    return dict(zip(names, drawn, strict=True))
