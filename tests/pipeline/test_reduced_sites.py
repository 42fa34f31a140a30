"""Sites that were reduced elsewhere: the same site, raw or by its own phasor, says nearly the same."""

import json
from collections.abc import Collection
from dataclasses import replace

import numpy as np
import pytest

from massfit.annual.fit import SiteFit
from massfit.errors import InputError
from massfit.fingerprint.ocean import OceanFunction
from massfit.network import Network, ReducedSite
from massfit.pipeline.estimate import estimate
from massfit.posterior.importance import ScalePosterior
from massfit.posterior.sample import sample_posterior
from massfit.report.figures.draw import draw_figures
from massfit.report.pages.run_page import report_page
from massfit.results.estimate import Estimate
from massfit.results.finished import finished_run

YEARS = (2014, 2015)


def by_model(fit: SiteFit) -> ReducedSite:
    phasor, covariance = fit.single_gaussian()
    return ReducedSite(fit.site, phasor, covariance, YEARS, fit.models, fit.model_noise)


def by_mean(fit: SiteFit) -> ReducedSite:
    phasor, covariance = fit.single_gaussian()
    return ReducedSite(fit.site, phasor.mean(axis=0), covariance, YEARS, fit.models)


def with_phasors(network: Network, reduced: Collection[ReducedSite]) -> Network:
    """Put phasors in the place of the records of their sites."""
    replaced = {each.site for each in reduced}
    records = tuple(record for record in network.records if record.site not in replaced)
    return replace(network, records=records, reduced=tuple(reduced))


@pytest.fixture(scope="module")
def two_of_three(invented: Network, run: Estimate) -> Estimate:
    """The first site by one phasor a model, the second by its mean, the third raw."""
    first, second, _ = (reduction.fit for reduction in run.reductions)
    return estimate(with_phasors(invented, [by_mean(second), by_model(first)]))


@pytest.fixture(scope="module")
def all_of_three(invented: Network, run: Estimate) -> Estimate:
    """Every site by the mean over its models; the network is left with one load member."""
    phasors = [by_mean(reduction.fit) for reduction in run.reductions]
    return estimate(replace(with_phasors(invented, phasors), loads=invented.loads[:1]))


def test_the_answer_is_nearly_that_of_the_records(run: Estimate, two_of_three: Estimate) -> None:
    whole, part = run.posterior.draws, two_of_three.posterior.draws
    # what is lost is how the models differ at one site of three, a matter of their spread and hardly of the mean:
    # 0.1 sd stands for it together with the sampler's noise (0.05 sd for each run)
    assert np.all(np.abs(part.mean(axis=0) - whole.mean(axis=0)) < 0.2 * whole.std(axis=0))
    np.testing.assert_allclose(part.std(axis=0), whole.std(axis=0), rtol=0.1)


def test_a_phasor_for_each_model_is_the_record_as_the_network_sees_it(invented: Network, run: Estimate) -> None:
    first, *_ = (reduction.fit for reduction in run.reductions)
    same = estimate(replace(with_phasors(invented, [by_model(first)]), loads=invented.loads[:1]))
    # the years of a site reduced elsewhere have equal shares: without year-to-year change these do not matter
    route, other = (second_route_without_years(result) for result in (run, same))
    # both hand on the same two moments of every model; the order of the sums differs
    np.testing.assert_allclose(other.mean, route.mean, rtol=1e-9)
    np.testing.assert_allclose(other.covariance, route.covariance, rtol=1e-9)


def second_route_without_years(result: Estimate) -> ScalePosterior:
    settings = result.network.settings
    return sample_posterior(
        result.site_phasors,
        result.fingerprints.isel(member=[0]),
        settings=settings.posterior,
        priors=replace(settings.priors, year_sd_hpa=1e-9),
        atmosphere_sd_hpa=settings.corrections.ocean_mean_atmosphere_sd_hpa,
    ).second_route[0]


def test_another_phasor_moves_the_answer(invented: Network, run: Estimate, two_of_three: Estimate) -> None:
    # control: the site is not just carried along
    first, second, _ = (reduction.fit for reduction in run.reductions)
    turned = replace(by_model(first), phasor=-by_model(first).phasor)
    other = estimate(with_phasors(invented, [by_mean(second), turned]))
    shift = other.posterior.draws.mean(axis=0) - two_of_three.posterior.draws.mean(axis=0)
    assert np.max(np.abs(shift) / two_of_three.posterior.draws.std(axis=0)) > 0.5


def test_the_summary_says_what_is_not_known(run: Estimate, two_of_three: Estimate) -> None:
    sites = {site["id"]: site for site in two_of_three.summary["sites"]}
    first, second, third = (reduction.fit for reduction in run.reductions)
    assert sites[first.site]["days"] is None
    assert sites[first.site]["reduced_sd_hpa"] is None
    assert sites[first.site]["years"] == [2014, 2015]
    assert sites[second.site]["models"] == list(second.models)
    assert sites[third.site]["days"] == third.days
    before = {site["id"]: site for site in run.summary["sites"]}
    for name in (first.site, second.site):
        np.testing.assert_allclose(sites[name]["phasor_hpa"], before[name]["phasor_hpa"], rtol=1e-9)
        np.testing.assert_allclose(sites[name]["admittance"], before[name]["admittance"], rtol=1e-9)
    text = " ".join(two_of_three.summary["assumptions"])
    models = ", ".join(first.models)
    assert f"{second.site} (2014 to 2015, less the mean of {models})" in text
    assert f"{first.site} (2014 to 2015, less {models} one by one)" in text
    assert two_of_three.summary["left_out"] == {}
    # the site of which only the mean is known cannot stay when one of its models goes
    names = {alternative["name"] for alternative in two_of_three.summary["alternatives"]}
    assert {f"without model {model} and 1 site" for model in first.models} <= names
    json.dumps(dict(two_of_three.summary), allow_nan=False)


def test_a_network_may_have_no_record_at_all(run: Estimate, all_of_three: Estimate) -> None:
    assert all_of_three.reductions == ()
    assert all_of_three.summary["records_span"] == ["2014-01-01", "2015-12-31"]
    assert any("how two ocean models differ" in text for text in all_of_three.summary["warnings"])
    assert not any("quiet" in text for text in all_of_three.summary["warnings"])
    assert not any("Short tides" in text or "Drift" in text for text in all_of_three.summary["assumptions"])
    whole = run.posterior.draws
    shift = all_of_three.posterior.draws.mean(axis=0) - whole.mean(axis=0)
    assert np.all(np.abs(shift) < 0.3 * whole.std(axis=0))


def test_the_page_stands_without_records(all_of_three: Estimate) -> None:
    finished = finished_run(all_of_three, command="massfit estimate here")
    assert "reduced_records.nc" not in finished.datasets
    figures = draw_figures(finished, OceanFunction.builtin())
    assert "records" not in figures
    page = report_page(finished, dict.fromkeys(figures, b"png"))
    assert page.count("<td>unknown</td>") >= 2 * len(all_of_three.network.sites)
    assert "The records and what was taken off them" not in page


def test_a_model_that_only_such_sites_have_needs_no_field(all_of_three: Estimate) -> None:
    network = all_of_three.network
    models = tuple(model.name for model in network.circulation)
    result = estimate(replace(network, circulation=(), models_elsewhere=models))
    np.testing.assert_array_equal(result.posterior.annual, all_of_three.posterior.annual)
    assert not any("No ocean circulation model" in text for text in result.summary["assumptions"])


def test_a_site_that_is_left_out_stays_out(invented: Network, run: Estimate) -> None:
    first, second, _ = (reduction.fit for reduction in run.reductions)
    sites = tuple(replace(s, excluded_because="doubtful") if s.id == first.site else s for s in invented.sites)
    network = replace(with_phasors(invented, [by_mean(first), by_mean(second)]), sites=sites, loads=invented.loads[:1])
    result = estimate(replace(network, records=()))
    assert [site["id"] for site in result.summary["sites"]] == [second.site]
    assert result.summary["left_out"][first.site] == "doubtful"
    assert first.site not in " ".join(result.summary["assumptions"])


def test_every_fault_is_told_before_any_site_is_fitted(invented: Network) -> None:
    first = invented.sites[0].id
    good = ReducedSite("nowhere", np.array([5.0, 80.0]), 90.0 * np.eye(2), (2014, 2015))
    wrong = ReducedSite(first, np.array([5.0, 80.0]), -np.eye(2), (2014, 2015), ("no model",))
    with pytest.raises(InputError) as caught:
        estimate(replace(invented, reduced=(good, wrong)))
    assert [(fault.name, fault.problem.split(" and ")[0]) for fault in caught.value.faults] == [
        ("nowhere", "the site was reduced elsewhere"),
        (first, "the site has records"),
        ("models", 'the network has no model "no model"'),
        ("covariance", "the value is [[-1.0, -0.0], [-0.0, -1.0]]"),
    ]
