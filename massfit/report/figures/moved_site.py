"""How far one wrong site pulls the answer."""

from collections.abc import Mapping, Sequence

from matplotlib.figure import Figure

from massfit.report.figures.style import ANSWER, PAGE_WIDTH_MM, REFERENCE, house_style, placed_axes, sheet
from massfit.report.words.names import fitted

LONGEST_NAME = 26


def moved_site_figure(
    site: str,
    offset_hpa: Sequence[float],
    shift_hpa: Mapping[str, Sequence[float]],
    *,
    used: str,
    width_mm: float = PAGE_WIDTH_MM,
) -> Figure:
    """Draw the shift of the answer as one site is moved off.

    Parameters
    ----------
    site : str
    offset_hpa : sequence of float
    shift_hpa : mapping of str to sequence of float
        Of "normal" and "student-t" scatter.
    used : str
        The scatter of the answer given: its line is the stronger one.
    width_mm : float
        Width of the figure.

    Returns
    -------
    matplotlib.figure.Figure

    Examples
    --------
    >>> shifts = {"normal": [0.0, 0.1, 0.2], "student-t": [0.0, 0.06, 0.05]}
    >>> figure = moved_site_figure("North", [0.0, 1.0, 2.0], shifts, used="student-t")
    >>> figure.axes[0].get_ylabel()
    'shift of the answer / hPa'
    """
    with house_style():
        figure = sheet(width_mm, 58.0)
        axes = placed_axes(figure, 14.0, 10.0, width_mm - 18.0, 45.0)
        for scatter, shift in shift_hpa.items():
            strong = scatter == used
            axes.plot(
                offset_hpa, shift, color=ANSWER if strong else REFERENCE, linewidth=1.4 if strong else 0.9,
                linestyle="-" if strong else "--", marker="o" if strong else "s", markersize=3.0,
                label=f"{_WORDS[scatter]}{' (this answer)' if strong else ''}",
            )  # fmt: skip
        axes.set(xlim=(0.0, None), ylim=(0.0, None))
        axes.set_xlabel(f"{fitted(site, LONGEST_NAME)} moved by / hPa")
        axes.set_ylabel("shift of the answer / hPa")
        axes.legend(loc="upper left")
    return figure


_WORDS = {"normal": "normal site scatter", "student-t": "Student-t site scatter"}
