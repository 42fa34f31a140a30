"""Recorders beside satellites, drawn from arrays."""

import numpy as np
import pytest
from matplotlib.text import Text

from massfit.report.figures.satellite_sites import satellite_sites_figure
from massfit.results.comparison_rows import Reading, SiteBeside


def rows(count: int) -> list[SiteBeside]:
    rng = np.random.default_rng(count)
    found = []
    for index in range(count):
        own = Reading(0.9 + 0.1 * rng.standard_normal(), 0.2, (350.0 + 20.0 * rng.standard_normal()) % 365.0, 12.0)
        other = Reading(
            0.8 + 0.2 * rng.standard_normal(), np.nan, (355.0 + 20.0 * rng.standard_normal()) % 365.0, np.nan
        )
        found.append(SiteBeside(f"S{index}", None if index == 0 else own, other, 0.001 if index == 1 else 0.5))
    return found


@pytest.mark.parametrize("count", [1, 3, 18, 60])
@pytest.mark.parametrize("width_mm", [180.0, 85.0])
def test_every_mark_is_in_sight_and_no_text_leaves_the_sheet(count: int, width_mm: float) -> None:
    figure = satellite_sites_figure(rows(count), width_mm=width_mm)
    figure.canvas.draw()
    amplitude, day = figure.axes
    for axes in (amplitude, day):
        low, high = axes.get_xlim()
        marks = np.concatenate([line.get_xdata() for line in axes.get_lines() if line.get_marker() in ("o", "s")])
        assert marks.size == 2 * count - 1  # the first site has no recorder
        assert np.all((marks > low) & (marks < high))
    assert np.ptp(day.get_xlim()) < 365.0  # days on either side of new year stand together
    frame = figure.bbox
    for text in figure.findobj(Text):
        if text.get_text() and text.get_visible():
            box = text.get_window_extent()
            assert box.x0 >= frame.x0 - 0.5, text.get_text()
            assert box.x1 <= frame.x1 + 0.5, text.get_text()
    assert [text.get_text() for text in figure.legends[0].get_texts()] == ["recorder", "satellites"]


def test_a_site_that_disagrees_is_marked() -> None:
    figure = satellite_sites_figure(rows(3))
    labels = figure.axes[0].get_yticklabels()
    assert [label.get_fontweight() for label in labels] == ["normal", "bold", "normal"]
    assert "< 0.01" in [text.get_text() for text in figure.axes[1].texts]
