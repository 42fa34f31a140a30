"""One look for every figure: plain, colour-blind safe, readable in grey."""

from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

import matplotlib as mpl
from matplotlib.axes import Axes

# colours of Okabe & Ito (2008), by role
ANSWER = "#0072B2"
SITE = "#E69F00"
MODEL = "#56B4E9"
REFERENCE = "#4D4D4D"
LAND = "#D9D9D9"

_SETTINGS: dict[Any, Any] = {
    "font.size": 9.0,
    "text.parse_math": False,  # a name may hold a dollar sign
    "axes.titlesize": 10.0,
    "axes.titlelocation": "left",
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.grid": False,
    "legend.frameon": False,
    "legend.fontsize": 8.5,
    "lines.linewidth": 1.0,
    "figure.dpi": 120.0,
}


@contextmanager
def house_style() -> Iterator[None]:
    """Draw what is inside in the house style, leaving the user's own settings alone."""
    with mpl.rc_context(_SETTINGS):
        yield


def zero_lines(axes: Axes) -> None:
    """Thin lines through the origin of a plane."""
    axes.axhline(0.0, color=REFERENCE, linewidth=0.5, zorder=0)
    axes.axvline(0.0, color=REFERENCE, linewidth=0.5, zorder=0)
