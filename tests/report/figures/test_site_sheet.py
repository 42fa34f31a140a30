"""The figure of one site: everything on the sheet, nothing over another, for sites of every kind."""

from dataclasses import replace

import numpy as np
import pytest

from massfit.report.figures.site_sheet import sheet_png, site_sheet
from massfit.report.figures.style import SERIES_COLOURS
from massfit.results.daily_parts import SERIES
from massfit.results.site_sheet import DeploymentCurve, SiteSheet, Spectrum

RNG = np.random.default_rng(3)


def sheet_of(days: int = 700, recorders: int = 2, years: int = 2, *, name: str = "North Rise") -> SiteSheet:
    time = np.datetime64("2015-01-01T12", "ns") + np.arange(days) * np.timedelta64(1, "D")
    wave = np.sin(np.arange(days) / 58.0)
    parts = np.array_split(np.arange(days), recorders)
    curves = tuple(
        DeploymentCurve(f"{name}/{n}", time[own], 20.0 * wave[own], 19.0 * wave[own], np.full(len(own), 0.3))
        for n, own in enumerate(parts, 1)
    )
    frequency = np.geomspace(0.5, 180.0, 25)
    density = 10.0 / frequency
    spectrum = Spectrum(frequency, density * RNG.uniform(0.7, 1.4, 25), density, density, 0.5 * density, 2.0 * density)
    points = [np.array([0.1, -0.8]) + 0.2 * RNG.standard_normal(2) for _ in range(years)]
    return SiteSheet(
        site=name,
        place="12.50 N, 154.20 W, 4870 m deep, tropical Pacific",
        deployments=curves,
        steps=(time[days // 3],),
        excluded=((time[days // 2], time[days // 2 + 10]),),
        missing=time[days // 4 : days // 4 + 12].astype("datetime64[D]"),
        corrections=dict.fromkeys(SERIES, 0.5 * wave),
        models=np.array([0.4 * wave, 0.6 * wave]),
        correction_time=time,
        reduced_time=time,
        reduced=wave,
        annual=0.9 * wave,
        spectrum=spectrum,
        autocorrelation=0.03 * RNG.standard_normal(30),
        autocorrelation_limit=0.05,
        years=[(2015 + k, point, 0.02 * np.eye(2)) for k, point in enumerate(points)],
        phasor=np.array([0.1, -0.8]),
        covariance=0.01 * np.eye(2),
        walk=[
            ("record", np.array([0.4, -0.6])),
            ("long-period tides", np.array([0.3, -0.7])),
            ("pole tide", np.array([0.1, -0.8])),
        ],
        facts=[("phasor", "amplitude 0.81 hPa"), ("days", "many words " * 30)],
        doubts=("Not quiet: for a reason that takes a few words.",),
    )


KINDS = {
    "usual": {},
    "short": {"days": 92, "recorders": 1, "years": 0},
    "long": {"days": 4000, "recorders": 5, "years": 11},
    "a long name": {"name": "Observatory of the very far and quiet southern deep sea floor, second mooring"},
    "a script": {"name": "深海 $x_1$ <観測>"},
}


@pytest.mark.filterwarnings("ignore:Glyph .* missing from font")
@pytest.mark.parametrize(
    ("kind", "width_mm"),
    [("usual", 180.0), ("long", 180.0), ("a script", 180.0), ("short", 130.0), ("a long name", 130.0)],
)
def test_everything_stays_on_the_sheet(kind: str, width_mm: float) -> None:
    figure = site_sheet(sheet_of(**KINDS[kind]), width_mm=width_mm)
    width, height = figure.get_size_inches()
    assert width * 25.4 == pytest.approx(width_mm)
    drawn, slack = figure.get_tightbbox(), 0.5 / figure.dpi
    assert -slack <= drawn.x0 <= drawn.x1 <= width + slack
    assert -slack <= drawn.y0 <= drawn.y1 <= height + slack


@pytest.mark.parametrize("kind", ["short", "long"])
def test_panels_and_their_words_keep_off_each_other(kind: str) -> None:
    figure = site_sheet(sheet_of(**KINDS[kind]))
    figure.draw_without_rendering()
    boxes = np.array([axes.get_tightbbox().extents for axes in figure.axes])
    first, second = boxes[:, None], boxes[None]
    # ticks may come as near as a pixel and a half
    both = (first[..., :2] + 1.5 < second[..., 2:]).all(-1) & (second[..., :2] + 1.5 < first[..., 2:]).all(-1)
    assert both.sum() == len(boxes)
    subtracted = figure.axes[1]
    assert subtracted.get_legend().get_window_extent().x0 > subtracted._left_title.get_window_extent().x1


def test_what_is_drawn_is_what_was_given() -> None:
    content = sheet_of()
    figure = site_sheet(content)
    record, corrections, remains, spectrum, white, years, walk = figure.axes
    assert len(record.lines) == 2 * len(content.deployments) + len(content.steps)
    assert {line.get_label() for line in corrections.lines} == set(content.corrections)
    np.testing.assert_allclose(remains.lines[0].get_ydata(), content.reduced)
    np.testing.assert_allclose(spectrum.lines[2].get_ydata(), content.spectrum.density)
    assert spectrum.get_xscale() == spectrum.get_yscale() == "log"
    assert len(white.collections[0].get_segments()) == 30
    assert sum(text.get_text() in {"2015", "2016"} for text in years.texts) == 2
    assert {text.get_text() for text in walk.texts} >= {"record", "site"}
    words = [text.get_text() for text in figure.texts]
    assert "amplitude 0.81 hPa" in words
    assert any("12 days not used" in text.get_text() for text in record.texts)


def test_a_site_that_was_not_judged_has_no_spectrum() -> None:
    bare = replace(sheet_of(), spectrum=None, autocorrelation=np.zeros(0), years=[], corrections={}, doubts=())
    assert len(site_sheet(bare).axes) == 5


def test_a_line_does_not_cross_a_gap() -> None:
    content = sheet_of(recorders=1)
    curve = content.deployments[0]
    kept = np.r_[0:100, 160:700]
    holed = DeploymentCurve("x/1", curve.time[kept], curve.pressure[kept], curve.drift[kept], curve.drift_sd[kept])
    line = site_sheet(replace(content, deployments=(holed,))).axes[0].lines[0]
    assert np.isnan(line.get_ydata()).sum() == 1


def test_every_series_has_a_colour() -> None:
    assert list(SERIES_COLOURS) == list(SERIES)


def test_the_picture_is_small() -> None:
    picture = sheet_png(sheet_of())
    assert picture.startswith(b"\x89PNG")
    assert len(picture) < 160_000
