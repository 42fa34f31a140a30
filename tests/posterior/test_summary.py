import json
from dataclasses import replace

import numpy as np
import pytest

from massfit.phasor import phasor_from_peak
from massfit.posterior.sample import sample_posterior
from massfit.posterior.summary import summarise
from massfit.settings import PosteriorSettings, Priors

PLAIN = PosteriorSettings(seed=5, site_scatter="normal", group_scatter=False)
SCALARS = ("amplitude_hpa", "peak_day", "in_phase_hpa", "quadrature_hpa", "water_mm", "sea_water_mm", "mass_gt")


def summary_of(posterior, datasets, **changes):
    choices = {"reference_year": 2016, "ocean_area_m2": 3.626e14, "sea_water_density": 1025.0, **changes}
    return summarise(posterior, *datasets, **choices)


@pytest.fixture(scope="module")
def case(invent):
    datasets = invent(members=2, sites=6).datasets()
    return sample_posterior(*datasets, settings=PLAIN, priors=Priors()), datasets


@pytest.fixture(scope="module")
def summary(case):
    return summary_of(*case)


def test_the_summary_keeps_its_contract(summary, case):
    assert json.loads(json.dumps(summary)) == summary
    assert set(summary) == {
        *SCALARS,
        *("peak_date", "variance_share", "years", "alternatives", "convergence", "sites", "covariance_hpa2"),
        "warnings",
    }
    for name in SCALARS:
        assert list(summary[name]) == ["median", "mean", "sd", "region50", "region95"]
    assert set(summary["sites"][0]) == {
        *("id", "phasor_hpa", "phasor_covariance_hpa2", "admittance"),
        *("standardised_residual", "outlier_probability", "warnings"),
    }
    assert {"rhat_max", "ess_bulk_min", "ess_tail_min", "second_route_mean_shift_sd", "second_route_sd_ratio"} < set(
        summary["convergence"]
    )
    assert summary["convergence"]["converged"] is True
    assert [site["id"] for site in summary["sites"]] == list(case[0].sites)


def test_units_are_those_of_the_trade(summary):
    # 1 hPa = 10.197 mm of fresh water, 9.948 mm at 1025 kg/m3, 3697.5 Gt over 3.626e14 m2 [closed form]
    median = summary["amplitude_hpa"]["median"]
    assert summary["water_mm"]["median"] / median == pytest.approx(10.1972, abs=2e-4)
    assert summary["sea_water_mm"]["median"] / median == pytest.approx(9.9485, abs=2e-4)
    assert summary["mass_gt"]["median"] / median == pytest.approx(3697.5, abs=0.1)
    again = summary["mass_gt"]["region95"][1] / summary["amplitude_hpa"]["region95"][1]
    assert again == pytest.approx(3.626e14 * 100 / 9.80665 / 1e12, rel=1e-12)


def test_the_answer_is_that_of_the_draws(summary, case):
    hpa = case[0].draws / 100.0
    assert summary["in_phase_hpa"]["mean"] == pytest.approx(hpa[:, 0].mean())
    assert summary["amplitude_hpa"]["sd"] == pytest.approx(np.hypot(*hpa.T).std(ddof=1))
    np.testing.assert_allclose(summary["covariance_hpa2"], np.cov(hpa.T))


@pytest.mark.parametrize(("day", "date"), [(1.0, "2016-01-02"), (364.5, "2016-12-30")])
def test_a_peak_near_new_year_has_regions_that_do_not_wrap(case, day, date):
    posterior, datasets = case
    centre = phasor_from_peak(90.0, day)
    noise = np.random.default_rng(1).standard_normal((4, 2400, 2))
    noise -= noise.mean(axis=(0, 1))
    summary = summary_of(replace(posterior, annual=[centre.real, centre.imag] + 12.0 * noise), datasets)
    peak = summary["peak_day"]
    # 12 Pa across at 90 Pa: 12/90 rad = 7.75 days
    assert peak["median"] == pytest.approx(day, abs=0.4)
    assert summary["peak_date"] == date
    assert peak["sd"] == pytest.approx(7.75, rel=0.05)
    assert peak["region95"][1] - peak["region95"][0] == pytest.approx(4 * 7.75, rel=0.1)
    assert peak["region95"][0] < 0 or peak["region95"][1] > 365.2422


def test_alternatives_are_those_of_a_direct_refit(summary, case):
    posterior, (phasors, fingerprints) = case
    beside = {alternative["name"]: alternative for alternative in summary["alternatives"]}

    def refit(name, *datasets, settings=PLAIN, priors=None):
        other = sample_posterior(*datasets, settings=settings, priors=priors or Priors())
        mean, sd = other.draws.mean(axis=0), other.draws.std(axis=0)
        base_mean, base_sd = posterior.draws.mean(axis=0), posterior.draws.std(axis=0)
        found = beside[name]
        # some 8000 draws a run: four standard errors of two means, 5 % of a ratio
        assert abs(found["shift_sd"]) == pytest.approx(np.abs((mean - base_mean) / base_sd).max(), abs=0.08)
        ratio = sd / base_sd
        assert found["sd_ratio"] == pytest.approx(ratio[np.abs(np.log(ratio)).argmax()], rel=0.06)
        hpa = [found["in_phase_hpa"], found["quadrature_hpa"]]
        np.testing.assert_allclose(hpa, mean / 100, atol=4 * sd.max() / 100 / np.sqrt(4800))

    refit("truth at the models' centre (r = 0)", phasors, fingerprints, settings=replace(PLAIN, model_truth="centred"))
    refit("without model model 2", phasors.isel(model=[0, 2]), fingerprints)
    refit("double the prior scale of s_common", phasors, fingerprints, priors=replace(Priors(), model_common_hpa=0.3))


def test_every_choice_is_shown(summary):
    assert [alternative["name"] for alternative in summary["alternatives"]] == [
        "truth at the models' centre (r = 0)",
        "Student site scatter",
        *(f"without model model {m}" for m in (1, 2, 3)),
        "half the prior scale of s_common",
        "double the prior scale of s_common",
        "uniform ocean (F = 1)",
        *(f"load member pattern {k} alone" for k in (1, 2)),
    ]


def test_reference_cases_of_the_fingerprints_are_shown(case):
    posterior, (phasors, fingerprints) = case
    cases = np.stack([np.full(6, 1.1), np.ones(6)])
    components = np.stack([cases, np.zeros_like(cases)], axis=-1)
    more = fingerprints.assign(
        reference_admittance=(("case", "site", "component"), components, {"units": "1"})
    ).assign_coords(case=["uniform over land", "uniform ocean"])
    names = [alternative["name"] for alternative in summary_of(posterior, (phasors, more))["alternatives"]]
    assert names[-4:-2] == ["uniform ocean (F = 1)", "uniform over land"]


def test_a_restless_site_is_not_called_quiet(case):
    posterior, (phasors, fingerprints) = case
    restless = phasors.copy(deep=True)
    restless["reduced_sd"].values[2] = 420.0
    sites = summary_of(posterior, (restless, fingerprints))["sites"]
    assert [site["id"] for site in sites if any("Not quiet" in text for text in site["warnings"])] == ["site 3"]
    assert "4.2 hPa" in sites[2]["warnings"][0]


def test_a_site_that_is_no_gaussian_enters_by_its_mixture(case):
    _, (phasors, fingerprints) = case
    doubled = phasors.isel(part=[0, 0]).copy(deep=True)
    doubled["weight"].values[:] = [[1.0, 0.0]] * 6
    doubled["weight"].values[1] = [0.7, 0.3]
    doubled["phasor"].values[1, 1] += 200.0
    posterior = sample_posterior(doubled, fingerprints, settings=PLAIN, priors=Priors())
    assert posterior.mixed == ("site 2",)
    assert posterior.converged
    assert [text for text in posterior.method if text == "by their mixture: site 2"]
    summary = summary_of(posterior, (doubled, fingerprints))
    assert len(summary["sites"]) == 6
    assert sum(summary["variance_share"].values()) == pytest.approx(1.0)


def test_the_cycle_of_each_year_is_told(invent):
    network = invent(sites=12, placed=True, truth=(10.0, 85.0))
    seen = network.observations
    # whole records in single years, and one year 0.3 hPa larger than the others
    share = np.eye(4)[np.arange(12) % 4]
    phasor = seen.part_phasor.copy()
    phasor[share[:, 3] == 1, ..., 1] += 30.0
    network = replace(network, observations=replace(seen, year_share=share, part_phasor=phasor))
    datasets = network.datasets()
    wide = replace(Priors(), year_sd_hpa=0.3)
    posterior = sample_posterior(*datasets, settings=PosteriorSettings(seed=5), priors=wide)
    years = summary_of(posterior, datasets)["years"]
    assert [year["year"] for year in years] == [2014, 2015, 2016, 2017]
    means = np.array([year["quadrature_hpa"]["mean"] for year in years])
    assert means.argmax() == 3
    # the mean of the years by their share of the period is the answer, draw by draw
    np.testing.assert_allclose(
        np.einsum("y,cdyi->cdi", seen.period_share, posterior.year_annual), posterior.annual, atol=1e-9
    )
    assert all(0.3 < year["seen"] < 1.0 for year in years)
    # control: hardly anything is seen of a cycle that is known not to change
    still = sample_posterior(*datasets, settings=PosteriorSettings(seed=5), priors=replace(Priors(), year_sd_hpa=1e-3))
    assert max(year["seen"] for year in summary_of(still, datasets)["years"]) < 0.1


def test_sites_show_what_was_observed(case, summary):
    _, (phasors, fingerprints) = case
    first = summary["sites"][0]
    np.testing.assert_allclose(first["phasor_hpa"], phasors["phasor"].values[0, 0].mean(axis=0) / 100)
    np.testing.assert_allclose(first["admittance"], fingerprints["admittance"].values[:, 0].mean(axis=0))
    np.testing.assert_allclose(first["phasor_covariance_hpa2"], phasors["covariance"].values[0, 0] / 1e4)
