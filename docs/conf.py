"""Sphinx configuration."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))  # for gallery_figures

project = "massfit"
author = "the massfit authors"
copyright = "2026, the massfit authors"  # noqa: A001 - the name Sphinx asks for
extensions = [
    "myst_parser", "sphinx.ext.autodoc", "sphinx.ext.napoleon", "sphinx.ext.mathjax", "sphinx_gallery.gen_gallery",
]  # fmt: skip
myst_enable_extensions = ["dollarmath", "colon_fence", "deflist"]
myst_heading_anchors = 3
autodoc_typehints = "none"
exclude_patterns = ["_build", "examples", "gallery/sg_execution_times.rst", "sg_execution_times.rst"]
html_theme = "alabaster"
html_theme_options = {
    "description": "The annual cycle of global ocean mass from sea-floor pressure",
    "page_width": "1240px",
    "body_max_width": "1000px",
}
sphinx_gallery_conf = {
    "examples_dirs": "examples",
    "gallery_dirs": "gallery",
    "image_scrapers": ("gallery_figures",),
    "within_subsection_order": "FileNameSortKey",
    "capture_repr": (),
    "download_all_examples": False,
    "remove_config_comments": True,
    "show_memory": False,
    "min_reported_time": 1_000,
    "show_signature": False,
}
