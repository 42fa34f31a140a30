"""Figures and page of a finished folder anew, whichever command wrote it."""

from pathlib import Path

from massfit.io.results.read_results import is_site_run
from massfit.pipeline.phasors import redraw_phasors
from massfit.pipeline.save import report_to_folder


def redraw(folder: Path, *, workers: int = 1) -> Path:
    """Draw figures and page anew from the other files of a folder.

    Parameters
    ----------
    folder : Path
        That `massfit estimate` or `massfit phasors` wrote.
    workers : int
        Processes that share the figures of sites.

    Returns
    -------
    Path
        The page.

    Raises
    ------
    InputError
        It is another folder, a file was changed, or it cannot be written.
    """
    if is_site_run(folder):
        return redraw_phasors(folder, workers=workers)
    report_to_folder(folder)
    return folder / "report.html"
