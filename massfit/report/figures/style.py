"""One look for every figure: plain, colour-blind safe, readable in grey, at the width of a page or of a column."""

import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

import matplotlib as mpl
from matplotlib.axes import Axes
from matplotlib.figure import Figure

# colours of Okabe & Ito (2008), by role
ANSWER = "#0072B2"
SITE = "#E69F00"
SATELLITE = "#009E73"
REFERENCE = "#4D4D4D"
LAND = "#D9D9D9"

SERIES_COLOURS = {
    "long-period tides": "#C8C8C8",
    "circulation (model mean)": "#0072B2",
    "ocean-mean air pressure": "#E69F00",
    "pole tide": "#000000",
}
"""Of the series that are subtracted, in the order in which they are drawn: the fast tides lie behind the rest."""

PAGE_WIDTH_MM = 180.0
"""Width of a figure over the whole page."""

COLUMN_WIDTH_MM = 85.0
"""Width of a figure in one of two columns."""

_MM_PER_INCH = 25.4

_SETTINGS: dict[Any, Any] = {
    "font.size": 7.5,
    "text.parse_math": False,  # a name may hold a dollar sign
    "axes.titlesize": 8.5,
    "axes.titlelocation": "left",
    "axes.titlepad": 4.0,
    "axes.labelsize": 7.5,
    "axes.labelpad": 2.0,
    "axes.linewidth": 0.6,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.grid": False,
    "xtick.labelsize": 7.0,
    "ytick.labelsize": 7.0,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.major.size": 2.5,
    "ytick.major.size": 2.5,
    "legend.frameon": False,
    "legend.fontsize": 7.0,
    "lines.linewidth": 0.9,
    "figure.dpi": 120.0,
}


@contextmanager
def house_style() -> Iterator[None]:
    """Draw what is inside in the house style, leaving the user's own settings alone."""
    with mpl.rc_context(_SETTINGS), warnings.catch_warnings():
        # a script that the font does not hold is drawn as boxes; the page beside it has the name
        warnings.filterwarnings("ignore", message="Glyph .* missing from font")
        yield


def sheet(width_mm: float, height_mm: float) -> Figure:
    """Make an empty figure of a size in millimetres."""
    return Figure(figsize=(width_mm / _MM_PER_INCH, height_mm / _MM_PER_INCH))


def placed_axes(figure: Figure, left: float, bottom: float, width: float, height: float) -> Axes:
    """Add axes whose frame stands at a place of the sheet, all in millimetres.

    Parameters
    ----------
    figure : Figure
    left, bottom, width, height : float
        Of the frame, without its labels.

    Returns
    -------
    Axes
    """
    across, up = (float(size) * _MM_PER_INCH for size in figure.get_size_inches())
    return figure.add_axes((left / across, bottom / up, width / across, height / up))


def zero_lines(axes: Axes) -> None:
    """Thin lines through the origin of a plane."""
    axes.axhline(0.0, color=REFERENCE, linewidth=0.5, zorder=0)
    axes.axvline(0.0, color=REFERENCE, linewidth=0.5, zorder=0)
