"""Screen the fields of ocean models and write the folder, whole or not at all."""

import shlex
from collections.abc import Sequence
from datetime import UTC, datetime
from pathlib import Path

from massfit.constants import PASCAL_PER_HPA
from massfit.io.fields.model_fields import read_model_fields
from massfit.io.fields.sea_floor_field import FileSource
from massfit.io.network.read_places import read_places
from massfit.io.results.partial_folder import claimed
from massfit.io.results.results_folder import check_output, write_folder
from massfit.pipeline.executor import make_executor
from massfit.pipeline.progress import Progress, StageTimes, ignore
from massfit.pipeline.provenance import made_by
from massfit.pipeline.screen import RECORD_YEARS, screen_sea_floor
from massfit.report.figures.quietness_maps import draw_screening
from massfit.report.figures.render import png
from massfit.report.pages.screening_page import screening_page
from massfit.results.finished import FinishedRun
from massfit.results.screening import SCREENING_FILE, screening_run
from massfit.screening.ensemble import INFLATION_FACTOR, QUIET_SD_PA
from massfit.screening.field import ModelField
from massfit.screening.plan import DEFAULT_MEMORY_GB

PAGE_FILE = "screening.html"

_OVERHEAD_GB = 0.5  # Python and its libraries, beside sums and blocks


def screen_to_folder(
    named: Sequence[str],
    folder: Path,
    *,
    ocean_mean: Sequence[str] = (),
    variable: str | None = None,
    network: Path | None = None,
    record_years: Sequence[float] = (),
    inflation_factor: float = INFLATION_FACTOR,
    quiet_sd_hpa: float = QUIET_SD_PA / PASCAL_PER_HPA,
    memory_gb: float = DEFAULT_MEMORY_GB,
    workers: int | None = None,
    scheduler: str | None = None,
    overwrite: bool = False,
    progress: Progress = ignore,
) -> FinishedRun:
    """Screen the fields of ocean models and write a folder with map, table, figures and a page.

    Parameters
    ----------
    named, ocean_mean, variable
        As for :func:`massfit.io.fields.model_fields.read_model_fields`.
    folder : Path
    network : Path, optional
        Network file or results folder whose sites are placed on the map; phases then count from its reference year.
    record_years, inflation_factor, quiet_sd_hpa, memory_gb
        As for :func:`massfit.pipeline.screen.screen_sea_floor`.
    workers : int, optional
        Processes of a Dask cluster that is started here.
    scheduler : str, optional
        Address of a Dask scheduler that is there.
    overwrite : bool
        Replace what this command wrote before.
    progress : callable

    Returns
    -------
    FinishedRun

    Raises
    ------
    InputError
        Every fault of the input or of the output folder; nothing was written.
    """
    times, record_years = StageTimes(progress), tuple(record_years) or RECORD_YEARS
    check_output(folder, overwrite=overwrite, holds=SCREENING_FILE)
    with claimed(folder) as partial:
        check_output(folder, overwrite=overwrite, holds=SCREENING_FILE)
        times("reading", 0, 1)
        fields = read_model_fields(named, ocean_mean=ocean_mean, variable=variable)
        sites, reference_year = read_places(network) if network is not None else ((), None)
        times("reading", 1, 1)
        limit = memory_gb + _OVERHEAD_GB
        with make_executor(workers=workers, scheduler=scheduler, memory_gb=limit) as executor:
            quietness = screen_sea_floor(
                fields, record_years=record_years, reference_year=reference_year, inflation_factor=inflation_factor,
                quiet_sd_hpa=quiet_sd_hpa, memory_gb=memory_gb, executor=executor, progress=times,
            )  # fmt: skip
            processes = executor.count
        provenance = {
            "command": _command(named, ocean_mean, network, record_years),
            **made_by(processes=processes),
            "settings": {
                "ocean_mean": list(ocean_mean), "variable": variable, "record_years": list(record_years),
                "inflation_factor": inflation_factor, "quiet_sd_hpa": quiet_sd_hpa, "memory_gb": memory_gb,
                "network": None if network is None else str(network),
            },
            "inputs": field_inputs(fields),
            "elapsed_s": times.seconds(),
        }  # fmt: skip
        title = " and ".join(field.name for field in fields)
        run = screening_run(quietness, sites, title=title, provenance=provenance)
        times("page", 0, 1)
        pictures = {name: png(figure) for name, figure in draw_screening(quietness, run.summary["sites"]).items()}
        page = screening_page(run, pictures)
        times("page", 1, 1)
        write_folder(partial, run, summary_file=SCREENING_FILE, page_file=PAGE_FILE, page=page, pictures=pictures)
    return run


def _command(
    named: Sequence[str], ocean_mean: Sequence[str], network: Path | None, record_years: Sequence[float]
) -> str:
    """Spell the command; what else was chosen stands among the settings."""
    words = [*named, *(word for choice in ocean_mean for word in ("--ocean-mean", choice))]
    words += ["--network", str(network)] if network is not None else []
    words += [word for years in record_years for word in ("--years", f"{years:g}")]
    return f"massfit screen {shlex.join(words)}"


def field_inputs(fields: Sequence[ModelField]) -> dict[str, str]:
    """Describe every file that is read by its size and time of change: its checksum would cost another reading.

    Parameters
    ----------
    fields : sequence of ModelField

    Returns
    -------
    dict of str to str
    """
    described = {}
    for field in fields:
        pieces = field.source.pieces if isinstance(field.source, FileSource) else ()
        for piece in pieces:
            described[piece.path] = _size_and_time(Path(piece.path))
    return described


def _size_and_time(path: Path) -> str:
    entries = [entry for entry in path.rglob("*") if entry.is_file()] if path.is_dir() else [path]
    size = sum(entry.stat().st_size for entry in entries)
    changed = max(entry.stat().st_mtime for entry in entries)
    return f"{size} bytes, changed {datetime.fromtimestamp(changed, UTC).isoformat(timespec='seconds')}"
