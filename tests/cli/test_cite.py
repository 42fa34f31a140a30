"""`massfit cite`: what a results folder rests on."""

import re
from pathlib import Path

import pytest
from click.testing import CliRunner

import massfit
from massfit.cli.main import main
from massfit.io.network.network_file import read_network
from massfit.pipeline.save import save_results
from massfit.results.estimate import Estimate
from massfit.results.stated_data import stated_data

ROOT = Path(__file__).parents[2]


@pytest.fixture(scope="module")
def results(run: Estimate, tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("cited") / "results"
    save_results(run, folder)
    return folder


def test_text_and_bibtex_name_the_same_works(results: Path) -> None:
    text, bibtex = (CliRunner().invoke(main, ["cite", str(results), *more]) for more in ([], ["--bibtex"]))
    assert (text.exit_code, bibtex.exit_code) == (0, 0), text.output + bibtex.output
    assert "Farrell, W. E. & Clark, J. A. (1976)." in " ".join(text.output.split())
    assert "Your data\n  - records: " in text.output
    keys = re.findall(r"^@\w+\{([\w-]+),$", bibtex.output, re.MULTILINE)
    assert keys[0] == "massfit"
    assert {"farrell1976", "gelman2006", "data1"} <= set(keys)
    assert len(keys) == len(set(keys))
    assert "wahr1998" not in keys  # no satellites in this run


def test_the_page_has_the_same_list(results: Path) -> None:
    page = (results / "report.html").read_text("utf-8")
    assert '<h2 id="cite">' in page
    assert "On postglacial sea level" in page


def test_a_folder_without_results_is_refused(tmp_path: Path) -> None:
    done = CliRunner().invoke(main, ["cite", str(tmp_path)])
    assert done.exit_code == 2
    assert "it is no results folder of massfit" in done.output


def test_what_the_network_file_states_is_kept(change, network_folder: Path) -> None:
    change('group = "north"\n', 'group = "north"\nreference = "Quillmere Institute (2019), cruise 7"\n')
    change('ocean_mean = "removed"\n', 'ocean_mean = "removed"\nreference = "The invented team (2020)"\n')
    change("reference_year = 2016\n", 'reference_year = 2016\nreferences = ["Air: the invented office"]\n')
    network = read_network(network_folder)
    stated = {(each["what"], each["name"]): each["reference"] for each in stated_data(network)}
    assert stated["records", "A"] == "Quillmere Institute (2019), cruise 7"
    assert stated["records", "B"] == ""
    assert stated["ocean model", "Invented model"] == "The invented team (2020)"
    assert network.settings.frame.references == ("Air: the invented office",)


def test_the_citation_file_names_this_version() -> None:
    lines = (ROOT / "docs" / "CITATION.cff").read_text("utf-8").splitlines()
    assert f"version: {massfit.__version__}" in lines
    assert "license: MIT" in lines
