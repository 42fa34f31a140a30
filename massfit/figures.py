"""Every figure as a function: arrays or Datasets in, a matplotlib Figure out, in one house style.

Colours are those of Okabe & Ito (2008) and cividis: no figure sets red against green, and each can be read in grey.
`width_mm` is `PAGE_WIDTH_MM` or `COLUMN_WIDTH_MM`; the user's own matplotlib settings are left alone.
"""

from matplotlib.figure import Figure

from massfit.fingerprint.ocean import OceanFunction
from massfit.report.figures.candidate_map import candidate_map
from massfit.report.figures.convergence import convergence_figure
from massfit.report.figures.corner import corner_figure
from massfit.report.figures.coverage_calendar import coverage_calendar
from massfit.report.figures.draw import draw_figures
from massfit.report.figures.field_map import field_map
from massfit.report.figures.fingerprint_maps import footprint_panels, world_map
from massfit.report.figures.fingerprint_members import fingerprint_members
from massfit.report.figures.influence import influence_figure
from massfit.report.figures.moved_site import moved_site_figure
from massfit.report.figures.network_map import network_map
from massfit.report.figures.phasor_plane import phasor_plane
from massfit.report.figures.record_length import record_length_figure
from massfit.report.figures.record_panels import record_panels
from massfit.report.figures.render import png
from massfit.report.figures.satellite_sites import satellite_sites_figure
from massfit.report.figures.satellites import satellite_figure
from massfit.report.figures.service_plan import service_plan_figure
from massfit.report.figures.site_sheet import site_sheet
from massfit.report.figures.style import COLUMN_WIDTH_MM, PAGE_WIDTH_MM
from massfit.report.figures.subset_sizes import keep_path_figure, order_sweep, subset_fan
from massfit.results.estimate import Estimate
from massfit.results.finished import FinishedRun, finished_run

__all__ = [
    "COLUMN_WIDTH_MM",
    "PAGE_WIDTH_MM",
    "candidate_map",
    "convergence_figure",
    "corner_figure",
    "coverage_calendar",
    "field_map",
    "fingerprint_members",
    "footprint_panels",
    "influence_figure",
    "keep_path_figure",
    "moved_site_figure",
    "network_map",
    "order_sweep",
    "phasor_plane",
    "png",
    "record_length_figure",
    "record_panels",
    "result_figures",
    "satellite_figure",
    "satellite_sites_figure",
    "service_plan_figure",
    "site_sheet",
    "subset_fan",
    "world_map",
]  # fmt: skip


def result_figures(result: Estimate | FinishedRun, *, ocean: OceanFunction | None = None) -> dict[str, Figure]:
    """Draw every figure of a run.

    Parameters
    ----------
    result : Estimate or FinishedRun
        From `massfit.estimate`, or a results folder as it was read.
    ocean : OceanFunction, optional
        Gives the land of the map; the built-in one by default.

    Returns
    -------
    dict of str to matplotlib.figure.Figure
        By name, over the width of a page; those that end in ``_column`` have the width of a column.
    """
    run = result if isinstance(result, FinishedRun) else finished_run(result, command="")
    return draw_figures(run, ocean or OceanFunction.builtin())
