"""Recovery: the recommended recorder is laid in simulation, and the error achieved held against the one promised."""

from dataclasses import replace

import numpy as np
import pytest
from siting.planned_networks import draw_phasors, invented_observations, turned, with_candidate

from massfit.posterior.network_model import Choices, network_model, pooled_moments, second_routes
from massfit.settings import PosteriorSettings, Priors
from massfit.siting.candidate_gain import covariance_with
from massfit.siting.candidates import candidate_rows
from massfit.siting.network_error import network_error

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
