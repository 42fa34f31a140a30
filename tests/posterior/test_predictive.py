"""The predictive check passes networks of the model's own make, and calls out what the model cannot hold."""

from dataclasses import replace

import pytest

from massfit.posterior.predictive import predictive_check
from massfit.posterior.sample import sample_posterior
from massfit.settings import PosteriorSettings, Priors

PLAIN = PosteriorSettings(site_scatter="normal", group_scatter=False)


@pytest.fixture(autouse=True)
def short_runs(monkeypatch: pytest.MonkeyPatch) -> None:
    """Runs too short to be called converged: a p-value of some hundred draws is told from 0.01 by far."""
    monkeypatch.setattr("massfit.posterior.sample.STEPS", 120)
    monkeypatch.setattr("massfit.posterior.sample.MAX_STEPS", 120)


def checked(network, priors: Priors = Priors(), moved: tuple[float, float] = (0.0, 0.0)) -> dict:  # noqa: B008 (frozen)
    phasors, fingerprints = network.datasets()
    site = min(4, phasors.sizes["site"] - 1)
    phasors["phasor"].values[site] += moved
    posterior = sample_posterior(phasors, fingerprints, settings=PLAIN, priors=priors)
    return predictive_check(posterior, phasors, fingerprints)


def p_values(check: dict) -> dict[str, float]:
    return {row["name"]: row["p"] for row in check["checks"]}


def test_a_network_of_the_models_own_make_agrees(invent) -> None:
    check = checked(invent(3, sites=16, missing=0.2))
    assert check["agrees"]
    assert set(p_values(check)) == {"site_scatter", "largest_residual", "models_together", "models_at_sites"}
    assert all(0.03 < p < 0.97 for p in p_values(check).values())
    assert check["sentences"][0].startswith("The scatter of the site phasors is what the fitted model expects")
    low, high = check["checks"][0]["expected"]
    assert low < 1.0 < high


def test_a_site_that_disagrees_is_named(invent) -> None:
    # 2 hPa, four standard deviations of everything that is normal there
    check = checked(invent(3, sites=16, missing=0.2), moved=(120.0, 160.0))
    assert check["farthest_site"] == "site 5"
    assert p_values(check)["largest_residual"] < 0.01
    assert not check["agrees"]
    assert check["sentences"][0].startswith("site 5 lies farther from the others")


def test_models_that_share_no_error_by_assumption_are_seen_to(invent) -> None:
    network = invent(3, sites=16, missing=0.2, scales=(25.0, 10.0, 30.0))
    check = checked(network, replace(Priors(), model_common_hpa=1e-6))
    assert p_values(check)["models_together"] < 0.01
    assert not check["agrees"]


@pytest.mark.parametrize(("sites", "expected"), [(1, set()), (2, {"site_scatter"})])
def test_what_a_small_network_cannot_show_is_left_out(invent, sites: int, expected: set[str]) -> None:
    check = checked(invent(2, sites=sites, models=1))
    assert set(p_values(check)) == expected
    assert check["agrees"]


def test_members_enter_with_their_own_fingerprints_and_the_numbers_repeat(invent) -> None:
    phasors, fingerprints = invent(3, sites=6, members=2).datasets()
    posterior = sample_posterior(phasors, fingerprints, settings=PLAIN, priors=Priors())
    first, again = (predictive_check(posterior, phasors, fingerprints) for _ in range(2))
    assert first == again
    assert all(0.01 < p < 0.99 for p in p_values(first).values())
