"""docs/sources.md is the list of sources as it stands today."""

import importlib.util
from pathlib import Path

DOCS = Path(__file__).parents[1] / "docs"


def test_the_page_is_up_to_date() -> None:
    script = importlib.util.spec_from_file_location("make_sources", DOCS / "make_sources.py")
    assert script is not None
    assert script.loader is not None
    module = importlib.util.module_from_spec(script)
    script.loader.exec_module(module)
    assert (DOCS / "sources.md").read_text("utf-8") == module.page()
