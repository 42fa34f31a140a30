"""Sphinx configuration."""

project = "massfit"
author = "the massfit authors"
copyright = "2026, the massfit authors"  # noqa: A001 - the name Sphinx asks for
extensions = ["myst_parser", "sphinx.ext.autodoc", "sphinx.ext.napoleon", "sphinx.ext.mathjax"]
myst_enable_extensions = ["dollarmath", "colon_fence"]
myst_heading_anchors = 3
autodoc_typehints = "none"
exclude_patterns = ["_build"]
html_theme = "alabaster"
html_theme_options = {"description": "The annual cycle of global ocean mass from sea-floor pressure"}
