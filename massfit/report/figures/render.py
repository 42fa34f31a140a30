"""A drawn figure as a picture."""

import io

from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from PIL import Image

from massfit.report.figures.style import COLUMN_WIDTH_MM, PAGE_WIDTH_MM, house_style


def png(figure: Figure, *, dots_per_inch: float | None = None, colours: int = 128) -> bytes:
    """Render a figure as PNG with a palette: a quarter of the size in all colours, and the eye sees no difference.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
    dots_per_inch : float, optional
        By default 200, and 240 where the figure is to be a column wide.
    colours : int
        Of the palette.

    Returns
    -------
    bytes
    """
    narrow = figure.get_size_inches()[0] * 25.4 < 0.5 * (COLUMN_WIDTH_MM + PAGE_WIDTH_MM)
    figure.set_dpi(dots_per_inch or (240.0 if narrow else 200.0))
    canvas, packed = FigureCanvasAgg(figure), io.BytesIO()
    with house_style():
        canvas.draw()  # type: ignore[no-untyped-call]
    drawn = Image.frombuffer("RGBA", canvas.get_width_height(), bytes(canvas.buffer_rgba()))  # type: ignore[no-untyped-call]
    # without dither, which would not pack
    drawn.convert("RGB").quantize(colours, dither=Image.Dither.NONE).save(packed, format="png", compress_level=7)
    return packed.getvalue()
