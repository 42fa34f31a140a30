"""The page for notebooks runs as it stands."""

import doctest
from pathlib import Path

PAGE = Path(__file__).parents[1] / "docs" / "notebook.md"


def test_every_example_of_the_page_runs() -> None:
    options = doctest.ELLIPSIS | doctest.NORMALIZE_WHITESPACE
    result = doctest.testfile(str(PAGE), module_relative=False, optionflags=options)
    assert result.failed == 0
    assert result.attempted > 25
