"""The drawing functions on small arrays: each returns a Figure that shows its data and leaves matplotlib alone."""

from collections.abc import Sequence

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib import pyplot as plt
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from massfit.report.figures.corner import corner_figure
from massfit.report.figures.fingerprint_members import fingerprint_members
from massfit.report.figures.labels import place_labels
from massfit.report.figures.moved_site import moved_site_figure
from massfit.report.figures.network_map import network_map
from massfit.report.figures.phasor_plane import phasor_plane
from massfit.report.figures.record_panels import RecordRow, record_panels
from massfit.report.figures.render import png
from massfit.report.figures.style import placed_axes, sheet
from massfit.report.words.names import fitted

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
    (ellipses,) = whole.collections
    box = ellipses.get_paths()[0].get_extents()
    # axes of the 50 % ellipse: 2 sd sqrt(2 ln 2)
    assert box.width == pytest.approx(2 * 0.2 * np.sqrt(2 * np.log(2)), rel=1e-5)
    assert box.height == pytest.approx(2 * 0.1 * np.sqrt(2 * np.log(2)), rel=1e-5)
    assert (box.min + box.max) / 2 == pytest.approx((0.15, -0.8))
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
    fraction[:, :22] = 1.0
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
    # the map begins at 20 degrees east; the land reaches from 40 to 180; latitude runs upwards
    (picture,) = axes.images
    assert picture.get_extent() == [20.0, 380.0, -90.0, 90.0]
    land = ~np.ma.getmaskarray(picture.get_array())
    assert not land[:, :2].any()
    assert land[:, 2:16].all()
    assert not land[:, 16:].any()


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
    record, corrections, reduced = figure.axes
    assert [text.get_text() for text in record.texts if "South" in text.get_text()] == ["South  (not quiet)"]
    assert len(record.lines) == 8
    assert {line.get_label() for line in corrections.lines} == {"pole tide"}
    assert len(reduced.lines) == 4
    # rows run downwards; each line keeps to its own row
    assert record.get_ylim() == (2, 0)
    for axes in figure.axes:
        for line in axes.lines:
            heights = np.asarray(line.get_ydata(), dtype=float)
            assert np.floor(heights.min()) == np.floor(heights.max()) in {0.0, 1.0}
    assert len(png(figure)) > 10_000


def test_the_scale_beside_a_row_is_that_of_its_lines() -> None:
    figure = record_panels([record_row("North"), record_row("South")])
    reduced = figure.axes[2]
    annual = 0.9 * np.sin(np.arange(400) / 58.0)
    heights = np.asarray(reduced.lines[3].get_ydata(), dtype=float)
    ticks = [(float(text.get_text()), text.get_position()[1]) for text in reduced.texts]
    for value, height in ticks:
        if height > 1.0:
            assert np.interp(value, annual[:80], heights[:80]) == pytest.approx(height, abs=1e-3) or value < 0
    assert sum(height > 1.0 for _, height in ticks) >= 2


def test_record_panels_bear_a_single_site_without_corrections() -> None:
    row = record_row("Alone")
    bare = RecordRow("Alone", row.deployments, row.correction_time, {}, row.reduced_time, row.reduced, row.annual)
    assert len(record_panels([bare]).axes) == 3
    assert len(png(record_panels([bare]))) > 5_000


def test_record_panels_bear_a_site_of_which_no_day_was_used() -> None:
    none, nothing = np.array([], "datetime64[ns]"), np.array([])
    assert len(png(record_panels([RecordRow("Bare", [], none, {}, none, nothing, nothing)]))) > 1_000


def test_in_a_column_only_what_remains_is_drawn() -> None:
    assert len(record_panels([record_row("North")], width_mm=85.0).axes) == 1


def test_a_name_with_dollar_signs_is_no_formula() -> None:
    name = r"East $\frac$ & <West>"
    assert len(png(record_panels([record_row(name)]))) > 10_000
    plane = phasor_plane(DRAWS, [name], PHASORS[:1], COVARIANCES[:1], reference_year=2016)
    assert name in words(plane)
    assert len(png(plane)) > 10_000


@pytest.mark.filterwarnings("error")
def test_a_name_in_a_script_that_the_font_lacks_does_not_disturb() -> None:
    name = "深海観測点"
    figures = [
        record_panels([record_row(name)]),
        phasor_plane(DRAWS, [name], PHASORS[:1], COVARIANCES[:1], reference_year=2016),
        fingerprint_members([name], [name], np.ones((1, 1), dtype=complex)),
    ]
    assert all(len(png(figure)) > 1_000 for figure in figures)


# names beside points


def boxes(axes: Axes, names: Sequence[str]) -> np.ndarray:
    found = [text.get_window_extent().extents for text in axes.texts if text.get_text() in names]
    return np.array(found).reshape(-1, 4)


def overlaps(found: np.ndarray) -> int:
    first, second = found[:, None], found[None]
    both = (first[..., :2] < second[..., 2:]).all(-1) & (second[..., :2] < first[..., 2:]).all(-1)
    return int((both.sum() - len(found)) // 2)


def crowd(count: int) -> tuple[Axes, list[str], np.ndarray]:
    axes = placed_axes(sheet(100.0, 100.0), 10.0, 10.0, 80.0, 80.0)
    return axes, [f"Station {k}" for k in range(count)], np.random.default_rng(5).uniform(0.2, 0.8, (count, 2))


def test_names_in_a_crowd_do_not_overlap_each_other_or_the_points() -> None:
    axes, names, points = crowd(40)
    missing = place_labels(axes, names, points)
    found = boxes(axes, names)
    assert len(found) == 40 - missing
    assert missing <= 4
    assert overlaps(found) == 0
    spots = axes.transData.transform(points)
    inside = (found[:, None, :2] < spots[None]).all(-1) & (spots[None] < found[:, None, 2:]).all(-1)
    assert not inside.any()
    # the control: names simply put beside their points do overlap
    plain, names, points = crowd(40)
    for name, point in zip(names, points, strict=True):
        plain.annotate(name, point, xytext=(4, 3), textcoords="offset points", fontsize=6.0)
    assert overlaps(boxes(plain, names)) > 10


def test_names_without_room_are_counted_not_piled_up() -> None:
    axes, names, points = crowd(60)
    missing = place_labels(axes, names, 0.5 + 0.02 * (points - 0.5))
    assert missing > 20
    assert overlaps(boxes(axes, names)) == 0


def test_a_lone_name_stands_by_its_point_and_a_long_one_is_shortened() -> None:
    axes, _, _ = crowd(0)
    name = "The-station-with-the-longest-name-of-all"
    assert place_labels(axes, [name], np.array([[0.5, 0.5]])) == 0
    (text,) = axes.texts
    assert text.get_text() == fitted(name, 22)
    # points from the marker: to the right and up
    assert 0.0 < text.xyann[0] < 6.0
    assert 0.0 < text.xyann[1] < 6.0
    assert place_labels(axes, [], np.empty((0, 2))) == 0


# fingerprints


def test_members_are_drawn_by_ratio_and_delay() -> None:
    members = np.array([[1.1 + 0.0j, 0.9j], [1.2 + 0.0j, 1.0 + 0.0j]])
    figure = fingerprint_members(
        ["A", "B"], ["wet", "dry"], members, compared=np.array([1.0, 1.0]), compared_name="flat"
    )
    ratio, delay = figure.axes
    assert [label.get_text() for label in ratio.get_yticklabels()] == ["A", "B"]
    drawn = {line.get_label(): line.get_xdata() for line in ratio.lines}
    assert drawn["wet"] == pytest.approx([1.1, 0.9])
    assert drawn["flat"] == pytest.approx([1.0, 1.0])
    # a quarter turn is a quarter of the tropical year
    assert {line.get_label(): line.get_xdata() for line in delay.lines}["wet"] == pytest.approx([0.0, 91.31055])
    assert ratio.get_xlabel() == "amplitude / ocean mean"
    assert delay.get_xlabel() == "delay / days"


def test_many_members_share_one_mark() -> None:
    members = np.ones((40, 3)) + 0.1 * RNG.standard_normal((40, 3))
    figure = fingerprint_members(["A", "B", "C"], [f"m{k}" for k in range(40)], members.astype(complex))
    assert [text.get_text() for text in figure.legends[0].get_texts()] == ["40 load members"]


# both widths, from one site to many


@pytest.mark.parametrize("width_mm", [180.0, 85.0])
@pytest.mark.parametrize("count", [1, 60])
def test_figures_have_their_width_and_keep_all_text_on_the_sheet(count: int, width_mm: float) -> None:
    rng = np.random.default_rng(count)
    names = [f"Observatory number {k}" for k in range(count)]
    phasors = np.array([0.1, -0.85]) + 0.15 * rng.standard_normal((count, 2))
    covariances = np.broadcast_to(0.02 * np.eye(2), (count, 2, 2))
    admittance = 1.0 + 0.1 * (rng.standard_normal((5, count)) + 1j * rng.standard_normal((5, count)))
    places = rng.uniform(-60, 60, count), rng.uniform(0, 360, count)
    fraction, cells = np.zeros((18, 36)), (np.arange(-85.0, 90.0, 10.0), np.arange(5.0, 360.0, 10.0))
    figures = [
        phasor_plane(DRAWS, names, phasors, covariances, reference_year=2016, width_mm=width_mm),
        network_map(fraction, *cells, names, *places, admittance.mean(axis=0), width_mm=width_mm),
        fingerprint_members(names, ["m1", "m2", "m3", "m4", "m5"], admittance, width_mm=width_mm),
        record_panels([record_row(name) for name in names[:18]], width_mm=width_mm),
        corner_figure({"one / hPa": DRAWS[:, 0], "two / hPa": DRAWS[:, 1]}, width_mm=width_mm),
    ]
    for figure in figures:
        width, height = figure.get_size_inches()
        assert width * 25.4 == pytest.approx(width_mm)
        assert height * 25.4 < 297.0
        # what is drawn, in inches; half a pixel of rounding
        drawn, slack = figure.get_tightbbox(), 0.5 / figure.dpi
        assert -slack <= drawn.x0 <= drawn.x1 <= width + slack
        assert -slack <= drawn.y0 <= drawn.y1 <= height + slack


@pytest.mark.parametrize("days", [1, 3, 20, 100, 400, 700, 850, 930, 1000, 1090, 1300, 2000, 4000, 9000])
def test_dates_of_records_of_any_length_have_ticks_without_overlap(days: int) -> None:
    time = np.datetime64("2014-01-01T12", "ns") + np.arange(days) * np.timedelta64(1, "D")
    wave = np.sin(np.arange(days) / 58.0)
    figure = record_panels([RecordRow("A", [(time, wave, wave)], time, {}, time, wave, wave)])
    figure.draw_without_rendering()
    found = [label.get_window_extent().extents for label in figure.axes[0].get_xticklabels() if label.get_text()]
    assert len(found) >= 2 or days == 1
    assert overlaps(np.array(found).reshape(-1, 4)) == 0


def test_a_date_at_the_very_end_stays_on_the_sheet() -> None:
    time = np.datetime64("2014-01-01", "ns") + np.arange(731) * np.timedelta64(1, "D")
    wave = np.sin(np.arange(731) / 58.0)
    figure = record_panels([RecordRow("A", [(time, wave, wave)], time, {}, time, wave, wave)])
    assert figure.get_tightbbox().x1 <= figure.get_size_inches()[0]


@pytest.mark.parametrize("width_mm", [85.0, 180.0])
def test_the_moved_site_is_drawn_with_the_line_of_the_answer_stronger(width_mm: float) -> None:
    figure = moved_site_figure(
        "A3", [0.0, 1.0, 5.0], {"normal": [0.0, 0.1, 0.4], "student-t": [0.0, 0.1, 0.02]}, used="student-t",
        width_mm=width_mm,
    )  # fmt: skip
    (axes,) = figure.axes
    normal, student = axes.get_lines()
    assert student.get_linewidth() > normal.get_linewidth()
    assert student.get_linestyle() != normal.get_linestyle()  # told apart without colour
    assert [text.get_text() for text in axes.get_legend().get_texts()] == [
        "normal site scatter", "Student-t site scatter (this answer)",
    ]  # fmt: skip
    assert axes.get_xlabel() == "A3 moved by / hPa"
