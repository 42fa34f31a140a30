"""The page is one file that asks nothing of the network, and says what a reader must know."""

import re
from dataclasses import replace
from html.parser import HTMLParser

import pytest

from massfit.report.page import PICTURES, report_page
from massfit.report.text import SHARE_WORDS
from massfit.results.estimate import Estimate
from massfit.results.finished import FinishedRun, finished_run

PNG = dict.fromkeys(PICTURES, b"\x89PNG")


@pytest.fixture(scope="module")
def finished(run: Estimate) -> FinishedRun:
    return finished_run(run, command="massfit estimate here")


@pytest.fixture(scope="module")
def page(finished: FinishedRun) -> str:
    return report_page(finished, PNG)


class Tags(HTMLParser):
    """Tags with their attributes, and that every element that is opened is closed."""

    def __init__(self) -> None:
        super().__init__()
        self.found: list[tuple[str, dict[str, str | None]]] = []
        self.open: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.found.append((tag, dict(attrs)))
        if tag not in {"meta", "img"}:
            self.open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag


def tags(page: str) -> list[tuple[str, dict[str, str | None]]]:
    parser = Tags()
    parser.feed(page)
    parser.close()
    assert parser.open == []
    return parser.found


def test_it_is_well_formed_and_every_picture_has_words(page: str) -> None:
    pictures = [attributes for tag, attributes in tags(page) if tag == "img"]
    assert len(pictures) == len(PICTURES)
    for attributes in pictures:
        assert attributes["alt"] in PICTURES.values()
        assert str(attributes["src"]).startswith("data:image/png;base64,")


def test_it_asks_nothing_of_the_network(page: str) -> None:
    (policy,) = [a for tag, a in tags(page) if tag == "meta" and a.get("http-equiv") == "Content-Security-Policy"]
    assert policy["content"] == "default-src 'none'; img-src data:; style-src 'unsafe-inline'"
    assert re.search(r"https?:", page) is None
    assert not {"script", "link", "iframe", "a"} & {tag for tag, _ in tags(page)}
    assert "url(" not in page


def test_it_says_the_answer_and_what_it_rests_on(page: str, run: Estimate) -> None:
    assert f"amplitude of {run.summary['amplitude_hpa']['median']:.2f} hPa" in page
    for text in (*run.summary["assumptions"], *SHARE_WORDS.values(), "massfit estimate here"):
        assert text.replace("'", "&#39;") in page
    for record in run.network.records:
        assert f"<td>{record.deployment}</td>" in page
    assert "did not converge" not in page


def test_markup_in_a_name_stays_text(finished: FinishedRun) -> None:
    evil = '<script>alert("A1")</script>'
    entries = [{**finished.summary["sites"][0], "id": evil}, *finished.summary["sites"][1:]]
    summary = {**finished.summary, "network": f"<b>{evil}", "sites": entries, "warnings": [evil]}
    provenance = {**finished.provenance, "command": f"massfit estimate '{evil}'"}
    page = report_page(replace(finished, summary=summary, provenance=provenance), PNG)
    assert "<script" not in page
    # title, heading, site table, warning and command
    assert page.count("&lt;script&gt;") == 5
    assert not {"script", "b"} & {tag for tag, _ in tags(page)}


def test_a_run_that_did_not_converge_says_so_at_the_top(finished: FinishedRun) -> None:
    convergence = {**finished.summary["convergence"], "converged": False}
    page = report_page(replace(finished, summary={**finished.summary, "convergence": convergence}), PNG)
    assert "did not converge: this result is not trustworthy" in page
    assert page.index("did not converge") < page.index('class="answer"')
