"""The page is one file that asks nothing of the network, and says what a reader must know."""

import base64
import hashlib
import re
from dataclasses import replace
from html.parser import HTMLParser

import pytest

from massfit.report.pages.page_tables import corrections_table
from massfit.report.pages.run_page import PICTURES, report_page
from massfit.report.words.run_text import SHARE_WORDS
from massfit.results.estimate import Estimate
from massfit.results.finished import FinishedRun, finished_run

NOT_RUN = {name for name in PICTURES if name.startswith(("satellite", "siting"))}
PNG = dict.fromkeys((*PICTURES, "records_2", "phasor_plane_column"), b"\x89PNG")
SECTIONS = (
    "beware", "assumed", "holds", "bench", "network", "corrections", "records", "fingerprint", "provenance", "cite",
)  # fmt: skip


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
        if tag not in {"meta", "img", "source", "input"}:
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
    assert page.lstrip().startswith("<!DOCTYPE html>")
    pictures = [attributes for tag, attributes in tags(page) if tag == "img"]
    drawn = PICTURES.keys() - NOT_RUN  # the run has none
    assert len(pictures) == len(drawn) + 1  # the second page of records
    for attributes in pictures:
        assert len(str(attributes["alt"])) > 40
        assert str(attributes["src"]).startswith("data:image/png;base64,")
    (narrow,) = [attributes for tag, attributes in tags(page) if tag == "source"]
    assert narrow["media"] == "screen and (max-width: 640px)"
    for caption in (text for name, text in PICTURES.items() if name not in NOT_RUN):
        assert caption.replace("'", "&#39;") in page


def test_it_asks_nothing_of_the_network(page: str) -> None:
    (policy,) = [a for tag, a in tags(page) if tag == "meta" and a.get("http-equiv") == "Content-Security-Policy"]
    hashes = [
        f"'sha256-{base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()}'"
        for kind in ("style", "script")
        for text in re.findall(rf"<{kind}>(.*?)</{kind}>", page, flags=re.S)
    ]
    assert len(hashes) == 2
    assert policy["content"] == "default-src 'none'; img-src data:; style-src {}; script-src {}".format(*hashes)
    assert re.search(r"https?:", page) is None
    assert not {"link", "iframe", "object"} & {tag for tag, _ in tags(page)}
    assert not any("src" in attributes for tag, attributes in tags(page) if tag == "script")
    assert not any("style" in attributes or "onclick" in attributes for _, attributes in tags(page))
    assert all(str(a["href"]).startswith("#") for tag, a in tags(page) if tag == "a")
    assert "url(" not in page


def test_sections_come_in_the_order_a_reader_asks(page: str) -> None:
    headings = [attributes["id"] for tag, attributes in tags(page) if tag == "h2"]
    assert headings == [name for name in SECTIONS if name in headings]
    assert set(SECTIONS) - set(headings) <= {"beware"}
    links = [a for tag, a in tags(page) if tag == "a" and "data-show" not in a]
    assert [str(a["href"])[1:] for a in links] == headings


def test_tables_that_scroll_can_be_reached_by_keyboard(page: str) -> None:
    regions = [attributes for tag, attributes in tags(page) if attributes.get("class") == "wide"]
    assert len(regions) == sum(tag == "table" for tag, _ in tags(page)) >= 7
    for attributes in regions:
        assert attributes["tabindex"] == "0"
        assert attributes["role"] == "region"
        assert attributes["aria-label"]


def test_sections_of_what_was_not_done_are_absent(finished: FinishedRun) -> None:
    """As where every site was reduced elsewhere, and nothing is known of its record."""
    unknown = {"days": None, "reduced_sd_hpa": None, "first_day": None, "last_day": None, "coverage": None}
    entries = [{**entry, **unknown, "corrections": [], "warnings": []} for entry in finished.summary["sites"]]
    summary = {**finished.summary, "sites": entries, "warnings": [], "alternatives": []}
    datasets = {name: data for name, data in finished.datasets.items() if name != "reduced_records.nc"}
    pictures = {name: picture for name, picture in PNG.items() if not name.startswith("records")}
    bare = report_page(replace(finished, summary=summary, datasets=datasets), pictures)
    assert [a["id"] for tag, a in tags(bare) if tag == "h2"] == [
        "assumed", "holds", "bench", "network", "fingerprint", "provenance", "cite",
    ]  # fmt: skip
    assert "What if" not in bare
    assert "unknown" in bare


def test_it_holds_what_each_correction_did(page: str, run: Estimate) -> None:
    site = run.summary["sites"][0]
    mean = next(row for row in site["corrections"] if row["model"] == "mean")
    assert "<td>{:+.3f} {:+.3f}</td>".format(*mean["phasor_hpa"]).replace("-", "\N{MINUS SIGN}") in page
    for model in run.network.circulation:
        assert f"circulation: {model.name}</th>" in page
    assert "daily record</th>" in page


def test_a_site_without_a_model_has_an_empty_cell_in_its_place(finished: FinishedRun) -> None:
    first, *others = finished.summary["sites"]
    fewer = {**first, "corrections": [row for row in first["corrections"] if row["series"] != "pole_tide"]}
    table = corrections_table({**finished.summary, "sites": [fewer, *others]})
    assert table is not None
    column = table.head.index("pole tide")
    assert [bool(row[column]) for row in table.rows] == [False, *[True] * len(others)]
    assert table.head == corrections_table(finished.summary).head


def test_sites_left_out_are_named_with_the_reason(finished: FinishedRun) -> None:
    summary = {**finished.summary, "left_out": {"Farlen": "the clock was never checked"}}
    page = report_page(replace(finished, summary=summary), PNG)
    assert "Farlen" in page
    assert "the clock was never checked" in page


def test_it_says_the_answer_and_what_it_rests_on(page: str, run: Estimate) -> None:
    assert f"amplitude of {run.summary['amplitude_hpa']['median']:.2f} hPa" in page
    for text in (*run.summary["assumptions"], *SHARE_WORDS.values(), "massfit estimate here"):
        assert text.replace("'", "&#39;") in page
    for record in run.network.records:
        assert f'<th scope="row">{record.deployment}</th>' in page
    assert "did not converge" not in page


def test_markup_in_a_name_stays_text(finished: FinishedRun, page: str) -> None:
    evil = '<script>alert("A1")</script>'
    first, *others = finished.summary["sites"]
    entries = [{**first, "id": evil}, *others]
    summary = {**finished.summary, "network": f"<b>{evil}", "sites": entries, "warnings": [evil]}
    provenance = {**finished.provenance, "command": f"massfit estimate '{evil}'"}
    datasets = dict(finished.datasets)
    for file in ("fingerprints.nc", "site_phasors.nc"):
        names = [evil if name == first["id"] else name for name in datasets[file]["site"].values.tolist()]
        datasets[file] = datasets[file].assign_coords(site=names)
    clean, page = page, report_page(replace(finished, summary=summary, provenance=provenance, datasets=datasets), PNG)
    assert "<script>alert" not in page
    # title, heading, warning, command; site, correction and fingerprint tables; the bench; and the words for the map
    assert page.count("&lt;script&gt;") == 8 + bool(entries[0]["warnings"])
    assert "b" not in {tag for tag, _ in tags(page)}
    assert page.count("<script") == clean.count("<script")


def test_a_run_that_did_not_converge_says_so_at_the_top(finished: FinishedRun) -> None:
    convergence = {**finished.summary["convergence"], "converged": False}
    page = report_page(replace(finished, summary={**finished.summary, "convergence": convergence}), PNG)
    assert "did not converge: this result is not trustworthy" in page
    assert page.index("did not converge") < page.index('class="answer"')
