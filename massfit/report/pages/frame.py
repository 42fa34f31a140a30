"""The frame that every page shares: what it may load, its look, and the script that sorts tables and saves figures."""

import base64
import hashlib
from typing import Any

from jinja2 import Environment, PackageLoader, StrictUndefined

_LOADER = PackageLoader("massfit.report.pages")
_TEMPLATES = Environment(loader=_LOADER, autoescape=True, undefined=StrictUndefined, trim_blocks=True)


def filled(template: str, *, scripts: tuple[str, ...] = ("page.js",), **content: Any) -> str:
    """Fill a page.

    Parameters
    ----------
    template : str
        File of the folder templates, which extends frame.html.
    scripts : tuple of str
        Files of the same folder that run in the page, in order.
    **content
        What the template names. `figure_data` is empty where it is not given.

    Returns
    -------
    str
        HTML with everything inside it, which may load nothing and run no other script than its own.
    """
    style, script = part("page.css"), "\n".join(part(name) for name in scripts)
    return _TEMPLATES.get_template(template).render(
        **{"figure_data": {}, **content},
        style=style,
        style_hash=_hash(style),
        script=script,
        script_hash=_hash(script),
    )


def part(name: str) -> str:
    """Read a file of the folder templates as it stands there.

    Parameters
    ----------
    name : str

    Returns
    -------
    str
    """
    return _LOADER.get_source(_TEMPLATES, name)[0]


def _hash(text: str) -> str:
    """Name a text as a Content-Security-Policy does (W3C Content Security Policy Level 3, section 2.3)."""
    return f"'sha256-{base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()}'"
