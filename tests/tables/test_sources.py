"""The list of sources is whole BibTeX, and holds every work that the code names."""

import calendar
import re
from importlib.resources import files
from pathlib import Path

import pytest

import massfit
from massfit.tables.sources import read_sources

TEXT = files("massfit.tables").joinpath("sources.bib").read_text("utf-8")
ROOT = Path(massfit.__file__).parent
SURNAME = r"(?:\b(?:ter|de|Le) )?\b[A-ZÀ-Þ][\w'-]+"
NAMED = re.compile(rf"({SURNAME})(?:(?:, {SURNAME})* & {SURNAME}|\s+et\s+al\.)?,?\s+\(?((?:19|20)\d\d)\b")
WORDS = {"From", *calendar.month_name}
NO_WORKS = {("CGPM", "1901"), ("CODATA", "2018"), ("ITRF", "2020"), ("RFC", "1952")}
"""Named by body and year alone, as a constant or a frame is."""
WITHOUT_TITLE = {("Liu", "2025")}
"""Known here by author and year only."""
UNDER_ANOTHER_NAME = {
    ("Conventions", "2010"): "petit2010",
    ("System", "2017"): "qartod2017",
    ("Meeus", "1991"): "meeus1998",  # first edition
}


def key_of(surname: str, year: str) -> str:
    plain = surname.casefold().replace(" ", "").translate(str.maketrans("éöüäćč", "eouacc"))
    return UNDER_ANOTHER_NAME.get((surname, year), f"{plain}{year}")


def test_every_entry_of_the_file_is_read() -> None:
    assert len(read_sources()) == TEXT.count("\n@") == len(set(re.findall(r"@\w+\{([\w-]+),", TEXT)))
    assert list(read_sources()) == sorted(read_sources(), key=lambda key: (key.rstrip("0123456789"), key))


@pytest.mark.parametrize("key", list(read_sources()))
def test_an_entry_has_what_a_reader_needs(key: str) -> None:
    source = read_sources()[key]
    needed = {
        "article": {"author", "title", "journal", "year", "volume", "pages"},
        "book": {"author", "title", "publisher", "year"},
        "techreport": {"author", "title", "institution", "year"},
        "misc": {"author", "title"},
    }
    kind = source.bibtex.removeprefix("@").partition("{")[0]
    assert needed.get(kind, {"author", "title", "year"}) <= set(source.fields)
    assert source.bibtex.count("{") == source.bibtex.count("}")
    # what is shown as text holds no command of TeX
    assert not any(set(value) & set("{}\\") for value in source.fields.values())
    if "year" in source.fields:
        assert key.endswith(source.fields["year"])


def named_in_the_code() -> set[tuple[str, str]]:
    found: set[tuple[str, str]] = set()
    for path in ROOT.rglob("*.py"):
        text = re.sub(r"\s*\n[#\s]*", " ", path.read_text("utf-8"))
        found |= {(name, year) for name, year in NAMED.findall(text) if name not in WORDS}
    return found - NO_WORKS - WITHOUT_TITLE


def test_every_work_that_the_code_names_is_in_the_list() -> None:
    named = named_in_the_code()
    assert len(named) > 40
    assert sorted(f"{name} {year}" for name, year in named if key_of(name, year) not in read_sources()) == []
