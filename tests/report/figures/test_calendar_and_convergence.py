"""The calendar, the convergence and the map of any field show what they are given, at both widths."""

import numpy as np
import pytest
import xarray as xr
from matplotlib.collections import QuadMesh
from matplotlib.figure import Figure

from massfit.errors import InputError
from massfit.report.figures.convergence import convergence_figure
from massfit.report.figures.coverage_calendar import coverage_calendar
from massfit.report.figures.field_map import field_map
from massfit.results.chains import chain_diagnostics

WIDTHS = [pytest.param(180.0, id="page"), pytest.param(85.0, id="column")]
MONTHS = np.arange("2015-01", "2017-07", dtype="datetime64[M]").astype("datetime64[ns]")


def coverage(sites: int, name: str = "site") -> xr.Dataset:
    share = np.full((sites, MONTHS.size), 1.0)
    share[0, :3], share[0, 3:6], share[-1, 6:9] = np.nan, 0.0, 0.6
    return xr.Dataset(
        {"share": (("site", "month"), share), "deployed": (("deployment",), MONTHS[[3]])},
        {
            "site": [f"{name} {k}" for k in range(sites)],
            "month": MONTHS,
            "site_of_deployment": (("deployment",), [f"{name} 0"]),
        },
    )


def chains(quantities: int) -> xr.Dataset:
    rng = np.random.default_rng(2)
    scales = {f"s_{k}": (("chain", "draw"), rng.gamma(4.0, size=(4, 400))) for k in range(quantities - 2)}
    phasor = rng.standard_normal((4, 400, 2))
    return chain_diagnostics(
        xr.Dataset({"member_annual_phasor": (("chain", "draw", "component"), phasor), **scales}, attrs={"walkers": 4})
    )


def stays_on_the_sheet(figure: Figure) -> bool:
    box, (width, height) = figure.get_tightbbox(), figure.get_size_inches()
    return bool(box.x0 >= -0.01 and box.y0 >= -0.01 and box.x1 <= width + 0.01 and box.y1 <= height + 0.01)


@pytest.mark.parametrize("width_mm", WIDTHS)
@pytest.mark.parametrize("sites", [1, 18, 60])
def test_the_calendar_has_a_cell_for_every_month_with_data(sites: int, width_mm: float) -> None:
    figure = coverage_calendar(coverage(sites, "a rather long name of site"), width_mm=width_mm)
    calendar, count = figure.axes
    (mesh,) = [each for each in calendar.collections if isinstance(each, QuadMesh)]
    shown = np.ma.array(mesh.get_array()).reshape(sites, MONTHS.size)
    assert np.ma.getmaskarray(shown)[0, :3].all()
    assert np.ma.getmaskarray(shown).sum() == 3
    steps = mesh.norm(shown)
    # darker with more, in four steps
    assert [int(steps[0, 3]), int(steps[-1, 6]), int(steps[-1, 12])] == [0, 2, 3]
    assert count.get_ylim()[1] > sites - 1
    assert stays_on_the_sheet(figure)
    assert figure.get_size_inches()[1] * 25.4 < 297.0  # a page of A4


@pytest.mark.parametrize("width_mm", WIDTHS)
def test_the_steps_of_the_calendar_differ_in_grey(width_mm: float) -> None:
    figure = coverage_calendar(coverage(3), width_mm=width_mm)
    (mesh,) = [each for each in figure.axes[0].collections if isinstance(each, QuadMesh)]
    grey = np.array([np.dot(mesh.cmap(k)[:3], [0.299, 0.587, 0.114]) for k in range(4)])  # ITU-R BT.601
    assert (np.diff(grey) < -0.1).all()


def test_an_empty_calendar_is_drawn() -> None:
    empty = xr.Dataset(
        {"share": (("site", "month"), np.zeros((0, 0)))}, {"site": np.array([], object), "month": MONTHS[:0]}
    )
    assert stays_on_the_sheet(coverage_calendar(empty))


@pytest.mark.parametrize("width_mm", WIDTHS)
@pytest.mark.parametrize("quantities", [2, 6, 7])
def test_the_convergence_shows_every_chain_and_both_limits(quantities: int, width_mm: float) -> None:
    content = chains(quantities)
    figure = convergence_figure(content, words={"s_0": "site scatter"}, width_mm=width_mm)
    *traces, memory, rhat, effective = figure.axes
    assert [len(axes.lines) for axes in traces] == ([4] * quantities if width_mm > 100.0 else [])
    for axes, wanted in zip(reversed(traces), content["trace"].values, strict=False):
        # a hundred steps are drawn as sixty means: forty of two steps, then twenty of one
        drawn = np.array([line.get_ydata() for line in axes.lines])
        assert drawn.shape == (4, 60)
        assert drawn[:, 0] == pytest.approx(wanted[:, :2].mean(axis=1))
        assert drawn[:, 40:] == pytest.approx(wanted[:, 80:])
    assert [text.get_text() for text in rhat.get_yticklabels()][:2] == ["in phase", "quadrature"]
    assert rhat.lines[0].get_xdata() == pytest.approx(content["rhat"].values)
    assert effective.lines[1].get_xdata() == pytest.approx(content["ess_tail"].values)
    assert "> 1.01" in rhat.get_title(loc="left")
    assert len(memory.get_legend().get_texts()) == quantities
    assert stays_on_the_sheet(figure)


def test_convergence_that_could_not_be_judged_is_drawn_too() -> None:
    content = chains(3)
    content["rhat"][:], content["ess_bulk"][:], content["ess_tail"][:] = np.nan, np.nan, np.nan
    assert stays_on_the_sheet(convergence_figure(content))


def field(latitude: np.ndarray, longitude: np.ndarray) -> xr.DataArray:
    values = np.add.outer(latitude, 0.0 * longitude)
    return xr.DataArray(values, {"lat": latitude, "lon": longitude}, ("lat", "lon"), "height", {"units": "mm"})


@pytest.mark.parametrize("width_mm", WIDTHS)
def test_a_field_is_drawn_where_it_is_in_any_order(width_mm: float) -> None:
    # the value of a cell is its latitude: upside down, other convention of longitudes, a part of the world
    north_first = field(np.arange(59.5, -60.0, -1.0), np.arange(-179.5, 180.0))
    figure = field_map(north_first, {"A": (-11.0, 205.5)}, width_mm=width_mm)
    image = figure.axes[0].images[0]
    west, east, south, north = image.get_extent()
    shown = np.ma.array(image.get_array())
    rows = south + (np.arange(len(shown)) + 0.5) * (north - south) / len(shown)
    known = ~np.ma.getmaskarray(shown).all(axis=1)
    assert rows[known].min() > -60.0
    assert rows[known].max() < 60.0
    assert shown.mean(axis=1).compressed() == pytest.approx(rows[known])
    assert (east - west, south, north) == (360.0, -90.0, 90.0)
    assert figure.axes[1].get_xlabel() == "height / mm"
    assert stays_on_the_sheet(figure)


def test_a_field_without_an_ocean_or_of_another_shape_is_refused() -> None:
    inland = field(np.arange(45.0, 55.0), np.arange(75.0, 85.0))
    with pytest.raises(InputError, match="no value on the ocean is finite"):
        field_map(inland)
    with pytest.raises(InputError, match="Must be \\('lat', 'lon'\\)"):
        field_map(inland.T)
