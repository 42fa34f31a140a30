"""Figures of site selection, from arrays: few sites and many, over a page and in a column."""

import matplotlib.pyplot as plt
import numpy as np
import pytest
import xarray as xr
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from massfit.report.figures.candidate_map import candidate_map
from massfit.report.figures.influence import influence_figure
from massfit.report.figures.record_length import record_length_figure
from massfit.report.figures.service_plan import service_plan_figure
from massfit.report.figures.siting_figures import siting_figures
from massfit.report.figures.style import house_style
from massfit.report.figures.subset_sizes import keep_path_figure, order_sweep, subset_fan

WIDTHS = (180.0, 85.0)
LAT, LON = np.arange(-89.0, 90.0, 2.0), np.arange(1.0, 360.0, 2.0)


def texts_inside(figure: Figure) -> None:
    """Nothing that is written leaves the sheet."""
    with house_style():
        FigureCanvasAgg(figure).draw()
    frame = figure.bbox
    for axes in figure.axes:
        written = [axes._left_title, axes.xaxis.label, axes.yaxis.label, *axes.texts, *axes.get_yticklabels()]
        for text in written:
            if text.get_text() and text.get_visible():
                box = text.get_window_extent()
                assert box.x0 >= frame.x0 - 1, text.get_text()
                assert box.x1 <= frame.x1 + 1, text.get_text()


@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("sites", [4, 18, 200])
def test_the_map_shows_sites_best_places_and_those_asked_about(width: float, sites: int) -> None:
    rng = np.random.default_rng(sites)
    north, _ = np.meshgrid(LAT, LON, indexing="ij")
    gain = 2.0 * np.cos(np.radians(north))
    gain[:20] = np.nan
    network, best = (np.column_stack([rng.uniform(-60, 60, n), rng.uniform(0, 360, n)]) for n in (sites, 10))
    compared = np.abs(north) < 60
    figure = candidate_map(
        gain, np.ones(gain.shape), LAT, LON, network, best, ["Here"], np.array([[0.0, 200.0]]),
        compared=compared, width_mm=width,
    )  # fmt: skip
    texts_inside(figure)
    axes = figure.axes[0]
    assert [len(points.get_offsets()) for points in axes.collections] == [sites, 10, 1]
    written = {text.get_text() for text in axes.texts}
    assert {"1", "Here"} <= written
    # the scale is made for the cells that are compared, which do not fall below 1
    assert figure.axes[1].get_xlim()[0] >= 0.8
    plt.close("all")


def test_a_map_of_which_nothing_is_known_is_still_drawn() -> None:
    nothing = np.full((len(LAT), len(LON)), np.nan)
    figure = candidate_map(nothing, np.ones(nothing.shape), LAT, LON, np.zeros((1, 2)), np.empty((0, 2)))
    texts_inside(figure)


@pytest.mark.parametrize("width", WIDTHS)
def test_the_record_length_is_read_off(width: float) -> None:
    years = np.array([0.5, 1.0, 2.0, 4.0])
    record = 0.3 / years
    sites = np.array([record, 2 * record, np.full(4, np.nan)])
    figure = record_length_figure(
        years, record, sites, 0.16 - 0.01 * years, now_hpa=0.16, target_hpa=0.14, width_mm=width
    )
    texts_inside(figure)
    left, right = figure.axes
    # two sites with a known noise, the planned recorder, the target
    assert len(left.lines) == 4
    np.testing.assert_array_equal(left.lines[2].get_ydata(), record)
    assert [line.get_label() for line in right.lines] == ["with the recorder", "as it is", "target 0.14 hPa"]


@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("sites", [1, 4, 18, 200])
def test_a_panel_for_each_site_that_matters_most(width: float, sites: int) -> None:
    rng = np.random.default_rng(sites)
    months, on = np.arange(0.0, 25.0, 3.0), 0.16
    ended = on * (1 + np.outer(rng.uniform(0.001, 0.05, sites), 1 - months / 24))
    lost = ended[:, 0] * 1.01
    ended[-1], lost[-1] = np.nan, np.nan
    if sites == 1:
        ended[0] = on
    redeployed = np.where(np.isnan(ended), on * 0.999, on * (1 + 0.4 * (ended / on - 1)))
    figure = service_plan_figure(
        [f"Site {i}" for i in range(sites)], months, ended, redeployed, lost, on_hpa=on, width_mm=width
    )
    texts_inside(figure)
    shown = min(sites, 8 if width < 100 else 12)
    assert len(figure.axes) == shown
    # the site whose loss costs most comes first
    assert figure.axes[0].get_title(loc="left") == f"Site {int(np.nanargmax(lost)) if sites > 1 else 0}"
    several = [text.get_text() for text in figure.texts if "matter most" in text.get_text()]
    assert bool(several) == (sites > shown)


@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("sites", [1, 4, 18, 200])
def test_influence_puts_the_site_that_carries_most_on_top(width: float, sites: int) -> None:
    rng = np.random.default_rng(sites)
    information, shift = rng.exponential(0.1, (sites, 2)), rng.normal(0, 0.2, (sites, 2))
    names = [f"A long name {i}" for i in range(sites)]
    wrong = np.where(np.arange(sites) == information.sum(axis=1).argmax(), 0.9, 0.0)
    figure = influence_figure(names, information, shift, wrong, width_mm=width)
    texts_inside(figure)
    left, right = figure.axes
    labels = left.get_yticklabels()
    assert labels[0].get_text() == names[information.sum(axis=1).argmax()]
    assert labels[0].get_fontweight() == "bold"
    assert len(labels) == min(sites, 30)
    assert [len(line.get_xdata()) for line in right.lines[:2]] == [min(sites, 30)] * 2


@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("sites", [3, 18, 200])
def test_fewer_sites_are_drawn_as_fan_order_and_path(width: float, sites: int) -> None:
    rng, count = np.random.default_rng(sites), np.arange(1, sites + 1)
    size = np.repeat(count, 6)
    mean = np.array([0.1, 0.8]) + rng.normal(0, 0.1, (len(size), 2)) / np.sqrt(size)[:, None]
    whole = np.array([0.1, 0.8])
    fan = subset_fan(size, mean, 0.3 / np.sqrt(size), whole_hpa=whole, whole_width_hpa=0.05, width_mm=width)
    answers, sd = np.tile(whole, (sites, 1)), 0.3 / np.sqrt(count)
    order = order_sweep(answers, sd, answers, 0.5 * sd, ordered_by="error of the record / hPa", width_mm=width)
    path = keep_path_figure({"A": sd, "D": 1.1 * sd}, np.where(count == 2, np.nan, 2 * sd), width_mm=width)
    for figure in (fan, order, path):
        texts_inside(figure)
    # the median of the widths of one size is that width
    median = next(line for line in fan.axes[2].lines if line.get_label() == "median")
    np.testing.assert_allclose(median.get_ydata(), 0.3 / np.sqrt(count))
    assert [line.get_label() for line in order.axes[2].lines][1].startswith("the agreeable first: too sure")
    np.testing.assert_array_equal(path.axes[0].lines[1].get_ydata(), sd)


def test_a_ranking_is_drawn_from_its_dataset() -> None:
    """As `massfit.results.siting` writes it: three sites, their subsets, orders and paths."""
    sites, subsets = 3, np.array([[1, 0, 0], [1, 1, 0], [0, 1, 1], [1, 1, 1]])
    pair, rows = np.full((sites, 2), 20.0), ("kept_count", "component")
    ranking = xr.Dataset(
        {
            "information_share": (("site", "component"), np.full((sites, 2), 0.2)),
            "without_site_shift_sd": (("site", "component"), np.zeros((sites, 2))),
            "outlier_probability": (("site",), np.zeros(sites)),
            "subset_has_site": (("subset", "site"), subsets),
            "subset_mean": (("subset", "component"), np.full((4, 2), 50.0)),
            "subset_sd": (("subset", "component"), np.full((4, 2), 30.0)),
            "path_sd": (("criterion", *rows), np.full((2, sites, 2), 25.0)),
            **{f"{name}_{part}": (rows, pair) for name in ("ordered", "agreeable") for part in ("mean", "sd")},
        },
        coords={"site": list("ABC"), "kept_count": [1, 2, 3], "criterion": ["A", "D"]},
        attrs={"ordered_by": "error of the record / hPa"},
    )
    figures = siting_figures({"siting.nc/ranking": ranking}, width_mm=180.0)
    assert list(figures) == ["siting_influence", "siting_sizes", "siting_order", "siting_path"]
    np.testing.assert_allclose(figures["siting_path"].axes[0].lines[1].get_ydata(), 0.25)
    assert siting_figures({}, width_mm=180.0) == {}
