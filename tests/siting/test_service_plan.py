"""The service plan against the network rebuilt with the other record, and its confounding of drift and cycle."""

from dataclasses import replace

import numpy as np
import pytest
from siting.planned_networks import invented_observations

from massfit.annual.noise import NoiseModel
from massfit.posterior.network_model import Choices, network_model, second_routes
from massfit.settings import PosteriorSettings, Priors
from massfit.siting.network_error import at_nodes, network_error
from massfit.siting.planned_record import DAY, planned_recorder
from massfit.siting.service_plan import ServedSite, ServicePlan, _ahead, _Change, _sd, _years, service_months

NOISE = NoiseModel(np.array([1 / 20]), np.array([100.0**2]), np.array([20.0]))
START = np.datetime64("2014-01-01")


def plan(scatter: str = "normal") -> ServicePlan:
    """Six sites, of which the records of three are known: two run on, one has ended."""
    observations, admittance = invented_observations(3, sites=6)
    choices = Choices(PosteriorSettings(site_scatter=scatter), Priors(model_common_hpa=0.02), 0.01)
    routes = second_routes(observations, admittance, choices, draws=400)
    error = network_error(network_model(observations, admittance, choices), routes, nodes=20)
    long = (planned_recorder("a", START, 730), planned_recorder("b", START + 730 * DAY, 730))
    short = (planned_recorder("a", START + 900 * DAY, 560),)
    ended = (planned_recorder("a", START, 600),)
    sites = tuple(
        ServedSite(name, recorders, NOISE)
        for name, recorders in zip(observations.sites[:3], (long, short, ended), strict=True)
    )
    return ServicePlan(error, observations, admittance, choices, sites, 2016)


@pytest.mark.parametrize("scatter", ["normal", "student-t"])
def test_another_record_is_the_network_rebuilt_with_it(scatter: str) -> None:
    whole = plan(scatter)
    changes = [_Change(whole, site) for site in whole.sites]
    end = whole.today + 700 * DAY
    onward = [site.running_on(end) if whole.running(site) else site.recorders for site in whole.sites]
    years = _years(whole, onward)
    ahead = _ahead(whole, changes, onward, years)
    same = changes[0].errors(ahead, onward[0], years)[1]
    assert same == pytest.approx(_sd(ahead.pooled_covariance), rel=1e-9)
    other = whole.sites[1].redeployed(whole.today + 300 * DAY, end, running=True)
    rebuilt = _ahead(whole, changes, [onward[0], other, onward[2]], years)
    fast = changes[1].errors(ahead, other, years)[1]
    assert fast == pytest.approx(_sd(rebuilt.pooled_covariance), rel=1e-7)
    assert fast > same  # a new drift in the middle costs


def test_a_lost_record_is_the_network_without_the_site() -> None:
    whole = plan()
    changes = [_Change(whole, site) for site in whole.sites]
    onward = [site.recorders for site in whole.sites]
    years = _years(whole, onward)
    ahead = _ahead(whole, changes, onward, years)
    lost = changes[1].errors(ahead, whole.sites[1].without_last(), years)
    assert lost[0] == np.inf
    keep = np.arange(6) != 1
    fewer = replace(whole.observations.select(keep), years=years, year_share=ahead_shares(whole, years)[keep])
    fewer = replace(fewer, period_share=np.append(whole.observations.period_share, np.zeros(len(years) - 4)))
    condition = replace(whole.error.condition, part=whole.error.condition.part[:, keep])
    rebuilt = at_nodes(
        network_model(fewer, whole.admittance[:, keep], whole.choices), condition, np.zeros(2), np.zeros((2, 2))
    )
    within = rebuilt.annual_covariance.mean(axis=0) - ahead.annual_covariance.mean(axis=0)
    assert lost[1] == pytest.approx(_sd(ahead.pooled_covariance + within), rel=1e-7)


def ahead_shares(whole: ServicePlan, years: tuple[int, ...]) -> np.ndarray:
    """Shares of the years as the network ahead has them: unchanged records keep those of the site stage."""
    return np.pad(whole.observations.year_share, ((0, 0), (0, len(years) - 4)))


def test_the_months_of_a_plan() -> None:
    whole, told = plan(), []
    found = service_months(whole, [0, 6, 12, 18, 24], lambda done, total: told.append((done, total)))
    assert told[-1] == (3, 3)
    assert found["running"].values.tolist() == [1, 1, 0]
    ended, redeployed = found["answer_sd_ended"].values, found["answer_sd_redeployed"].values
    on = found.attrs["answer_sd_on_pa"]
    assert on < found.attrs["answer_sd_now_pa"]
    # the longer a recorder stays the better; at the horizon it has run on
    assert np.all(np.diff(ended[:2], axis=1) < 1e-9)
    np.testing.assert_allclose(ended[:2, -1], on, rtol=1e-6)
    np.testing.assert_allclose(redeployed[:2, -1], on, rtol=1e-3)
    # to replace it is never worse than to leave the place empty (up to the shares of the years, which go by days and
    # not by what the days tell), and never better than to leave it down, which has no second drift
    assert np.all(redeployed[:2] <= ended[:2] * 1.001)
    assert np.all(redeployed[:2] >= on - 1e-9)
    # drift and cycle are confounded most when neither recorder has time enough
    own = found["record_sd_redeployed"].values[1]
    assert own[2] > own[0] * 0.99
    assert own[2] > own[-1]
    assert np.isnan(ended[2]).all()
    # where the recorder has ended, the earlier the next is laid the better
    assert np.all(np.diff(redeployed[2]) > -1e-3 * on)
    assert redeployed[2, 0] < redeployed[2, -1]
    assert np.all(found["answer_sd_lost"].values[:2] > ended[:2, 0])


def test_the_error_now_is_what_the_site_stage_found() -> None:
    whole = plan()
    found = service_months(whole, [0, 12], lambda *_: None)
    own = np.sqrt(0.5 * np.trace(whole.observations.covariance[:3], axis1=1, axis2=2))
    np.testing.assert_allclose(found["record_sd_now"].values, own, rtol=1e-9)
