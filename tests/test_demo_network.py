"""The demo network is what the command in its README makes, and small enough to travel with the package."""

import json
import re
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from massfit.io.network.network_file import read_network
from massfit.network import Network
from massfit.pipeline.estimate import estimate
from massfit.results.estimate import Estimate
from massfit.simulate.network import SimulatedNetwork, simulate_network
from massfit.simulate.options import SimulationOptions
from massfit.simulate.story import tell_story

DEMO = Path(__file__).parents[1] / "demo_network"
README = (DEMO / "README.md").read_text(encoding="utf-8")


def stated_options() -> tuple[SimulationOptions, int]:
    """Options and seed of the command in the README."""
    (command,) = re.findall(r"massfit simulate demo_network (.*)", README)
    words = command.split()
    flags = dict(zip(words[::2], words[1::2], strict=True))
    seed = int(flags.pop("--seed"))
    return SimulationOptions(**{name.removeprefix("--"): value for name, value in flags.items()}), seed


@pytest.fixture(scope="module")
def demo() -> Network:
    return read_network(DEMO)


@pytest.fixture(scope="module")
def again() -> SimulatedNetwork:
    options, seed = stated_options()
    return simulate_network(options, seed=seed)


def test_records_are_those_of_the_command(demo: Network, again: SimulatedNetwork) -> None:
    for kept, made in zip(demo.records, again.network.records, strict=True):
        assert kept.deployment == made.deployment
        assert np.array_equal(kept.time, made.time)
        difference = kept.pressure + kept.reference - made.pressure - made.reference
        assert np.array_equal(np.isnan(kept.pressure), np.isnan(made.pressure))
        # whole pascals; another processor may round a few to the neighbour
        assert np.nanmax(np.abs(difference)) < 1.001
        assert np.nanmean(np.abs(difference) > 0.01) < 1e-3


def test_fields_are_those_of_the_command(demo: Network, again: SimulatedNetwork) -> None:
    for kept, made in zip(demo.circulation, again.network.circulation, strict=True):
        # values are tenths of a pascal
        xr.testing.assert_allclose(kept.pressure, made.pressure, rtol=0.0, atol=0.1001)
    for kept, made in zip(demo.loads, again.network.loads, strict=True):
        assert np.allclose(kept.values, made.values, rtol=0.0, atol=0.0201)
    assert demo.sites == again.network.sites
    assert demo.settings == again.network.settings


def test_truth_and_story_are_those_of_the_command(again: SimulatedNetwork) -> None:
    kept = json.loads((DEMO / "truth.json").read_text())
    for name in ("amplitude_hpa", "peak_day", "in_phase_hpa", "quadrature_hpa"):
        assert kept[name] == pytest.approx(again.truth[name], rel=1e-9)
    options, _ = stated_options()
    assert tell_story(again, options, folder="demo_network") == README


def test_another_seed_makes_another_network(demo: Network) -> None:
    # control for the comparisons above
    options, seed = stated_options()
    other = simulate_network(options, seed=seed + 1).network
    assert other.sites != demo.sites
    assert other.records[0].time.size != demo.records[0].time.size


def test_it_shows_what_networks_are_like(demo: Network) -> None:
    assert 16 <= len(demo.sites) <= 20
    assert any(record.source.endswith(".txt") for record in demo.records)
    assert any(record.steps for record in demo.records)
    assert any(site.exclude for site in demo.sites)
    assert sorted(len(model.pressure.dims) for model in demo.circulation) == [2, 2, 3]
    assert any(model.ocean_mean is not None for model in demo.circulation)
    assert len(demo.loads) >= 4


def test_it_is_small() -> None:
    sizes = [path.stat().st_size for path in DEMO.rglob("*") if path.is_file() and "results" not in path.parts]
    assert sum(sizes) < 8e6
    assert max(sizes) < 1.5e6


@pytest.fixture(scope="module")
def answer(demo: Network) -> Estimate:
    return estimate(demo)


def test_the_region_of_the_answer_holds_the_truth(answer: Estimate) -> None:
    truth = json.loads((DEMO / "truth.json").read_text())
    assert answer.summary["convergence"]["converged"]
    for name in ("amplitude_hpa", "peak_day"):
        low, high = answer.summary[name]["region95"]
        assert low < truth[name] < high, name
    # and it says something: the region is well away from no cycle at all
    assert answer.summary["amplitude_hpa"]["region95"][0] > 0.2


def test_the_restless_and_the_short_site_are_named(answer: Estimate) -> None:
    truth = json.loads((DEMO / "truth.json").read_text())
    warned = {site["id"]: " ".join(site["warnings"]) for site in answer.summary["sites"]}
    roles = {site["id"]: site.get("role") for site in truth["sites"]}
    (restless,) = [name for name, role in roles.items() if role == "eddies"]
    assert "Not quiet" in warned[restless]
    assert sum("Not quiet" in text for text in warned.values()) == 1
    assert any("1.5 years" in text for text in answer.summary["warnings"])
