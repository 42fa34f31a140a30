"""What the figures of a run are drawn from: regions that hold what they say, pages of records, both widths."""

import numpy as np
import pytest
from contourpy import contour_generator
from scipy.interpolate import RegularGridInterpolator

from massfit.figures import result_figures
from massfit.fingerprint.ocean import OceanFunction
from massfit.posterior.regions import DensityRegions, density_regions
from massfit.report.figures import draw
from massfit.report.figures.draw import draw_figures
from massfit.results.estimate import Estimate
from massfit.results.finished import FinishedRun, finished_run
from massfit.results.readings import SMOOTHING_SD


@pytest.fixture(scope="module")
def finished(run: Estimate) -> FinishedRun:
    return finished_run(run, command="massfit estimate here")


def heavy_tailed(count: int, seed: int) -> np.ndarray:
    """Draws of Student's t with 5 degrees of freedom, the kind of tail that unknown scales make."""
    rng = np.random.default_rng(seed)
    return rng.standard_normal((count, 2)) * np.sqrt(5.0 / rng.chisquare(5, count))[:, None]


def content(regions: DensityRegions, level: float, draws: np.ndarray) -> float:
    at = RegularGridInterpolator((regions.quadrature, regions.in_phase), regions.density, bounds_error=False)
    return float(np.mean(np.nan_to_num(at(draws[:, ::-1])) >= regions.levels[level]))


def raggedness(regions: DensityRegions, level: float) -> float:
    """Length of the edge over that of the circle with the same area."""
    (line,) = contour_generator(regions.in_phase, regions.quadrature, regions.density).lines(regions.levels[level])
    x, y = line.T
    area = 0.5 * abs(np.sum(x[:-1] * y[1:] - x[1:] * y[:-1]))
    return float(np.hypot(np.diff(x), np.diff(y)).sum() / np.sqrt(4.0 * np.pi * area))


@pytest.mark.parametrize("level", [0.5, 0.95])
def test_regions_that_are_drawn_hold_their_probability_and_are_not_ragged(level: float) -> None:
    draws, fresh = heavy_tailed(24_000, 1), heavy_tailed(100_000, 2)
    smooth = density_regions(draws, bandwidth=SMOOTHING_SD)
    # binomial error of the level (24 000 draws) and of the count (100 000): four of them together
    error = 4.0 * np.sqrt(level * (1.0 - level) * (1 / 24_000 + 1 / 100_000))
    assert content(smooth, level, fresh) == pytest.approx(level, abs=error)
    # the truth is round
    assert raggedness(smooth, level) < 1.004
    if level == 0.95:
        # the control: the narrow kernel shows the noise of the draws
        assert raggedness(density_regions(draws), level) > 1.015


def test_every_figure_comes_at_both_widths_but_the_records(finished: FinishedRun) -> None:
    figures = result_figures(finished)
    names = {"phasor_plane", "network_map", "fingerprint", "corner", "convergence", "coverage"}
    assert set(figures) == names | {f"{name}_column" for name in names} | {"records"}
    for name, figure in figures.items():
        millimetres = 85.0 if name.endswith("_column") else 180.0
        assert figure.get_size_inches()[0] * 25.4 == pytest.approx(millimetres)


def test_records_of_many_sites_go_on_further_pages(finished: FinishedRun, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(draw, "ROWS_OF_A_PAGE", 2)
    figures = draw_figures(finished, OceanFunction.builtin())
    assert [name for name in figures if name.startswith("records")] == ["records", "records_2"]
    shown = [text.get_text() for name in ("records", "records_2") for text in figures[name].axes[0].texts]
    assert all(site["id"] in shown for site in finished.summary["sites"])


def test_a_scale_that_is_new_is_drawn_under_its_own_name(finished: FinishedRun) -> None:
    more = finished.datasets["posterior.nc/posterior"].rename(s_common="s_other")
    figure = draw._corner(more, 180.0)
    labels = {axes.get_xlabel() for axes in figure.axes}
    assert {"amplitude / hPa", "peak / day", "site scatter / hPa", "s_other / hPa"} <= labels
