"""Lets the gallery show what the drawing functions return: they leave pyplot alone, so it finds no figures there."""

from typing import Any

from matplotlib.figure import Figure
from sphinx_gallery.scrapers import figure_rst

from massfit.report.figures.style import house_style


def _get_sg_image_scraper() -> Any:
    return scrape


def scrape(_block: Any, block_vars: dict[str, Any], gallery_conf: dict[str, Any]) -> str:
    """Save every figure that a block of an example made, its last expression included."""
    made = [value for value in block_vars["example_globals"].values() if isinstance(value, Figure)]
    saved = []
    for figure in made:
        if getattr(figure, "shown", False):
            continue
        figure.shown = True  # type: ignore[attr-defined]
        path = next(block_vars["image_path_iterator"])
        with house_style():
            figure.savefig(path, dpi=130)
        saved.append(path)
    return str(figure_rst(saved, gallery_conf["src_dir"]))
