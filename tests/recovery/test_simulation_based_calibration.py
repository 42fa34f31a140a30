"""Simulation-based calibration of the network posterior (Talts et al. 2018, arXiv:1804.06788), with controls that fail.

Networks of site phasors are drawn here from the priors, without the package: scales, answer, air-pressure error, cycles
of single years, sites, groups, models, missing pairs. The rank of each true value among draws of its posterior must be
uniform. Uniformity is judged by the empirical distribution of the ranks inside a band that holds the whole curve with
the stated probability (Saeilynoja, Buerkner & Vehtari 2022, Statistics and Computing 32, 32), the error shared among
the quantities. The draws are those of the second route, which takes a tenth of a second a network; one study takes
those of the sampler.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
import pytest
import xarray as xr
from numpy.typing import NDArray
from scipy.stats import binom

from massfit.posterior.network_model import Choices, second_routes
from massfit.posterior.observations import read_observations
from massfit.posterior.sample import sample_posterior
from massfit.settings import PosteriorSettings, Priors

Floats = NDArray[np.float64]

RANKS = 99
"""Draws that each true value is ranked among: nearly independent ones of several thousand."""

AIR_SD_HPA = 0.04
YEARS = 6
SCALES = ("s_site", "s_local", "s_common", "s_group")
PRIORS = Priors()


@dataclass(frozen=True)
class Case:
    phasors: xr.Dataset
    fingerprints: xr.Dataset
    truth: dict[str, float]  # Pa


@dataclass(frozen=True)
class Kind:
    """How the networks are analysed; the plain one analyses them as they are made."""

    scatter: str = "normal"
    priors: Priors = PRIORS
    distort: Callable[[Case], Case] = lambda case: case
    groups: bool = False
    clustered: bool = False

    def settings(self, seed: int) -> PosteriorSettings:
        return PosteriorSettings(seed=seed, site_scatter=self.scatter, group_scatter=self.groups)  # type: ignore[arg-type]


def half_t(rng: np.random.Generator, scale_hpa: float) -> float:
    return 100.0 * scale_hpa * abs(rng.standard_t(4))


def draw_case(rng: np.random.Generator, kind: Kind) -> Case:
    sites, models = int(rng.integers(6, 15)), int(rng.integers(2, 5))
    truth = {
        "s_site": half_t(rng, PRIORS.site_scatter_hpa),
        "s_local": half_t(rng, PRIORS.model_local_hpa),
        "s_common": half_t(rng, PRIORS.model_common_hpa),
    }
    annual = 100.0 * PRIORS.annual_sd_hpa * rng.standard_normal(2)
    factor = 1.08 + 0.08 * rng.standard_normal(sites) + 0.03j * rng.standard_normal(sites)
    known = 3.0 * rng.standard_normal((sites, 2))
    root = rng.uniform(8.0, 40.0, (sites, 1, 1)) * (np.eye(2) + 0.3 * rng.standard_normal((sites, 2, 2)))
    record = root @ np.swapaxes(root, 1, 2)
    weather_sd = rng.uniform(3.0, 9.0, sites)
    noise = weather_sd[:, None, None] ** 2 * np.eye(2)
    present = rng.random((sites, models)) > 0.2
    present[np.arange(sites), rng.integers(0, models, sites)] = True
    year_share = np.array([one_to_four_years(rng) for _ in range(sites)])
    period_share = np.full(YEARS, 1.0 / YEARS)
    years = 100.0 * PRIORS.year_sd_hpa * rng.standard_normal((YEARS, 2))
    scatter = truth["s_site"] * rng.standard_normal((sites, 2))
    if kind.scatter == "student-t":
        scatter *= np.sqrt(4.0 / rng.chisquare(4.0, (sites, 1)))
    group = rng.integers(0, 3, sites)
    if kind.groups:
        truth["s_group"] = half_t(rng, PRIORS.group_scatter_hpa)
        group[:2] = 0  # two sites at least share something
        scatter += (truth["s_group"] * rng.standard_normal((3, 2)))[group]
    if kind.clustered:  # a half of the sites lie together and share most of their scatter
        together = np.arange(sites) < sites // 2
        scatter[together] = np.sqrt(0.8) * scatter[0] + np.sqrt(0.2) * scatter[together]
    common = truth["s_common"] * (rng.standard_normal((models, 2)) + rng.standard_normal(2))
    of_years = annual + (year_share - period_share) @ years
    shared = turned(factor, of_years) + known + 100.0 * AIR_SD_HPA * rng.standard_normal(2) + scatter
    shared += np.einsum("sij,sj->si", root, rng.standard_normal((sites, 2)))
    own = truth["s_local"] * rng.standard_normal((sites, models, 2))
    own += weather_sd[:, None, None] * rng.standard_normal((sites, models, 2))
    phasor = np.where(present[..., None], shared[:, None] + common + own, np.nan)
    covariance = record + noise / present.sum(axis=1)[:, None, None]
    truth |= {"in phase": annual[0], "quadrature": annual[1], "amplitude": float(np.hypot(*annual))}
    phasors, fingerprints = datasets(phasor, covariance, noise, factor, known)
    phasors = phasors.assign(
        year_share=(("site", "year"), year_share, {"units": "1"}),
        period_share=(("year",), period_share, {"units": "1"}),
    ).assign_coords(year=2011 + np.arange(YEARS), group=("site", [f"group {g}" for g in group]))
    return Case(phasors, fingerprints, truth)


def one_to_four_years(rng: np.random.Generator) -> Floats:
    """Shares of the calendar years in a site, between its first and its last."""
    shares = np.zeros(YEARS)
    count = int(rng.integers(1, 5))
    first = int(rng.integers(0, YEARS - count + 1))
    shares[first : first + count] = rng.dirichlet(np.full(count, 5.0))
    return shares


def turned(factor: NDArray[np.complex128], vectors: Floats) -> Floats:
    product = factor * (vectors[..., 0] + 1j * vectors[..., 1])
    return np.stack([product.real, product.imag], axis=-1)


def datasets(
    phasor: Floats, covariance: Floats, noise: Floats, factor: NDArray[np.complex128], known: Floats
) -> tuple[xr.Dataset, xr.Dataset]:
    """Site phasors and fingerprints as the network stage receives them."""
    names = [f"site {s:03d}" for s in range(len(phasor))]
    phasors = xr.Dataset(
        {
            "phasor": (("site", "part", "model", "component"), phasor[:, None], {"units": "Pa"}),
            "weight": (("site", "part"), np.ones((len(names), 1)), {"units": "1"}),
            "covariance": (("site", "part", "component", "component2"), covariance[:, None], {"units": "Pa2"}),
            "model_noise": (("site", "component", "component2"), noise, {"units": "Pa2"}),
            "reduced_sd": (("site",), np.full(len(names), 150.0), {"units": "Pa"}),
            "days": (("site",), np.full(len(names), 900.0), {"units": "d"}),
        },
        coords={"site": names, "model": [f"model {m}" for m in range(phasor.shape[1])]},
        attrs={"reference_year": 2016},
    )
    admittance = np.stack([factor.real, factor.imag], axis=-1)[None]
    fingerprints = xr.Dataset(
        {
            "admittance": (("member", "site", "component"), admittance, {"units": "1"}),
            "air_load_response": (("site", "component"), known, {"units": "Pa"}),
        },
        coords={"site": names, "member": ["the true one"]},
        attrs={"earth_model": "", "max_degree": 180, "ocean_area_m2": 3.6e14, "sea_water_density_kg_m3": 1025.0},
    )
    return phasors, fingerprints


def as_replicates(case: Case) -> Case:
    """Every site-model pair as if it were a site of its own."""
    seen, prints = case.phasors, case.fingerprints
    site, model = np.nonzero(np.isfinite(seen["phasor"].values[:, 0, :, 0]))
    factor = prints["admittance"].values[0, site]
    made = datasets(
        seen["phasor"].values[site, 0, model][:, None],
        seen["covariance"].values[site, 0],
        np.zeros((len(site), 2, 2)),
        factor[:, 0] + 1j * factor[:, 1],
        prints["air_load_response"].values[site],
    )
    return Case(*made, case.truth)


def as_white_noise(case: Case) -> Case:
    """Records believed as if their noise were white: squared errors 35 times too small, as measured on real colours."""
    phasors = case.phasors.copy(deep=True)
    phasors["covariance"].values /= 35.0
    phasors["model_noise"].values /= 35.0
    return replace(case, phasors=phasors)


def as_drift_first(case: Case) -> Case:
    """Records whose drift was fitted before: a quarter of the cycle went with it, as measured on whole networks."""
    phasors = case.phasors.copy(deep=True)
    phasors["phasor"].values *= 0.75
    return replace(case, phasors=phasors)


NO_COMMON = replace(PRIORS, model_common_hpa=1e-6)
KINDS = {
    "normal": Kind(),
    "student-t": Kind("student-t"),
    "groups": Kind("student-t", groups=True),
    "no common error": Kind(priors=NO_COMMON),
    "models as replicates": Kind(priors=NO_COMMON, distort=as_replicates),
    "records as white noise": Kind(distort=as_white_noise),
    "drift first": Kind(distort=as_drift_first),
    "clustered sites as independent": Kind(clustered=True),
}
RIGHT = ("normal", "student-t", "groups")


@dataclass(frozen=True)
class Study:
    """Ranks of the truth, one row a network: of how many of `RANKS` draws it is the larger."""

    ranks: dict[str, NDArray[np.int64]]
    region: Floats  # share of the draws nearer to their mean than the truth is

    def covered(self, level: float) -> int:
        return int(np.sum(self.region < level))

    def first(self, count: int) -> "Study":
        return Study({name: ranks[:count] for name, ranks in self.ranks.items()}, self.region[:count])


def study(count: int, kind: Kind, *, seed: int, sampled: bool = False) -> Study:
    rows, region = [], []
    for number in range(count):
        rng = np.random.default_rng([seed, number])
        case = kind.distort(draw_case(rng, kind))
        annual, scales = (by_sampler if sampled else by_second_route)(case, kind, number, rng)
        drawn = {"in phase": annual[:, 0], "quadrature": annual[:, 1], "amplitude": np.hypot(*annual.T), **scales}
        chosen = rng.choice(len(annual), RANKS, replace=False)
        rows.append({name: int(np.sum(drawn[name][chosen] < case.truth[name])) for name in case.truth if name in drawn})
        region.append(nearer(annual, np.array([case.truth["in phase"], case.truth["quadrature"]])))
    return Study({name: np.array([row[name] for row in rows]) for name in rows[0]}, np.array(region))


def by_second_route(case: Case, kind: Kind, seed: int, rng: np.random.Generator) -> tuple[Floats, dict[str, Floats]]:
    """Draw the phasor (n, 2) and the scales from the weighted nodes of the second route."""
    observations, admittance = read_observations(case.phasors, case.fingerprints)
    (route,) = second_routes(observations, admittance, Choices(kind.settings(seed), kind.priors, AIR_SD_HPA))
    node = rng.choice(len(route.weight), 4000, p=route.weight)
    root = np.linalg.cholesky(route.node_covariance[node])
    annual = route.node_mean[node] + np.einsum("nij,nj->ni", root, rng.standard_normal((len(node), 2)))
    return annual, dict(zip(SCALES, np.exp(route.log_scales[node]).T, strict=False))


def by_sampler(case: Case, kind: Kind, seed: int, rng: np.random.Generator) -> tuple[Floats, dict[str, Floats]]:
    """Draw them by the sampler."""
    del rng
    posterior = sample_posterior(
        case.phasors,
        case.fingerprints,
        settings=kind.settings(seed),
        priors=kind.priors,
        atmosphere_sd_hpa=AIR_SD_HPA,
    )
    names = [str(name) for name in posterior.to_dataset()["scale_name"].values]
    return posterior.draws, dict(zip(names, posterior.scales.reshape(len(posterior.draws), -1).T, strict=True))


def nearer(draws: Floats, truth: Floats) -> float:
    mean, precision = draws.mean(axis=0), np.linalg.inv(np.cov(draws.T))
    distance = np.einsum("ni,ij,nj->n", draws - mean, precision, draws - mean)
    return float(np.mean(distance < (truth - mean) @ precision @ (truth - mean)))


# the band of the empirical distribution


def least_tail(ranks: NDArray[np.int64]) -> Floats:
    """How unlikely the empirical distribution of (..., n) ranks is where it is least likely, two-sided."""
    count = ranks.shape[-1]
    below = (ranks[..., None] <= np.arange(RANKS)).sum(axis=-2)
    expected = np.arange(1, RANKS + 1) / (RANKS + 1.0)
    low, high = binom.cdf(below, count, expected), binom.sf(below - 1, count, expected)
    return np.asarray(2.0 * np.minimum(low, high).min(axis=-1))


def band_level(count: int, probability: float, *, trials: int = 20_000) -> float:
    """Tail of the pointwise intervals whose band holds a whole uniform curve with the given probability.

    By simulation of uniform ranks, section 2.2 of the paper.
    """
    rng = np.random.default_rng([count, trials])
    parts = [least_tail(rng.integers(0, RANKS + 1, (500, count))) for _ in range(trials // 500)]
    return float(np.quantile(np.concatenate(parts), 1.0 - probability))


def outside_the_band(found: Study, *, trials: int = 20_000) -> list[str]:
    """Names of the quantities whose curve leaves the 95 % band, the error shared among them."""
    count = len(found.region)
    level = band_level(count, 1.0 - 0.05 / len(found.ranks), trials=trials)
    return [name for name, ranks in found.ranks.items() if least_tail(ranks) < level]


def binomial_limits(count: int, level: float, probability: float = 0.95) -> tuple[int, int]:
    return int(binom.ppf(0.5 - probability / 2, count, level)), int(binom.ppf(0.5 + probability / 2, count, level))


def test_the_band_holds_uniform_ranks_and_no_others() -> None:
    rng = np.random.default_rng(1)
    count = 200
    level = band_level(count, 0.95, trials=4000)
    inside = least_tail(rng.integers(0, RANKS + 1, (2000, count))) >= level
    # 2000 trials: .95 has a standard error of .005, and so has the level that 4000 trials gave
    assert abs(inside.mean() - 0.95) < 4 * 0.007
    narrow = np.clip(rng.normal(0.5, 0.5, (200, count)), 0, 1)
    assert np.mean(least_tail((narrow * RANKS).astype(int)) < level) > 0.99
    assert binomial_limits(1000, 0.5) == (469, 531)
    assert binomial_limits(1000, 0.95) == (936, 963)


# the studies


def report(name: str, found: Study) -> str:
    count, outside = len(found.region), outside_the_band(found)
    half, most = found.covered(0.5) / count, found.covered(0.95) / count
    return f"| {name} | {count} | {half:.3f} | {most:.3f} | {', '.join(outside) or 'none'} |"


@pytest.mark.parametrize("name", RIGHT)
def test_ranks_are_uniform_and_regions_hold(name: str) -> None:
    count = 30
    found = study(count, KINDS[name], seed=11)
    assert outside_the_band(found, trials=2000) == []
    for level in (0.5, 0.95):
        low, high = binomial_limits(count, level, 0.999)
        assert low <= found.covered(level) <= high


@pytest.mark.parametrize("name", ["no common error", "models as replicates", "drift first"])
def test_controls_fail(name: str) -> None:
    # the other controls need more networks to show, or show in the scales alone: see the slow study
    count = 20
    found = study(count, KINDS[name], seed=12)
    outside = outside_the_band(found, trials=2000)
    assert outside or found.covered(0.95) < binomial_limits(count, 0.95, 0.999)[0]


@pytest.mark.slow
@pytest.mark.parametrize("name", list(KINDS))
def test_a_thousand_networks(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    """Print what docs/theory/calibration.md reports."""
    count = 1000
    found = study(count, KINDS[name], seed=21)
    with capsys.disabled():
        for first in (300, 500, 750, count):
            print(report(name, found.first(first)), flush=True)
    limits = {level: binomial_limits(count, level) for level in (0.5, 0.95)}
    inside = all(low <= found.covered(level) <= high for level, (low, high) in limits.items())
    right = inside and outside_the_band(found) == []
    assert right == (name in RIGHT)


@pytest.mark.slow
@pytest.mark.parametrize("name", RIGHT)
def test_the_draws_of_the_sampler_are_uniform_too(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    count = 200
    found = study(count, KINDS[name], seed=22, sampled=True)
    with capsys.disabled():
        print(report(f"{name}, sampler", found), flush=True)
    assert outside_the_band(found) == []
    for level in (0.5, 0.95):
        low, high = binomial_limits(count, level, 0.99)
        assert low <= found.covered(level) <= high
