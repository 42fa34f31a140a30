"""Every figure can be reached by name, is documented, and has an example that runs."""

import inspect

import pytest
from matplotlib.figure import Figure
from test_public_api import documented, section

from massfit import figures

FUNCTIONS = [name for name in figures.__all__ if callable(getattr(figures, name))]


@pytest.mark.parametrize("name", FUNCTIONS)
def test_a_figure_is_documented_and_has_an_example(name: str) -> None:
    found = getattr(figures, name)
    text = inspect.getdoc(found) or ""
    assert documented(section(text, "Parameters")) == set(inspect.signature(found).parameters)
    assert section(text, "Returns")
    assert section(text, "Examples") or name in {"png", "site_sheet", "result_figures"}  # tested on a run


@pytest.mark.parametrize("name", [name for name in FUNCTIONS if name not in {"png", "result_figures"}])
def test_a_drawing_function_returns_a_figure_and_takes_a_width(name: str) -> None:
    signature = inspect.signature(getattr(figures, name))
    assert signature.return_annotation is Figure
    assert "width_mm" in signature.parameters


def test_the_list_is_whole() -> None:
    public = {name for name in vars(figures) if callable(getattr(figures, name)) and not name[0].isupper()}
    assert public - {"draw_figures", "finished_run"} == set(FUNCTIONS)
