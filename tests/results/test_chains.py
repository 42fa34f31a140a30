"""What is said of the chains of a run, from its file alone."""

import numpy as np
import pytest
import xarray as xr
from arviz_stats.base import array_stats

from massfit.results.chains import chain_diagnostics
from massfit.results.estimate import Estimate
from massfit.results.posterior_groups import posterior_groups


def drawn(chains: np.ndarray, **attrs: int) -> xr.Dataset:
    """A posterior of both components alike, (chain, draw)."""
    phasor = np.stack([chains, chains], axis=-1)
    return xr.Dataset({"member_annual_phasor": (("chain", "draw", "component"), phasor)}, attrs=attrs)


def autoregression(rng: np.random.Generator, memory: float, shape: tuple[int, ...]) -> np.ndarray:
    """Series of unit variance with autocorrelation memory^lag along the last axis."""
    values = rng.standard_normal(shape)
    for step in range(1, shape[-1]):
        values[..., step] = memory * values[..., step - 1] + np.sqrt(1.0 - memory**2) * values[..., step]
    return values


def test_the_numbers_of_the_run_are_found_again_in_its_file(run: Estimate) -> None:
    # the run judged the arrays before they were dealt out to a file, and the log posterior, which is not in the file
    groups = posterior_groups(run.posterior, run.site_phasors, run.fingerprints)
    found, own = chain_diagnostics(groups["posterior"]), run.posterior.convergence
    arrays = [run.posterior.member_annual[..., 0], run.posterior.member_annual[..., 1]]
    arrays += list(np.moveaxis(np.log(run.posterior.scales), -1, 0))
    rhat = [max(float(array_stats.rhat(member)) for member in values) for values in arrays]
    assert found["rhat"].values == pytest.approx(rhat, rel=1e-12)
    assert max(rhat) <= own.rhat_max + 1e-12
    assert float(found["ess_bulk"].min()) >= own.ess_bulk_min - 1e-6
    assert float(found["ess_tail"].min()) >= own.ess_tail_min - 1e-6


def test_walkers_and_members_are_told_apart() -> None:
    # an AR(1) walker: autocorrelation memory^lag and an effective share of (1 - memory) / (1 + memory) [closed form]
    rng, memory = np.random.default_rng(3), 0.6
    members, chains, walkers, steps = 2, 4, 10, 400
    walks = autoregression(rng, memory, (members, chains, walkers, steps))
    draws = np.moveaxis(walks, (1, 3, 2, 0), (0, 1, 2, 3)).reshape(chains, -1)
    found = chain_diagnostics(drawn(draws, load_members=members, walkers=walkers))
    lag = found["lag"].values[:6]
    # standard error of an autocorrelation from 32,000 values: below 0.01
    assert found["autocorrelation"].values[0, :6] == pytest.approx(memory**lag, abs=0.03)
    expected = chains * walkers * steps * (1.0 - memory) / (1.0 + memory)
    assert float(found["ess_bulk"][0]) == pytest.approx(expected, rel=0.2)
    # the control: taken for a single walker and member, the memory is not seen
    blind = chain_diagnostics(drawn(draws))
    assert blind["autocorrelation"].values[0, 1] < 0.1
    assert float(blind["ess_bulk"][0]) > 2.0 * expected


def test_a_chain_that_stands_apart_is_seen() -> None:
    draws = np.random.default_rng(5).standard_normal((4, 500))
    assert float(chain_diagnostics(drawn(draws))["rhat"].max()) < 1.01
    draws[0] += 1.0
    found = chain_diagnostics(drawn(draws))
    assert float(found["rhat"].max()) > 1.05
    assert found.attrs == {"rhat_allowed": 1.01, "ess_needed": 400.0}


def test_traces_are_in_hectopascal() -> None:
    found = chain_diagnostics(drawn(np.full((4, 100), 85.0) + np.random.default_rng(1).standard_normal((4, 100))))
    assert found["trace"].values.mean() == pytest.approx(0.85, abs=0.01)
