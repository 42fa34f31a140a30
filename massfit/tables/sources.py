"""The list of the published works that the package rests on, in BibTeX."""

import re
from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from importlib.resources import files
from types import MappingProxyType

_ENTRY = re.compile(r"@(\w+)\{([\w-]+),\n((?:  \w+ = \{.*\},?\n)+)\}\n")
_FIELD = re.compile(r"  (\w+) = \{(.*)\},?\n")
_ACCENTS = {"'e": "é", '"a': "ä", '"o': "ö", '"u': "ü", "'c": "ć", "v{c}": "č"}


@dataclass(frozen=True)
class Source:
    """A published work.

    Parameters
    ----------
    key : str
        Surname of the first author in ASCII and year.
    bibtex : str
        The entry as it stands in the list.
    fields : mapping of str to str
        Its fields, in plain text.
    """

    key: str
    bibtex: str
    fields: Mapping[str, str]


@lru_cache(maxsize=1)
def read_sources() -> Mapping[str, Source]:
    """Read the list.

    Returns
    -------
    mapping of str to Source
        By key, in the order of the list.

    Examples
    --------
    >>> source = read_sources()["farrell1976"]
    >>> source.fields["title"], source.fields["year"]
    ('On postglacial sea level', '1976')
    """
    text = files("massfit.tables").joinpath("sources.bib").read_text(encoding="utf-8")
    return MappingProxyType(
        {
            key: Source(key, whole, {name: _plain(value) for name, value in _FIELD.findall(body)})
            for whole, key, body in ((match[0], match[2], match[3]) for match in _ENTRY.finditer(text))
        }
    )


def _plain(value: str) -> str:
    r"""Turn what BibTeX writes with braces and backslashes into text: ``M{\'e}tivier`` is Métivier."""
    if re.fullmatch(r"\{[^{}]*\}", value):  # one name, not a list of authors
        value = value.replace(" and ", "\N{NO-BREAK SPACE}and\N{NO-BREAK SPACE}")
    for written, letter in _ACCENTS.items():
        value = value.replace("{\\" + written + "}", letter)
    return value.replace("{", "").replace("}", "").replace(" -- ", ": ")
