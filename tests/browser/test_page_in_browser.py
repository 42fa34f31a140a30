"""The report in a real browser: it shows, fits, sorts, saves and prints, from a file and without a network."""

import base64
import csv
import io
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from massfit.fingerprint.ocean import OceanFunction
from massfit.report.figures.draw import draw_figures
from massfit.report.figures.render import png
from massfit.report.pages.run_page import report_page
from massfit.results.estimate import Estimate
from massfit.results.finished import FinishedRun, finished_run

WIDTHS = (360, 1100, 1920)
"""Of a telephone, of half a screen, and of a large one; CSS pixels."""

PAINT = "const p = performance.getEntriesByName('first-contentful-paint'); return p.length && p[0].startTime"


@pytest.fixture(scope="module")
def finished(run: Estimate) -> FinishedRun:
    return finished_run(run, command="massfit estimate here")


@pytest.fixture(scope="module")
def pictures(finished: FinishedRun) -> dict[str, bytes]:
    return {name: png(figure) for name, figure in draw_figures(finished, OceanFunction.builtin()).items()}


@pytest.fixture(scope="module")
def page(finished: FinishedRun, pictures: dict[str, bytes], tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("page") / "report.html"
    path.write_text(report_page(finished, pictures), encoding="utf-8")
    return path


@pytest.mark.parametrize("width", WIDTHS)
def test_it_shows_without_complaint_and_fits(browser, page: Path, width: int) -> None:
    browser.open(page, width)
    assert browser.complaints() == []
    assert browser.overflow() <= 0
    broken = "return [...document.images].filter((i) => !i.complete || !i.naturalWidth).length"
    assert browser.run(broken) == 0


def test_something_is_painted_within_a_second(browser, page: Path) -> None:
    browser.open(page)
    assert browser.wait(PAINT) < 1000.0


def test_the_policy_stops_what_is_not_its_own(browser, page: Path) -> None:
    # control: the console does hear of what the policy refuses
    browser.open(page)
    browser.run(
        "const s = document.createElement('script'); s.textContent = 'window.stray = 1'; document.body.append(s)"
    )
    browser.run("new Image().src = 'http://localhost:9/stray.png'")
    assert browser.run("return window.stray") is None
    assert any("Content Security Policy" in text for text in browser.complaints())


def test_a_table_sorts_both_ways_and_back(browser, page: Path) -> None:
    browser.open(page)
    column = """const table = document.querySelector('table[data-name=sites]');
        return [...table.tBodies[0].rows].map((row) => row.cells[arguments[0]].textContent.trim())"""
    press = """const head = document.querySelector('table[data-name=sites]').tHead.rows[0].cells[arguments[0]];
        head.querySelector('button').click(); return head.getAttribute('aria-sort')"""
    before = browser.run(column, 2)
    numbers = sorted(before, key=float)
    assert browser.run(press, 2) == "ascending"
    assert browser.run(column, 2) == numbers
    assert browser.run(press, 2) == "descending"
    assert browser.run(column, 2) == numbers[::-1]
    assert browser.run(press, 2) is None
    assert browser.run(column, 2) == before
    assert before != numbers, "the order of the sites says nothing about sorting"


def test_sorting_is_within_reach_of_the_keyboard(browser, page: Path) -> None:
    from selenium.webdriver.common.keys import Keys

    browser.open(page)
    browser.run("document.querySelector('table[data-name=sites] button').focus()")
    browser.driver.switch_to.active_element.send_keys(Keys.ENTER)
    first = "return document.querySelector('table[data-name=sites] th').getAttribute('aria-sort')"
    assert browser.run(first) == "ascending"


def press(browser, owner: str, words: str) -> None:
    """Press the button with these words after a table or in a figure."""
    browser.run(
        """const owner = document.querySelector(arguments[0]);
        const place = owner.matches('figure') ? owner : owner.parentElement.nextElementSibling;
        [...place.querySelectorAll('button')].find((b) => b.textContent === arguments[1]).click()""",
        owner,
        words,
    )


def test_a_table_is_saved_as_it_reads(browser, page: Path, finished: FinishedRun) -> None:
    browser.open(page)
    press(browser, "table[data-name=sites]", "Table as CSV")
    rows = list(csv.reader(io.StringIO(browser.saved("sites.csv").decode())))
    assert rows[0][:3] == ["site", "latitude", "longitude"]
    assert [row[0].removesuffix(" *") for row in rows[1:]] == [site["id"] for site in finished.summary["sites"]]
    assert [float(row[1]) for row in rows[1:]] == [round(site["latitude"], 2) for site in finished.summary["sites"]]


def test_a_figure_is_saved_as_it_was_drawn(browser, page: Path, pictures: dict[str, bytes]) -> None:
    browser.open(page)
    press(browser, "figure[data-name=network_map]", "Figure as PNG")
    assert browser.saved("network_map.png") == pictures["network_map"]


def test_the_data_of_a_figure_are_saved_as_a_table(browser, page: Path, finished: FinishedRun) -> None:
    browser.open(page)
    press(browser, "figure[data-name=records]", "Its data as CSV")
    rows = list(csv.DictReader(io.StringIO(browser.saved("records.csv").decode())))
    assert {row["site"] for row in rows} == {site["id"] for site in finished.summary["sites"]}
    reduced = finished.datasets["reduced_records.nc"]["reduced"].values / 100.0
    known = reduced[np.isfinite(reduced)]
    assert len(rows) == len(known)
    assert sum(float(row["reduced_hpa"]) for row in rows) == pytest.approx(known.sum(), abs=0.01 * len(rows))


def test_a_drawn_column_is_neither_sorted_nor_saved(browser, page: Path) -> None:
    browser.open(page)
    heads = browser.run("""return [...document.querySelector('table[data-name=sites]').tHead.rows[0].cells].map(
        (cell) => [cell.textContent, cell.querySelector('button') !== null])""")
    assert [text for text, sorts in heads if not sorts] == ["reduced record, \u00b14 hPa"]
    lines = browser.run("return document.querySelectorAll('table[data-name=sites] svg.spark path[d]').length")
    assert lines == 2 * 3


def test_it_can_be_dark_or_light(browser, page: Path) -> None:
    browser.open(page)
    ground = "return getComputedStyle(document.body).backgroundColor"
    seen = {}
    for _ in range(3):
        browser.run("document.querySelector('header button').click()")
        seen[browser.run("return document.querySelector('header button').textContent")] = browser.run(ground)
    assert seen["Colours: light"] == "rgb(255, 255, 255)"
    assert seen["Colours: dark"] == "rgb(23, 25, 28)"
    assert len(seen) == 3


def test_it_prints_on_a4(browser, page: Path) -> None:
    browser.open(page)
    printed = browser.driver.execute_cdp_cmd("Page.printToPDF", {"preferCSSPageSize": True, "printBackground": True})
    content = base64.b64decode(printed["data"])
    assert content.startswith(b"%PDF")
    assert b"/MediaBox [0 0 595" in content.replace(b"[0 0 594", b"[0 0 595")
    assert 3 <= content.count(b"/Type /Page\n") + content.count(b"/Type /Page ") <= 30


@pytest.mark.parametrize("width", WIDTHS)
def test_hostile_names_are_text_and_fit(browser, finished: FinishedRun, pictures, tmp_path: Path, width: int) -> None:
    names = ["<img src=x onerror=window.stray=1><b>bold", "N" * 200, "\u0645\u062d\u0637\u0629 12 \u202e\u05d9\u05dd"]
    entries = [{**site, "id": name} for site, name in zip(finished.summary["sites"], names, strict=True)]
    renamed = {site["id"]: name for site, name in zip(finished.summary["sites"], names, strict=True)}
    datasets = {
        file: data.assign_coords(site=[renamed[str(name)] for name in data["site"].values])
        if "site" in data.dims
        else data
        for file, data in finished.datasets.items()
    }
    summary = {**finished.summary, "sites": entries, "network": names[0] * 3, "warnings": names}
    path = tmp_path / "report.html"
    path.write_text(report_page(replace(finished, summary=summary, datasets=datasets), pictures), encoding="utf-8")
    browser.open(path, width)
    assert browser.complaints() == []
    assert browser.run("return window.stray") is None
    assert browser.overflow() <= 0
    column = (
        "return [...document.querySelector('table[data-name=sites]').tBodies[0].rows].map((r) => r.cells[0].innerText)"
    )
    assert [text.removesuffix(" *") for text in browser.run(column)] == names


@pytest.mark.slow
def test_the_page_of_the_demo_is_light_and_quick(browser, tmp_path: Path) -> None:
    # a minute on a quiet machine: the whole demo, satellites and all
    from massfit.pipeline.save import estimate_to_folder

    estimate_to_folder(Path(__file__).parents[2] / "demo_network", tmp_path / "results")
    page = tmp_path / "results" / "report.html"
    assert page.stat().st_size < 3_000_000
    for width in WIDTHS:
        browser.open(page, width)
        assert browser.complaints() == []
        assert browser.overflow() <= 0
        assert browser.wait(PAINT) < 1000.0
