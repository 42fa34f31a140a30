"""The drawing functions on small arrays: each returns a Figure that shows its data and leaves matplotlib alone."""

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib import pyplot as plt
from matplotlib.figure import Figure
from matplotlib.patches import Ellipse

from massfit.report.corner_figure import corner_figure
from massfit.report.draw import png
from massfit.report.network_map import network_map
from massfit.report.phasor_plane import phasor_plane
from massfit.report.record_panels import RecordRow, record_panels

RNG = np.random.default_rng(1)
DRAWS = np.array([0.1, -0.85]) + 0.05 * RNG.standard_normal((500, 2))
SITES = ("North", "South", "East", "West", "Middle", "Left", "Right", "Off the map")
PHASORS = np.array([0.1, -0.85]) + 0.05 * np.array(
    [[1, 1], [-1, -1], [2, 0], [-2, 0], [0, 0], [-1, 2], [1, -2], [118, 97]]
)
COVARIANCES = np.array([[[0.04, 0.0], [0.0, 0.01]]] * len(SITES))


@pytest.fixture(autouse=True)
def nothing_left_behind():
    before = dict(mpl.rcParams)
    yield
    assert plt.get_fignums() == []
    assert dict(mpl.rcParams) == before


def words(figure: Figure) -> str:
    return " ".join(text.get_text() for axes in figure.axes for text in axes.texts)


def test_phasor_plane_draws_sites_answer_and_those_beyond_the_frame() -> None:
    figure = phasor_plane(DRAWS, SITES, PHASORS, COVARIANCES, reference_year=2016)
    whole, near = figure.axes
    ellipse = next(patch for patch in whole.patches if isinstance(patch, Ellipse))
    # axes of the 50 % ellipse: 2 sd sqrt(2 ln 2)
    assert ellipse.width == pytest.approx(2 * 0.2 * np.sqrt(2 * np.log(2)), rel=1e-5)
    assert ellipse.height == pytest.approx(2 * 0.1 * np.sqrt(2 * np.log(2)), rel=1e-5)
    assert tuple(ellipse.center) == pytest.approx((0.15, -0.8))
    assert "Off the map: 7.2 hPa" in words(figure)
    assert "Oct" in words(figure)
    assert near.get_xlim()[0] < 0.1 < near.get_xlim()[1]
    assert len(png(figure)) > 10_000


def test_phasor_plane_draws_the_contours_given() -> None:
    square = np.array([[0.0, -0.9], [0.2, -0.9], [0.2, -0.8], [0.0, -0.9]])
    figure = phasor_plane(DRAWS, SITES, PHASORS, COVARIANCES, reference_year=2016, contours=[(0.95, [square])])
    for axes in figure.axes:
        assert any(np.array_equal(line.get_xydata(), square) for line in axes.lines)


def test_months_stand_where_a_cycle_that_peaks_then_points() -> None:
    figure = phasor_plane(DRAWS, SITES, PHASORS, COVARIANCES, reference_year=2016)
    place = {text.get_text(): np.array(text.xy) for text in figure.axes[0].texts if len(text.get_text()) == 3}
    turn = {month: np.angle(complex(*xy)) % (2 * np.pi) for month, xy in place.items()}
    # in phase is January, and time runs against the clock: 1 October is day 274 of 2016
    assert turn["Jan"] == pytest.approx(0.0, abs=1e-9)
    assert turn["Oct"] == pytest.approx(2 * np.pi * 274 / 365.2422, abs=1e-6)


def test_network_map_puts_sites_in_place_in_either_convention() -> None:
    fraction = np.zeros((18, 36))
    fraction[:, :20] = 1.0
    figure = network_map(
        fraction,
        np.arange(85.0, -90.0, -10.0),
        np.arange(-175.0, 180.0, 10.0),
        SITES[:3],
        np.array([10.0, -10.0, 0.0]),
        np.array([-30.0, 200.0, 330.0]),
        np.array([1.1 + 0.0j, 1.0 + 0.1j, 0.9]),
        doubtful=[False, True, False],
    )
    axes = figure.axes[0]
    points = np.concatenate([np.asarray(group.get_offsets()) for group in axes.collections])
    assert sorted(points.tolist()) == [[200.0, -10.0], [330.0, 0.0], [330.0, 10.0]]
    shades = np.concatenate([np.asarray(group.get_array()) for group in axes.collections])
    assert sorted(shades) == pytest.approx([0.9, np.hypot(1.0, 0.1), 1.1])
    assert "squares" in axes.get_title(loc="left")
    assert all(site in words(figure) for site in SITES[:3])
    # land and ocean change sides at 25 degrees east; longitude runs from 0, latitude upwards
    (picture,) = axes.images
    land = ~np.ma.getmaskarray(picture.get_array())
    assert land[:, 3:18].all()
    assert not land[:, :2].any()
    assert not land[:, 19:].any()


def test_corner_figure_has_a_panel_for_each_pair() -> None:
    figure = corner_figure({"one / hPa": RNG.normal(size=2000), "two / d": RNG.normal(3.0, 2.0, 2000)})
    assert len(figure.axes) == 4
    labels = {axes.get_xlabel() for axes in figure.axes} | {axes.get_ylabel() for axes in figure.axes}
    assert {"one / hPa", "two / d"} <= labels


def test_corner_figure_bears_a_quantity_that_does_not_vary() -> None:
    # a scale may sit still when there is nothing to learn about it
    assert isinstance(corner_figure({"one": RNG.normal(size=500), "still": np.full(500, 0.3)}), Figure)


def record_row(site: str, note: str = "") -> RecordRow:
    time = np.datetime64("2015-01-01T12", "ns") + np.arange(400) * np.timedelta64(1, "D")
    wave = np.sin(np.arange(400) / 58.0)
    halves = [(time[:200], wave[:200], 0.1 * wave[:200]), (time[200:], wave[200:], 0.1 * wave[200:])]
    return RecordRow(site, halves, time, {"pole tide": 0.1 * wave}, time, wave, 0.9 * wave, note)


def test_record_panels_have_a_row_a_site() -> None:
    figure = record_panels([record_row("North"), record_row("South", "not quiet")])
    assert len(figure.axes) == 6
    record, corrections, reduced = figure.axes[3:]
    assert record.get_title(loc="left") == "South  (not quiet)"
    assert len(record.lines) == 4
    assert [line.get_label() for line in corrections.lines] == ["pole tide"]
    assert len(reduced.lines) == 2
    assert len(png(figure)) > 10_000


def test_record_panels_bear_a_single_site_without_corrections() -> None:
    row = record_row("Alone")
    bare = RecordRow("Alone", row.deployments, row.correction_time, {}, row.reduced_time, row.reduced, row.annual)
    assert len(record_panels([bare]).axes) == 3


def test_a_name_with_dollar_signs_is_no_formula() -> None:
    name = r"East $\frac$ & <West>"
    assert len(png(record_panels([record_row(name)]))) > 10_000
    plane = phasor_plane(DRAWS, [name], PHASORS[:1], COVARIANCES[:1], reference_year=2016)
    assert name in words(plane)
    assert len(png(plane)) > 10_000
