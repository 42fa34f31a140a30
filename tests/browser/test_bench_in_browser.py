"""The bench of the page gives the numbers that Python gives, at once, and keeps a scenario for Python to repeat."""

import json
from collections.abc import Callable
from dataclasses import asdict, replace
from pathlib import Path

import numpy as np
import pytest
from posterior.conftest import invent_network

from massfit.pipeline.save import save_results
from massfit.pipeline.scenario import answer_scenario_file
from massfit.posterior.mixture_answer import amplitude_and_day, pooled_mixture
from massfit.posterior.network_model import Choices, pooled_moments
from massfit.posterior.scenario import Scenario, answer_scenario
from massfit.report.pages.frame import part
from massfit.results.bench import network_numbers
from massfit.results.estimate import Estimate
from massfit.settings import PosteriorSettings, Priors

SETTINGS = PosteriorSettings(site_scatter="normal")
NETWORKS = {
    "groups, years, a shared place": ({"sites": 9, "placed": True, "members": 2}, SETTINGS),
    "scatter falls with distance": ({"sites": 6, "placed": True}, replace(SETTINGS, group_scatter=4000.0)),
    "missing pairs, several loads": ({"sites": 7, "missing": 0.4, "members": 3}, SETTINGS),
    "sites without a model": ({"sites": 6, "bare_sites": 2, "placed": True}, SETTINGS),
    "one model, centred": ({"sites": 5, "models": 1}, replace(SETTINGS, model_truth="centred")),
}
SCENARIOS = {
    "whole": Scenario(),
    "without two sites": Scenario(frozenset({"site 2", "site 5"})),
    "one site": Scenario(frozenset({f"site {k}" for k in range(2, 10)})),
    "other choices": Scenario(without_models=frozenset({"model 2"}), truth=0.3, model_common_hpa=0.5),
}
INTEGRATE = """
    const [data, scenario] = arguments;
    const found = massfitBench.integrate(data, scenario);
    return [found.mean, found.covariance, massfitBench.regions(found), massfitBench.shares(found)]"""


def plain(scenario: Scenario, **kept: str) -> dict:
    """A scenario as the page writes it."""
    return {
        key: sorted(value) if isinstance(value, frozenset) else value for key, value in asdict(scenario).items()
    } | kept


@pytest.fixture(scope="module")
def scripts(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A page with the mathematics of the bench alone."""
    path = tmp_path_factory.mktemp("scripts") / "bench.html"
    text = part("bench_model.js") + "\n" + part("bench_answer.js")
    path.write_text(
        f"<!DOCTYPE html><meta charset='utf-8'><title>bench</title><script>{text}</script>", encoding="utf-8"
    )
    return path


@pytest.mark.parametrize("name", NETWORKS)
def test_the_script_gives_what_python_gives(browser, scripts: Path, name: str) -> None:
    shape, settings = NETWORKS[name]
    network = invent_network(4, **shape)
    choices = Choices(settings, Priors(), 0.04)
    members = [f"pattern {k + 1}" for k in range(len(network.admittance))]
    data = network_numbers(network.observations, network.admittance, choices) | {"members": members}
    browser.open(scripts)
    for scenario in SCENARIOS.values():
        known = set(network.observations.sites), set(network.observations.models)
        asked = replace(
            scenario,
            without_sites=scenario.without_sites & known[0],
            without_models=scenario.without_models & known[1],
        )
        mean, covariance, regions, _ = browser.run(INTEGRATE, data, plain(asked))
        _, posteriors = answer_scenario(network.observations, network.admittance, members, choices, asked)
        expected = pooled_moments(posteriors)
        np.testing.assert_allclose(mean, expected[0], rtol=1e-6, atol=1e-6)
        np.testing.assert_allclose(covariance, expected[1][[0, 0, 1], [0, 1, 1]], rtol=1e-6, atol=1e-6)
        amplitude, day = amplitude_and_day(pooled_mixture(posteriors))
        for found, own in ((regions["amplitude"], amplitude), (regions["day"], day)):
            for key in ("median", "region50", "region95"):
                np.testing.assert_allclose(found[key], own[key], rtol=1e-6)


def test_the_drawn_regions_hold_their_probability(browser, scripts: Path) -> None:
    network = invent_network(4, sites=6, members=3)
    choices = Choices(SETTINGS, Priors(), 0.04)
    members = ["1", "2", "3"]
    data = network_numbers(network.observations, network.admittance, choices) | {"members": members}
    browser.open(scripts)
    _, _, regions, _ = browser.run(INTEGRATE, data, plain(Scenario()))
    _, posteriors = answer_scenario(network.observations, network.admittance, members, choices, Scenario())
    mixture = pooled_mixture(posteriors)
    for outline, probability in zip(regions["contours"], (0.5, 0.95), strict=True):
        # its level is that of one of some two hundred cells
        assert inside(mixture, np.array(outline)) == pytest.approx(probability, abs=0.012)


def inside(mixture, outline: np.ndarray) -> float:
    """Mass of a mixture inside an outline that is a star about its mean, by rings along the rays of the outline."""
    centre, _ = mixture.moments()
    rays = outline - centre
    shares = (np.arange(60) + 0.5) / 60
    points = centre + shares[:, None, None] * rays
    density = mixture.density(points.reshape(-1, 2)).reshape(60, -1)
    return float((density * shares[:, None] / 60).sum(axis=0) @ (rays**2).sum(axis=1) * 2.0 * np.pi / len(rays))


@pytest.fixture(scope="module")
def results(run: Estimate, tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("bench") / "results"
    save_results(run, folder)
    return folder


@pytest.fixture(scope="module")
def python(results: Path, tmp_path_factory: pytest.TempPathFactory) -> Callable[[dict], dict]:
    """Python's answer to a scenario, by the file that the page would save."""
    file = tmp_path_factory.mktemp("scenario") / "scenario.json"

    def answer(scenario: dict) -> dict:
        file.write_text(json.dumps(scenario), encoding="utf-8")
        return answer_scenario_file(results, None, file, student=False)

    return answer


BENCH = "const bench = document.querySelector('section.bench'); "
SHOWN = BENCH + "return bench.dataset.shares && {...bench.dataset}"
PRESS = BENCH + "bench.querySelector(`input[data-kind=${arguments[0]}][value='${arguments[1]}']`).click()"


def assert_shows(shown: dict, answer: dict) -> None:
    (in_phase, across), (_, quadrature) = answer["covariance_hpa2"]
    assert float(shown["inPhase"]) == pytest.approx(answer["in_phase_hpa"]["mean"], abs=1e-6)
    assert float(shown["quadrature"]) == pytest.approx(answer["quadrature_hpa"]["mean"], abs=1e-6)
    assert json.loads(shown["covariance"]) == pytest.approx([in_phase, across, quadrature], abs=1e-6)
    shares = json.loads(shown["shares"])
    assert shares == pytest.approx(answer["variance_share"], abs=1e-6)


def test_a_site_a_model_and_a_load_that_are_unticked_are_left_out(
    browser, results: Path, run: Estimate, python
) -> None:
    browser.open(results / "report.html")
    browser.run(BENCH + "bench.scrollIntoView()")
    whole = python({})
    assert_shows(browser.wait(SHOWN), whole)
    asked: dict = {"without_sites": [], "without_models": [], "without_members": []}
    for kind, names in (
        ("sites", run.posterior.sites),
        ("models", run.posterior.models),
        ("members", run.posterior.members),
    ):
        browser.run(PRESS, kind, 1)
        asked[f"without_{kind}"] = [names[1]]
        assert_shows(browser.wait(SHOWN), python(asked))
    text = browser.run(BENCH + "return bench.querySelector('[data-show=sentence]').textContent")
    assert f"{python(asked)['amplitude_hpa']['median']:.3f} hPa" in text
    assert "from 2 of 3 sites" in text
    assert python(asked)["in_phase_hpa"]["mean"] != pytest.approx(whole["in_phase_hpa"]["mean"], abs=1e-4)
    browser.run(BENCH + "bench.querySelector('[data-do=reset]').click()")
    assert_shows(browser.wait(SHOWN), whole)
    assert browser.complaints() == []


def test_choices_are_taken_and_nonsense_is_not(browser, results: Path, python) -> None:
    browser.open(results / "report.html")
    put = (
        BENCH
        + """const input = bench.querySelector(`input[data-kind=${arguments[0]}]`);
        input.value = arguments[1]; input.dispatchEvent(new Event('change', {bubbles: true}))"""
    )
    browser.run(put, "truth", "0")
    browser.run(put, "model_common_hpa", "0.4")
    assert_shows(browser.wait(SHOWN), python({"truth": 0.0, "model_common_hpa": 0.4}))
    browser.run(put, "model_common_hpa", "-3")
    assert "must be from" in browser.run(BENCH + "return bench.querySelector('[data-show=trouble]').textContent")
    for number in range(3):
        browser.run(PRESS, "sites", number)
    browser.run(put, "model_common_hpa", "0.4")
    said = BENCH + "return bench.querySelector('[data-show=sentence]').textContent"
    assert "Nothing is left" in browser.run(said)
    assert browser.run(BENCH + "return bench.querySelectorAll('tbody tr').length") == 0
    browser.run(BENCH + "bench.querySelector('[data-do=reset]').click(); bench.querySelector('[data-do=none]').click()")
    assert "Nothing is left" in browser.run(said)


def test_a_link_keeps_a_scenario(browser, results: Path, run: Estimate, python) -> None:
    browser.open(results / "report.html")
    browser.run(PRESS, "sites", 0)
    link = browser.run(BENCH + "return bench.querySelector('[data-show=link]').href")
    browser.driver.get("about:blank")
    browser.driver.get(link)
    shown = browser.wait(SHOWN)
    assert_shows(shown, python({"without_sites": [run.posterior.sites[0]]}))
    assert browser.run(BENCH + "return bench.querySelector('input[data-kind=sites]').checked") is False


def test_a_saved_scenario_is_repeated_in_python(browser, results: Path, python) -> None:
    browser.open(results / "report.html")
    browser.run(PRESS, "sites", 2)
    shown = browser.wait(SHOWN)
    browser.run(BENCH + "bench.querySelector('[data-do=save]').click()")
    saved = json.loads(browser.saved("scenario.json"))
    assert_shows(shown, python(saved))
    opened = BENCH + "return bench.querySelector('[data-do=open]')"
    browser.run(BENCH + "bench.querySelector('[data-do=reset]').click()")
    browser.run(opened).send_keys(str(browser.downloads / "scenario.json"))
    unticked = BENCH + "return bench.querySelectorAll('input[type=checkbox]:not(:checked)').length === 1"
    assert browser.wait(unticked)


@pytest.mark.parametrize(
    ("scenario", "words"),
    [
        ({"without_sites": ["<img src=x onerror=window.stray=1>"]}, "there is no <img"),
        ({"network": "another"}, "another network"),
        ({"truth": "much"}, "must be from"),
        ([], "It is no scenario"),
    ],
)
def test_a_scenario_that_does_not_fit_is_refused_in_words(browser, results: Path, scenario, words: str) -> None:
    browser.open(results / "report.html")
    browser.run("location.hash = '#try=' + encodeURIComponent(arguments[0])", json.dumps(scenario))
    trouble = browser.wait(BENCH + "return bench.querySelector('[data-show=trouble]').textContent")
    assert words in trouble
    assert browser.run("return window.stray") is None
    assert browser.complaints() == []


def forty_sites() -> dict:
    network = invent_network(8, sites=40, members=5)
    numbers = network_numbers(network.observations, network.admittance, Choices(SETTINGS, Priors(), 0.04))
    return numbers | {"members": list("abcde")}


TIMED = """
    const [data, scenario] = arguments;
    return Array.from({length: 8}, () => {
        const start = performance.now();
        massfitBench.regions(massfitBench.integrate(data, scenario));
        return performance.now() - start;
    })"""


@pytest.mark.benchmark
def test_forty_sites_answer_within_a_tenth_of_a_second(browser, scripts: Path) -> None:
    browser.open(scripts)
    assert min(browser.run(TIMED, forty_sites(), plain(Scenario(frozenset({"site 7"}))))) < 100.0


def test_forty_sites_answer_at_once_on_a_busy_machine_too(browser, scripts: Path) -> None:
    # the benchmark beside it asks for 100 ms on a quiet one
    browser.open(scripts)
    assert min(browser.run(TIMED, forty_sites(), plain(Scenario(frozenset({"site 7"}))))) < 500.0
