"""Write docs/sources.md anew from the list of sources."""

import sys
from pathlib import Path

from massfit.results.citations import spoken
from massfit.tables.sources import read_sources

HEAD = """\
# Sources

Every published work that massfit rests on, or that it uses in some command. `massfit cite RESULTS` lists those behind
one result ([how](how_to/cite.md)). `python docs/make_sources.py` writes this page from `massfit/tables/sources.bib`.
Pages and volumes were typed from the works or from memory: report what is wrong.

"""


def page() -> str:
    """The text of the page."""
    return HEAD + "\n".join(f"- {spoken(source)}" for source in read_sources().values()) + "\n"


if __name__ == "__main__":
    (Path(__file__).parent / "sources.md").write_text(page(), encoding="utf-8")
    sys.stdout.write("Wrote docs/sources.md.\n")
