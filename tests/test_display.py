"""What a prompt and a notebook show of the containers is what they hold."""

from dataclasses import replace
from time import perf_counter

from massfit.earth.love import love_numbers
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import prepare_operator
from massfit.fingerprint.sea_level import solve_sea_level
from massfit.network import Network
from massfit.results.estimate import Estimate

UNIFORM_MM = 1000.0 * (1.0 - 0.711) / 0.711 / 1025.0  # 1 mm of water off all land, spread over 71.1 % of the sphere


def test_an_estimate_says_its_answer(run: Estimate) -> None:
    text = repr(run)
    assert f"amplitude of {run.summary['amplitude_hpa']['median']:.2f} hPa" in text
    assert f"{run.summary['mass_gt']['median']:.0f} Gt" in text
    assert "converged  yes" in text
    state = {**run.summary["convergence"], "converged": False}
    doubtful = replace(run, summary={**run.summary, "convergence": state})
    assert "NO: do not use this number" in repr(doubtful)


def test_a_posterior_and_a_fit_say_their_phasors(run: Estimate) -> None:
    mean, sd = run.posterior.draws.mean(axis=0) / 100.0, run.posterior.draws.std(axis=0) / 100.0
    assert f"in phase    {mean[0]:.3f} (sd {sd[0]:.3f}) hPa" in repr(run.posterior)
    assert f"quadrature  {mean[1]:.3f} (sd {sd[1]:.3f}) hPa" in repr(run.posterior)
    fit = run.reductions[0].fit
    phasor = run.summary["sites"][0]["phasor_hpa"]
    assert f"quadrature  {phasor[1]:.3f} (sd " in repr(fit)
    assert f"{fit.days} days" in repr(fit)
    assert "no model" in repr(replace(fit, models=()))


def test_a_network_says_what_it_holds(invented: Network) -> None:
    text = repr(invented)
    assert "sites         3, 0 left out, 0 reduced elsewhere" in text
    assert "2014-01" in text
    assert invented.circulation[1].name in text
    assert "records       0\n" in repr(replace(invented, records=()))


def test_physics_says_its_numbers() -> None:
    love = love_numbers(max_degree=20)
    assert f"k' {love.k[2]:.4f}" in repr(love)
    assert "degree 100" not in repr(love)
    ocean = OceanFunction.builtin()
    assert "3.6263e+14 m2, 71.1% of the sphere" in repr(ocean)
    operator = prepare_operator(ocean, love, max_degree=20)
    text = repr(solve_sea_level(operator, load=(1.0 - operator.ocean) * (1.0 + 2.0j)))
    # all water on land goes to the ocean: the mean is that of the masses, whatever loading does
    assert f"-{UNIFORM_MM:.3f} - {2 * UNIFORM_MM:.3f}i mm" in text


def test_html_holds_the_same_words_and_no_markup_of_a_name(run: Estimate) -> None:
    hostile = replace(run, summary={**run.summary, "network": "<script>alert(1)</script>"})
    html = hostile._repr_html_()
    assert "<script>" not in html
    assert "&lt;script&gt;" in html
    assert f"{run.summary['mass_gt']['median']:.0f} Gt" in html


def test_showing_costs_little(run: Estimate, invented: Network) -> None:
    start = perf_counter()
    for shown in (run, run.posterior, run.reductions[0].fit, invented, OceanFunction.builtin()):
        assert repr(shown)
    # milliseconds; the bound leaves room for a busy machine
    assert perf_counter() - start < 0.5
