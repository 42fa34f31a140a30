"""The figures of a fingerprint on small arrays: what is where, in which colour, and that nothing leaves the sheet."""

import matplotlib as mpl
import numpy as np
import pytest
import xarray as xr
from matplotlib.figure import Figure

from massfit.fingerprint.maps import MAP_LATITUDE_DEG, MAP_LONGITUDE_DEG
from massfit.phasor import as_components, delay_days
from massfit.report.figures.fingerprint_degrees import degree_panels
from massfit.report.figures.fingerprint_figures import draw_fingerprint
from massfit.report.figures.fingerprint_maps import even_bands, footprint_panels, signed_bands, world_map
from massfit.report.figures.render import png
from massfit.report.figures.style import COLUMN_WIDTH_MM, PAGE_WIDTH_MM
from massfit.report.pages.fingerprint_page import fingerprint_sentence

NORTH, EAST = np.meshgrid(MAP_LATITUDE_DEG, MAP_LONGITUDE_DEG, indexing="ij")
OCEAN = np.where((EAST > 40.0) & (EAST < 120.0) & (NORTH > -20.0), 0.0, 1.0)
LATITUDE = np.array([10.0, -10.0, 89.7])
LONGITUDE = np.array([-179.9, 200.0, 12.0])
NAMES = ["Line $x$", "<b>B</b>", "深海 North, a long name of a place"]


def settled(count: int) -> xr.Dataset:
    """A study with invented numbers."""
    rng = np.random.default_rng(count)
    members = 1.0 + 0.1 * (rng.standard_normal((3, count)) + 1j * rng.standard_normal((3, count)))
    field = 1.0 + 0.001 * NORTH + 0.1j * np.sin(np.radians(EAST))
    mean = members.mean(axis=0)
    by_degree = mean * (1.0 + np.array([[0.01], [0.001], [0.0]]))
    site, cell = ("site",), ("lat", "lon")
    return xr.Dataset(
        {
            "admittance": (("member", "site", "component"), as_components(members)),
            "reference_admittance": (("case", "site", "component"), as_components(np.ones((2, count)))),
            "amplitude_ratio": (site, np.abs(mean)),
            "delay": (site, delay_days(mean)),
            "amplitude_ratio_spread": (site, np.full(count, 0.05)),
            "delay_spread": (site, np.full(count, 1.0)),
            "admittance_by_degree": (("degree", "site", "component"), as_components(by_degree)),
            "map_amplitude_ratio": (cell, np.abs(field)),
            "map_delay": (cell, delay_days(field)),
            "map_spread": (cell, 0.05 + 0.0 * NORTH),
            "ocean_fraction": (cell, OCEAN),
            "footprint_ratio": (("site", "lat", "lon"), 1.0 + 0.01 * np.arange(count)[:, None, None] + 0.002 * NORTH),
        },
        coords={
            "member": ["one", "two", "three"],
            "site": [f"Station {index:02d}" for index in range(count)],
            "case": ["uniform over land", "uniform ocean"],
            "degree": [45, 90, 180],
            "lat": MAP_LATITUDE_DEG,
            "lon": MAP_LONGITUDE_DEG,
            "latitude": (site, rng.uniform(-88.0, 89.0, count)),
            "longitude": (site, rng.uniform(-180.0, 360.0, count)),
        },
        attrs={"max_degree": 90},
    )


def drawn(**options: object) -> Figure:
    values = 1.0 + NORTH / 100.0
    given = {"label": "ratio", "bands": np.linspace(0.2, 1.8, 9), "neutral": 1.0, **options}
    return world_map(values, OCEAN, MAP_LATITUDE_DEG, MAP_LONGITUDE_DEG, NAMES, LATITUDE, LONGITUDE, **given)


def test_a_map_has_ocean_and_land_where_they_are() -> None:
    field, land = drawn().axes[0].images
    shown = np.ma.getmaskarray(field.get_array())
    # columns begin at 20 degrees east, rows in the south: land from 40 to 120 degrees east and north of 20 south
    assert shown[70:, 20:100].all()
    assert not shown[:70].any()
    assert not shown[:, 100:].any()
    np.testing.assert_array_equal(shown, ~np.ma.getmaskarray(land.get_array()))
    assert float(field.get_array()[0, 0]) == pytest.approx(1.0 - 0.895)


def test_sites_stand_in_place_and_have_the_colour_of_their_own_value() -> None:
    own = np.array([1.1, 0.9, 1.7])
    axes = drawn(at_sites=own).axes[0]
    markers = [group for group in axes.collections if isinstance(group, mpl.collections.PathCollection)]
    for group in markers:
        np.testing.assert_allclose(group.get_offsets(), [[180.1, 10.0], [200.0, -10.0], [372.0, 89.7]])
        np.testing.assert_array_equal(group.get_array(), own)
    # one scale for map and markers, so that a site that agrees with the map cannot be seen in it but for its edge
    assert all(group.norm is axes.images[0].norm for group in markers)
    assert "heavy line: 1" in axes.get_title(loc="left")
    assert axes.get_ylim()[1] > 90.0


@pytest.mark.parametrize("neutral", [1.0, 5.0])
def test_the_neutral_line_is_drawn_only_where_the_map_has_it(neutral: float) -> None:
    axes = drawn(neutral=neutral).axes[0]
    heavy = [group for group in axes.collections if np.any(np.asarray(group.get_linewidth()) == 0.9)]
    assert bool(heavy) == (neutral == 1.0)
    assert ("heavy" in axes.get_title(loc="left")) == (neutral == 1.0)


def test_bands_are_round_and_hold_what_they_must() -> None:
    values = np.concatenate([np.linspace(0.913, 1.207, 98), [-30.0, 40.0]])
    bands = even_bands(values, np.ones(100), keep=np.array([0.71]))
    assert bands[0] <= 0.71
    assert bands[-1] >= 1.2
    assert len(bands) <= 17
    np.testing.assert_allclose(np.diff(bands), bands[1] - bands[0])
    signed = signed_bands(np.linspace(-3.0, 0.2, 100), np.ones(100), keep=np.array([25.0]))
    assert 0.0 in signed
    assert signed[0] == -5.0
    assert signed[-1] == 50.0
    # a field that does not vary still has a scale
    assert len(even_bands(np.ones(5), np.ones(5))) >= 3
    assert len(signed_bands(np.zeros(5), np.ones(5))) >= 3


def test_footprints_show_the_land_and_the_site_of_each() -> None:
    ratios = np.stack([np.full(OCEAN.shape, value) for value in (0.5, 1.0, 1.2)])
    figure = footprint_panels(ratios, OCEAN, MAP_LATITUDE_DEG, MAP_LONGITUDE_DEG, NAMES, LATITUDE, LONGITUDE,
                              bands=np.linspace(0.4, 1.4, 6))  # fmt: skip
    panels = figure.axes[:3]
    for axes, value, east in zip(panels, (0.5, 1.0, 1.2), (180.1, 200.0, 372.0), strict=True):
        (picture,) = axes.images
        assert set(np.unique(picture.get_array().compressed())) == {value}
        assert np.ma.getmaskarray(picture.get_array())[:, 120:].all()
        assert axes.lines[0].get_xdata()[0] == pytest.approx(east)
    assert panels[0].get_title(loc="left") == NAMES[0]


def test_degrees_draw_every_site_and_name_those_that_move_most() -> None:
    change = np.array([[0.02, 0.001, 0.03, 0.002, 0.01], [0.001, 0.0001, 0.002, 0.0001, 0.0005], [0.0] * 5])
    figure = degree_panels(np.array([45, 90, 180]), list("ABCDE"), change, -10.0 * change, own_degree=90,
                           ratio_spread=0.05)  # fmt: skip
    ratio, delay = figure.axes
    named = {line.get_label(): line for line in ratio.lines if line.get_label() in set("ABCDE")}
    assert list(named) == ["C", "A", "E"]
    np.testing.assert_allclose(named["C"].get_ydata(), [0.03, 0.002])
    own = next(line for line in delay.lines if line.get_label() == "C")
    np.testing.assert_allclose(own.get_ydata(), [0.3, 0.02])
    labels = {line.get_label() for line in ratio.lines}
    assert {"median spread of the members", "degree of the settings"} <= labels
    assert ratio.get_ylim() == (1e-4, 0.1)


@pytest.mark.parametrize("count", [1, 21])
def test_pages_hold_every_site_and_all_text_stays_on_the_sheet(count: int) -> None:
    figures = draw_fingerprint(settled(count).drop_vars("map_spread"))
    footprints = [name for name in figures if name.startswith("footprints") and not name.endswith("_column")]
    members = [name for name in figures if name.startswith("members") and not name.endswith("_column")]
    assert (len(footprints), len(members)) == (-(-count // 20), -(-count // 60))
    for name, figure in figures.items():
        width = COLUMN_WIDTH_MM if name.endswith("_column") else PAGE_WIDTH_MM
        assert figure.get_size_inches()[0] * 25.4 == pytest.approx(width)
        # what is drawn, in inches; half a pixel of rounding
        seen, slack, (wide, high) = figure.get_tightbbox(), 0.5 / figure.dpi, figure.get_size_inches()
        assert -slack <= seen.x0 <= seen.x1 <= wide + slack, name
        assert -slack <= seen.y0 <= seen.y1 <= high + slack, name


def test_a_narrow_map_of_many_sites_has_no_names() -> None:
    names, places = [f"Station {k}" for k in range(25)], (np.linspace(-50, 50, 25), np.linspace(0, 300, 25))
    many = world_map(NORTH, OCEAN, MAP_LATITUDE_DEG, MAP_LONGITUDE_DEG, names, *places, label="",
                     bands=np.linspace(-90, 90, 9), width_mm=COLUMN_WIDTH_MM)  # fmt: skip
    assert not many.axes[0].texts
    assert "25 without a name" in many.axes[0].get_title(loc="left")


def test_a_single_member_has_no_map_of_its_spread() -> None:
    single = settled(2).isel(member=[0]).drop_vars(["map_spread", "amplitude_ratio_spread", "delay_spread"])
    figures = draw_fingerprint(single)
    assert "spread_map" not in figures
    assert "ratio_map_column" in figures


def test_hostile_names_are_drawn_as_they_stand() -> None:
    figure = drawn()
    assert "Line $x$" in " ".join(text.get_text() for text in figure.axes[0].texts)
    assert len(png(figure)) > 10_000


@pytest.mark.parametrize(
    ("ratio", "delay", "sentence"),
    [
        ([1.1], [-0.04], "Station 00 sees 1.100 times the amplitude of the ocean mean and peaks 0.0 days after it"),
        ([0.625, 0.6252], [16.0, 16.01], "2 sites see 0.625 times the amplitude of the ocean mean and peak 16.0 days"),
        ([1.2, 0.8], [3.2, -2.6], "see 0.800 to 1.200 times the amplitude of the ocean mean and peak from 2.6 days "
                                  "before to 3.2 days after it: the mean over 3 load members."),
    ],
)  # fmt: skip
def test_the_sentence_of_the_page(ratio: list[float], delay: list[float], sentence: str) -> None:
    study = settled(len(ratio))
    study = study.assign(amplitude_ratio=("site", ratio), delay=("site", delay))
    assert sentence in fingerprint_sentence(study)
