"""Recovery: the recommended recorder is laid in simulation, and the error achieved held against the one promised."""

from dataclasses import replace

import numpy as np
import pytest
import xarray as xr
from siting.planned_networks import block, draw_phasors, invented_observations, turned, with_candidate

from massfit.annual.dataset import site_phasors
from massfit.annual.fit import fit_site
from massfit.annual.noise import NoiseCovariance, NoiseModel
from massfit.phasor import annual_basis, as_components, days_since
from massfit.posterior.network_model import Choices, network_model, pooled_moments, second_routes
from massfit.posterior.observations import read_observations
from massfit.settings import PosteriorSettings, Priors
from massfit.site import Site
from massfit.siting.candidate_gain import covariance_with
from massfit.siting.candidates import candidate_rows
from massfit.siting.network_error import network_error
from massfit.siting.planned_record import expected_covariance, years_of_record

# what sites share is small, so that one recorder more is worth something; scales are drawn from their priors
PRIORS = Priors(annual_sd_hpa=1.0, model_common_hpa=0.02)
SCALES = np.array([30.0, 30.0, 2.0])
DRAWS = 700


def laid(seed: int, scatter: str) -> dict[str, np.ndarray]:
    """One network: covariances before, promised and achieved, and the error of the answer with the recorder in it."""
    rng = np.random.default_rng(seed)
    chosen = Choices(PosteriorSettings(site_scatter=scatter, group_scatter=False), PRIORS, 0.04)
    observations, admittance = invented_observations(seed, sites=4, members=1)
    truth = 100.0 * rng.standard_normal(2)
    places = np.column_stack([rng.uniform(-0.8, 0.8, 3), rng.uniform(0.0, 6.28, 3)])
    factors = 1.1 + 0.05 * (rng.standard_normal(3) + 0.3j * rng.standard_normal(3))
    records = np.array([turned(rng, level, 0.3 * level) for level in (60.0, 120.0, 240.0)])
    rows = candidate_rows(observations, chosen, places, factors[None], record=records, years=2.0)
    scales = tuple(SCALES * np.abs(rng.standard_t(4.0, 3)))

    def drawn(best: int):
        """The network with one of the places in it, drawn whole from the model."""
        wide = replace(with_candidate(observations, places[best], records[best]), mean_only=frozenset())
        wide = draw_phasors(
            rng, wide, np.append(admittance[0], factors[best]), scales, truth=truth, student=scatter != "normal"
        )
        values = wide.part_phasor.copy()
        values[-1] = values[-1].mean(axis=1, keepdims=True)
        return replace(wide, part_phasor=values, mean_only=frozenset({"zz candidate"}))

    # the place is chosen before anything of it is read: the network's own phasors are the same for all
    state = rng.bit_generator.state
    known = drawn(0)
    before = replace(observations, part_phasor=known.part_phasor[:-1])
    routes = second_routes(before, admittance, chosen, draws=DRAWS)
    promised = covariance_with(network_error(network_model(before, admittance, chosen), routes), rows)
    best = int(np.trace(promised, axis1=1, axis2=2).argmin())
    rng.bit_generator.state = state
    wide = drawn(best)
    np.testing.assert_array_equal(wide.part_phasor[:-1], known.part_phasor[:-1])
    after = second_routes(wide, np.column_stack([admittance, factors[[best]]]), chosen, draws=DRAWS)
    mean, achieved = pooled_moments(after)
    return {
        "before": pooled_moments(routes)[1],
        "promised": promised[best],
        "achieved": achieved,
        "error": mean - truth,
    }


def size(covariances: list[np.ndarray]) -> float:
    return float(np.exp(np.mean(np.log(np.trace(covariances, axis1=1, axis2=2)))) ** 0.5)


def judged(count: int, scatter: str) -> tuple[float, float, float]:
    """Ratios of errors achieved to those promised and to those before, and the mean squared error over the promise."""
    runs = [laid(seed, scatter) for seed in range(1, count + 1)]
    before, promised, achieved = ([run[name] for run in runs] for name in ("before", "promised", "achieved"))
    squares = [run["error"] @ np.linalg.solve(run["promised"], run["error"]) / 2 for run in runs]
    return size(achieved) / size(promised), size(achieved) / size(before), float(np.mean(squares))


def test_a_recorder_that_is_laid_keeps_its_promise() -> None:
    kept, gained, _ = judged(10, "normal")
    assert abs(kept - 1) < 0.1
    # control: to promise nothing would be wrong
    assert gained < 0.9


@pytest.mark.slow
@pytest.mark.parametrize("scatter", ["normal", "student-t"])
def test_the_promise_holds_over_many_networks(scatter: str) -> None:
    count = 120
    kept, gained, squares = judged(count, scatter)
    print(f"{scatter}: achieved over promised {kept:.3f}, over before {gained:.3f}; squared error {squares:.2f}")
    assert abs(kept - 1) < 0.1
    assert gained < 0.9
    # the true error: 2 count squares of unit variance, three standard errors; heavy tails of the scales widen it
    assert abs(squares - 1) < 3 * 1.5 / np.sqrt(count)


NOISE = NoiseModel(np.array([1 / 20]), np.array([60.0**2]), np.array([15.0]))
MODELS = ("north", "south")


def whole_chain(seed: int, sites: int = 5) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Covariances before, promised and achieved where every site is a record that the site stage fits."""
    rng = np.random.default_rng(seed)
    truth, common = np.array([10.0, 85.0]), 2.0 * (rng.standard_normal(2) + rng.standard_normal((2, 2)))
    factors = 1.1 + 0.05 * (rng.standard_normal(sites) + 0.3j * rng.standard_normal(sites))
    fits = []
    for s in range(sites):
        recorder = years_of_record(2.0)
        days = days_since(recorder.time, 2027)
        shared = block(factors[s]) @ truth + 4.0 * rng.standard_normal(2) + 15.0 * rng.standard_normal(2)
        decay = 3000.0 * rng.standard_normal() * np.exp(-(days - days[0]) / np.exp(rng.uniform(1.5, 5.5)))
        noise = NoiseCovariance(days, np.zeros(len(days), np.int64), NOISE)
        pressure = annual_basis(days) @ shared + decay + noise.color(rng.standard_normal((len(days), 1)))[:, 0]
        away = -common - 10.0 * rng.standard_normal((2, 2))
        circulation = (annual_basis(days) @ away.T).T
        record = replace(recorder, pressure=pressure, circulation=circulation)
        fits.append(
            fit_site([record], models=MODELS, reference_year=2027, rng=np.random.default_rng(s), site=f"site {s}")
        )
    places = [Site(f"site {s}", float(rng.uniform(-50, 50)), float(rng.uniform(0, 360))) for s in range(sites)]
    phasors = site_phasors(fits, models=MODELS, reference_year=2027, sites=places)
    prints = xr.Dataset(
        {"admittance": (("member", "site", "component"), as_components(factors)[None], {"units": "1"})},
        coords={"site": [place.id for place in places], "member": ["one"]},
        attrs={"earth_model": "", "max_degree": 1, "ocean_area_m2": 1.0, "sea_water_density_kg_m3": 1025.0},
    )
    chosen = Choices(PosteriorSettings(site_scatter="normal"), PRIORS, 0.04)
    wide, admittance = read_observations(phasors, prints)
    after = pooled_moments(second_routes(wide, admittance, chosen, draws=DRAWS))[1]
    fewer, known = read_observations(phasors.isel(site=slice(-1)), prints)
    routes = second_routes(fewer, known, chosen, draws=DRAWS)
    record = expected_covariance([years_of_record(2.0)], NOISE, reference_year=2027, priors=PRIORS)
    position = np.radians([[places[-1].latitude_deg, places[-1].longitude_deg]])
    rows = candidate_rows(fewer, chosen, position, factors[None, -1:], record=record, years=2.0)
    promised = covariance_with(network_error(network_model(fewer, known, chosen), routes), rows)[0]
    return pooled_moments(routes)[1], promised, after


def chain_ratios(count: int) -> tuple[float, float]:
    """Ratios of errors achieved to those promised and to those before."""
    before, promised, achieved = zip(*(whole_chain(seed) for seed in range(1, count + 1)), strict=True)
    return size(list(achieved)) / size(list(promised)), size(list(achieved)) / size(list(before))


@pytest.mark.slow
def test_the_promise_holds_through_the_whole_site_stage() -> None:
    kept, gained = chain_ratios(12)
    print(f"whole site stage: achieved over promised {kept:.3f}, over before {gained:.3f}")
    assert abs(kept - 1) < 0.1
    assert gained < 0.95
