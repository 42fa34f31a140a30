"""Surrogates hold the truth they are made with, and regions that are too sure are seen to be."""

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from click.testing import CliRunner

from massfit.annual.drift_draws import DrawnDrift, draw_drift
from massfit.annual.noise import NoiseModel
from massfit.cli.main import main
from massfit.io.network.write_network import write_network
from massfit.pipeline.calibrate import judged
from massfit.pipeline.fingerprints import network_fingerprints
from massfit.pipeline.progress import ignore
from massfit.pipeline.site_stage import SiteStage, site_stage
from massfit.pipeline.sites import SiteTask, reduce_site
from massfit.pipeline.surrogate import SurrogateBase, _site_surrogate, further_member, make_surrogate, surrogate_base
from massfit.posterior.sample import sample_posterior
from massfit.simulate.network import simulate_network
from massfit.simulate.options import SimulationOptions

NETWORK = simulate_network(
    SimulationOptions(sites=3, years=2, models=2, load_members=2, sampling="daily", incidents=False, bad_site=False),
    seed=5,
).network


def fitted(tasks: tuple[SiteTask, ...]) -> list:
    return [reduce_site(task).fit for task in tasks]


@pytest.fixture(scope="module")
def stage() -> SiteStage:
    return site_stage(NETWORK, ignore, map)


@pytest.fixture(scope="module")
def base(stage: SiteStage) -> SurrogateBase:
    fingerprints = network_fingerprints(NETWORK, stage.operator, stage.sites, stage.footprints, stage.air)
    chosen = NETWORK.settings
    posterior = sample_posterior(stage.phasors, fingerprints, settings=chosen.posterior, priors=chosen.priors)
    return surrogate_base(stage.tasks, stage.reductions, stage.table, stage.phasors, fingerprints, posterior)


def no_drift(records, _, **__):
    return tuple(DrawnDrift(np.zeros((1, len(record.time))), np.zeros((1, 0))) for record in records)


def test_without_noise_the_fit_gives_back_every_phasor_put_in(
    base: SurrogateBase, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("massfit.pipeline.surrogate.draw_drift", no_drift)
    still = NoiseModel(np.zeros(0), np.zeros(0), np.zeros(1))
    # every year the same: how much each weighs in a site depends on its noise
    steady = replace(base.priors, year_sd_hpa=1e-6)
    quiet = replace(base, sites=tuple(replace(site, noise=still) for site in base.sites), priors=steady)
    surrogate = make_surrogate(quiet, np.random.default_rng(1))
    for fit in fitted(surrogate.tasks):
        mean, _ = fit.single_gaussian()
        # a hundredth of what the errors are: what drift terms and the interpolation of the models leave
        np.testing.assert_allclose(mean.mean(axis=0), surrogate.at_sites[fit.site], atol=0.3)
    moved = make_surrogate(replace(quiet, centre=np.add(quiet.centre, [50.0, 0.0])), np.random.default_rng(1))
    shift = [moved.at_sites[site] - surrogate.at_sites[site] for site in surrogate.at_sites]
    assert all(abs(each[0] - 50.0) < 15.0 for each in shift)  # 50 times an admittance near one


def test_the_drift_of_surrogates_spreads_as_far_as_the_record_leaves_it_open(
    base: SurrogateBase, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Without cycle and noise a surrogate's daily means are what was subtracted, and its drift."""
    monkeypatch.setattr("massfit.pipeline.surrogate._cycle", lambda time, *_: np.zeros(len(time)))
    monkeypatch.setattr("massfit.pipeline.surrogate._drawn_noise", lambda own, *_: [0.0 for _ in own.task.daily])
    site = base.sites[0]
    year, (record, *_) = site.task.settings.frame.reference_year, site.task.daily
    choices = {"reference_year": year, "rng": np.random.default_rng(1), "priors": site.task.settings.priors}
    expected = draw_drift(site.records, site.noise, count=1000, **choices)[0].days
    drifts = []
    for number in range(40):
        surrogate = _site_surrogate(site, np.zeros(2), {}, site.errors, np.random.default_rng(number))
        drifts.append(surrogate.daily[0].pressure - record.pressure)
    days = np.linspace(0, len(record.time) - 1, 6).astype(int)
    mean, sd = expected[:, days].mean(axis=0), expected[:, days].std(axis=0)
    found = np.array(drifts)[:, days]
    assert sd.min() > 1.0  # Pa: the drift is not known to a millimetre of water
    # forty draws: 0.16 standard deviations for a mean, 0.11 for their logarithm; four of each
    np.testing.assert_allclose((found.mean(axis=0) - mean) / sd, 0.0, atol=4 * 0.16)
    np.testing.assert_allclose(np.log(found.std(axis=0) / sd), 0.0, atol=4 * 0.11)


def test_surrogates_differ_by_their_stream_alone(base: SurrogateBase) -> None:
    one, again, other = (make_surrogate(base, np.random.default_rng(seed)) for seed in (1, 1, 2))
    for first, second in ((one, again), (one, other)):
        same = [
            np.array_equal(a.pressure, b.pressure)
            for x, y in zip(first.tasks, second.tasks, strict=True)
            for a, b in zip(x.daily, y.daily, strict=True)
        ]
        assert all(same) == (second is again)
        assert any(same) == (second is again)


def test_a_fit_told_that_the_noise_is_white_is_seen_to_be_too_sure(base: SurrogateBase) -> None:
    """The negative control: on the same surrogates, everything else as it is."""
    squares: dict[str, list[float]] = {"as it is": [], "white": []}
    # a memory of a month, plain in a record of two years
    red = NoiseModel(np.array([1 / 30.0]), np.array([60.0**2]), np.zeros(1))
    noisy = tuple(replace(site, noise=replace(red, white=5.0 + 0.0 * site.noise.white)) for site in base.sites)
    for number in range(2):
        surrogate = make_surrogate(replace(base, sites=noisy), np.random.default_rng([3, number]))
        for name, forms in (("as it is", None), ("white", ("white",))):
            tasks = surrogate.tasks
            if forms:
                tasks = tuple(
                    replace(t, settings=replace(t.settings, priors=replace(t.settings.priors, noise_forms=forms)))
                    for t in tasks
                )
            for fit in fitted(tasks):
                mean, covariance = fit.single_gaussian()
                away = mean.mean(axis=0) - surrogate.at_sites[fit.site]
                squares[name].append(0.5 * away @ np.linalg.solve(covariance, away))
    # six sites: the mean of half chi-squares with two degrees of freedom exceeds 2.6 once in a thousand
    assert np.mean(squares["as it is"]) < 2.6
    assert np.mean(squares["white"]) > 2.6


def test_what_is_judged_is_the_posterior_of_the_surrogate(base: SurrogateBase, monkeypatch) -> None:
    monkeypatch.setattr("massfit.posterior.sample.STEPS", 60, raising=False)
    monkeypatch.setattr("massfit.posterior.sample.MAX_STEPS", 60, raising=False)
    surrogate = make_surrogate(base, np.random.default_rng(1))
    found = judged(base, surrogate, fitted(surrogate.tasks))
    np.testing.assert_array_equal(found["truth"], surrogate.annual)
    assert found["site_square"].shape == (3,)
    assert np.linalg.norm(found["mean"] - surrogate.annual) < 6.0 * np.sqrt(np.trace(found["covariance"]))


def test_a_further_member_has_the_inflated_spread_of_those_given() -> None:
    rng = np.random.default_rng(1)
    given = 1.1 + 0.1 * (rng.standard_normal((5, 3)) + 1j * rng.standard_normal((5, 3)))
    drawn = np.array([further_member(given, rng) for _ in range(20_000)])
    away = given - given.mean(axis=0)
    expected = 6 / 4 * (away.T @ away.conj()).real / 5
    error = np.sqrt((expected**2 + np.outer(np.diag(expected), np.diag(expected))) / 20_000)
    found = drawn - given.mean(axis=0)
    assert np.all(np.abs((found.T @ found.conj()).real / 20_000 - expected) < 5 * error)
    one = given[:1]
    np.testing.assert_array_equal(further_member(one, rng), one[0])


def test_the_command_writes_what_it_found_everywhere(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("massfit.posterior.sample.STEPS", 60, raising=False)
    monkeypatch.setattr("massfit.posterior.sample.MAX_STEPS", 60, raising=False)
    monkeypatch.setattr("os.cpu_count", lambda: 1)
    monkeypatch.setattr("massfit.pipeline.save._pictures", lambda _: dict.fromkeys(PICTURES, b"\x89PNG"))
    options = SimulationOptions(
        sites=1, years=1.5, models=1, load_members=1, sampling="daily", incidents=False, bad_site=False
    )
    write_network(simulate_network(options, seed=3).network, tmp_path / "network")
    done = CliRunner().invoke(main, ["estimate", str(tmp_path / "network"), "--calibrate", "2"])
    assert done.exit_code in (0, 3), done.output  # the runs are too short to converge
    assert "Of 2 surrogates of this network with a known cycle" in " ".join(done.stdout.split())
    assert "calibration" in done.stderr
    results = tmp_path / "network/results"
    said = json.loads((results / "estimate.json").read_text())["calibration"]
    assert said["surrogates"] == 2
    with xr.open_dataset(results / "calibration.nc", engine="h5netcdf") as data:
        assert data.sizes["surrogate"] == 2
        assert data.attrs["Conventions"] == "CF-1.13, ACDD-1.3"
    assert said["sentence"] in (results / "report.html").read_text()


PICTURES = ("phasor_plane", "network_map", "fingerprint", "corner", "convergence", "coverage")
