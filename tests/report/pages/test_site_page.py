"""Page and table of the sites alone."""

import base64
from dataclasses import replace
from html.parser import HTMLParser

import pytest

from massfit.report.pages.site_page import overview_table, picture_name, site_page, tide_table
from massfit.report.words.names import columns
from massfit.report.words.site_text import site_text
from massfit.results.finished import FinishedRun

PNG = b"\x89PNG\r\n\x1a\nnot a real one"


@pytest.fixture(scope="module")
def pictures(judged: FinishedRun) -> dict[str, bytes]:
    return {picture_name(place, site["id"]): PNG for place, site in enumerate(judged.summary["sites"], 1)}


def tags(page: str) -> list[tuple[str, dict[str, str | None]]]:
    found: list[tuple[str, dict[str, str | None]]] = []

    class Parser(HTMLParser):
        def handle_starttag(self, tag, attrs):
            found.append((tag, dict(attrs)))

    Parser().feed(page)
    return found


def test_the_page_holds_every_site_and_calls_nowhere(judged: FinishedRun, pictures: dict[str, bytes]) -> None:
    page = site_page(judged, pictures)
    images = [attributes["src"] for tag, attributes in tags(page) if tag == "img"]
    assert images == ["data:image/png;base64," + base64.b64encode(PNG).decode()] * len(pictures)
    for site in judged.summary["sites"]:
        assert f">{site['id']}</h2>" in page
    targets = [a["href"] for tag, a in tags(page) if tag == "a"]
    ids = {a["id"] for _, a in tags(page) if "id" in a}
    assert all(target.startswith("#") and target[1:] in ids for target in targets)
    assert not [tag for tag, _ in tags(page) if tag in {"link", "iframe"}]
    assert not [attributes for tag, attributes in tags(page) if tag == "script" and attributes]
    assert all(a.get("alt") for tag, a in tags(page) if tag == "img")


def test_names_are_written_as_text(judged: FinishedRun) -> None:
    name = "<b>Rise</b> & $x$"
    sites = [{**site, "id": name if place == 0 else site["id"]} for place, site in enumerate(judged.summary["sites"])]
    names = {picture_name(place, site["id"]): PNG for place, site in enumerate(sites, 1)}
    page = site_page(replace(judged, summary={**judged.summary, "sites": sites}), names)
    assert "<b>Rise" not in page
    assert "&lt;b&gt;Rise&lt;/b&gt; &amp; $x$" in page


def test_a_site_reduced_elsewhere_has_no_figure(judged: FinishedRun, pictures: dict[str, bytes]) -> None:
    first, *others = judged.summary["sites"]
    kept = ("id", "latitude", "longitude", "depth_m", "group", "phasor_hpa", "phasor_covariance_hpa2", "warnings")
    kept += ("amplitude_hpa", "amplitude_sd_hpa", "peak_day", "peak_sd_days", "models")
    unknown = {"days": None, "reduced_sd_hpa": None, "judged": None, "years": [2014, 2016]}
    elsewhere = {name: first[name] for name in kept} | unknown
    own = dict(list(pictures.items())[1:])
    page = site_page(replace(judged, summary={**judged.summary, "sites": [elsewhere, *others]}), own)
    assert "This site was reduced elsewhere" in page
    assert "unknown" in page
    assert site_text({**judged.summary, "sites": [elsewhere, *others]}).count(" - ") >= 1


def test_tables_have_a_row_a_site(judged: FinishedRun) -> None:
    sites = judged.summary["sites"]
    assert [row[0].removesuffix(" *") for row in overview_table(sites, 2016).rows] == [site["id"] for site in sites]
    lines = tide_table(sites)
    assert lines is not None
    assert lines.head[:3] == ("site", "node (18.6 yr)", "Sa (365.3 d)")
    # Mf rises and falls by its nodal side line, 2.76 of 6.66 cm (Cartwright & Edden 1973)
    assert lines.rows[-1][lines.head.index("Mf (13.7 d)")] == "41 %"
    assert tide_table([{**site, "long_period_tides": []} for site in sites]) is None


def test_the_printed_table_fits_eighty_columns(judged: FinishedRun) -> None:
    text = site_text(judged.summary)
    assert max(columns(line) for line in text.splitlines()) <= 80
    for site in judged.summary["sites"]:
        assert site["id"][:8] in text


def test_names_of_pictures_are_safe() -> None:
    assert picture_name(1, "../../etc/passwd") == "site_01_etc_passwd"
    assert picture_name(12, "深海") == "site_12"
    assert len(picture_name(1, "x" * 300)) <= 50
