"""What a result rests on, as text for a reader and as BibTeX for a paper."""

import re
from collections.abc import Mapping, Sequence
from itertools import groupby

from massfit.report.words.names import wrapped
from massfit.report.words.run_text import WIDTH
from massfit.results.citations import Citation, spoken

_SPECIAL = {letter: f"\\{letter}" for letter in "&%$#_{}"} | {
    "\\": r"\textbackslash{}", "~": r"\textasciitilde{}", "^": r"\textasciicircum{}",
}  # fmt: skip


def citation_text(cited: Sequence[Citation], *, network: str, version: str) -> str:
    """Write what to cite for a terminal.

    Parameters
    ----------
    cited : sequence of Citation
    network : str
        Name of the network.
    version : str
        Of massfit.

    Returns
    -------
    str
    """
    lines = wrapped(f"What the result of {network} rests on: massfit {version}, and", WIDTH)
    for part, entries in groupby(cited, key=lambda each: each.part):
        lines += ["", part]
        for each in entries:
            lines += wrapped(citation_line(each), WIDTH, first="  - ", rest="    ")
    return "\n".join(lines)


def citation_line(cited: Citation) -> str:
    """One citation in words, what it was used for in brackets."""
    if cited.source is None:
        return f"{cited.what}: {cited.text}"
    return f"{spoken(cited.source)} [{cited.what}]"


def citation_bibtex(cited: Sequence[Citation], *, version: str) -> str:
    """Write what to cite as BibTeX, each work once.

    Parameters
    ----------
    cited : sequence of Citation
    version : str
        Of massfit.

    Returns
    -------
    str
        The analyst's data are entries of their own, `data1` and so on, with what the network file states.
    """
    own = {
        "author": "{the massfit authors}",
        "title": "massfit: the annual cycle of global ocean mass from sea-floor pressure",
        "note": f"version {version}",
    }
    data = [each for each in cited if each.source is None]
    works = {each.source.key: each.source.bibtex for each in cited if each.source is not None}
    return "\n".join(
        [
            _entry("massfit", own),
            *(
                _entry(f"data{number}", {"title": _plain(each.what), "note": _plain(each.text)})
                for number, each in enumerate(data, 1)
            ),
            *works.values(),
        ]
    )


def _entry(key: str, fields: Mapping[str, str]) -> str:
    lines = ",\n".join(f"  {name} = {{{value}}}" for name, value in fields.items())
    return f"@misc{{{key},\n{lines}\n}}\n"


def _plain(text: str) -> str:
    """Text of the analyst for BibTeX: nothing in it commands."""
    return re.sub(r"[&%$#_{}\\~^]", lambda match: _SPECIAL[match[0]], text)
