"""What the fit of a site costs. Wanted: 0.4 s for four years in four deployments, and both cores for 200 sites."""

import time
from functools import partial

import numpy as np
import pytest

from massfit.annual.design import build_design
from massfit.annual.evidence import DriftBasis
from massfit.annual.families import noise_families
from massfit.annual.fit import fit_site
from massfit.annual.mode import joint_mode
from massfit.annual.operator import phasor_operator
from massfit.annual.record import ReducedRecord
from massfit.pipeline.workers import Workers
from massfit.settings import Priors

pytestmark = pytest.mark.benchmark(timer=time.process_time)  # seconds of one core, whatever else it does

SETTLED = np.datetime64("2016-01-01T12", "ns")


def site(seed: int, days: int, deployments: int, models: int) -> list[ReducedRecord]:
    """Daily means in deployments end to end, in a sea whose noise keeps 95 % from day to day."""
    rng = np.random.default_rng(seed)
    ocean = np.zeros(days)
    for day in range(1, days):
        ocean[day] = 0.95 * ocean[day - 1] + rng.normal(scale=12.0)
    records = []
    for number, own in enumerate(np.array_split(np.arange(days), deployments)):
        age = own - own[0]
        pressure = ocean[own] + 60 * np.cos(2 * np.pi * own / 365.2422) + rng.normal(scale=10.0, size=len(own))
        pressure += 300 * age / 365 + rng.normal(scale=1500.0) * np.exp(-age / 50.0)
        when = SETTLED + own * np.timedelta64(1, "D")
        circulation = rng.normal(scale=10.0, size=(models, len(own)))
        records.append(ReducedRecord(str(number), when, pressure, circulation, when[0]))
    return records


def plug_in(records: list[ReducedRecord]) -> np.ndarray:
    """The phasor with noise and time constants at the mode of one form of noise, nothing integrated."""
    design = build_design(records, reference_year=2016, priors=Priors())
    mode = joint_mode(DriftBasis(design), noise_families(Priors(noise_forms=("exponential",))))
    return phasor_operator(design.covariance(mode.noise), design, mode.grid.mode) @ design.data


def test_plug_in(benchmark) -> None:
    benchmark(plug_in, site(1, 1461, 4, 3))


def test_integrated(benchmark, measured) -> None:
    records = site(1, 1461, 4, 3)
    fit = partial(fit_site, records, models=["a", "b", "c"], reference_year=2016)
    benchmark(lambda: fit(rng=np.random.default_rng(1)))
    start = time.process_time()
    plug_in(records)
    ratio = benchmark.stats.stats.min / (time.process_time() - start)
    measured("fit of a site, drift and noise integrated over", "a fit at the most likely noise alone", ratio, None)
    assert benchmark.stats.stats.min < 0.4


def test_two_hundred_sites_use_both_cores() -> None:
    sites = [site(seed, 500, 1, 0) for seed in range(200)]
    fit = partial(fit_site, models=[], reference_year=2016, rng=np.random.default_rng(1))
    seconds = {}
    for count in (1, 2):
        with Workers(count) as workers:
            # started and warm
            list(workers.results(fit, sites[:4]))
            start = time.perf_counter()
            assert len(list(workers.results(fit, sites))) == 200
            seconds[count] = time.perf_counter() - start
    print(f"200 sites: {seconds[1]:.1f} s on one core, {seconds[2]:.1f} s on two")
    assert seconds[2] < 0.67 * seconds[1]
