"""Simulation-based calibration of the network posterior (Talts et al. 2018, arXiv:1804.06788), with controls that fail.

Networks of site phasors are drawn here from the priors, without the package: scales, answer, air-pressure error, sites,
models, missing pairs. The rank of each true value among the draws of its posterior must be uniform. Uniformity is
judged by the empirical distribution of the ranks inside a band that holds the whole curve with the stated
probability (Saeilynoja, Buerkner & Vehtari 2022, Statistics and Computing 32, 32), shared among all quantities.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
import xarray as xr
from numpy.typing import NDArray
from scipy.stats import binom

from massfit.posterior.sample import sample_posterior
from massfit.settings import PosteriorSettings, Priors

Floats = NDArray[np.float64]

RANKS = 99
"""Draws that each true value is ranked among: nearly independent ones of several thousand."""

AIR_SD_HPA = 0.04
PRIORS = Priors()


@dataclass(frozen=True)
class Case:
    phasors: xr.Dataset
    fingerprints: xr.Dataset
    truth: dict[str, float]  # Pa


@dataclass(frozen=True)
class Kind:
    """How the networks are analysed; the plain one analyses them as they are made."""

    settings: dict[str, object]
    priors: Priors = PRIORS
    distort: Callable[[Case], Case] = lambda case: case
    clustered: bool = False


def half_t(rng: np.random.Generator, scale_hpa: float) -> float:
    return 100.0 * scale_hpa * abs(rng.standard_t(4))


def turned(factor: NDArray[np.complex128], vector: Floats) -> Floats:
    product = factor * complex(*vector)
    return np.stack([product.real, product.imag], axis=-1)


def draw_case(rng: np.random.Generator, *, student: bool, clustered: bool) -> Case:
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
    scatter = truth["s_site"] * rng.standard_normal((sites, 2))
    if student:
        scatter *= np.sqrt(4.0 / rng.chisquare(4.0, (sites, 1)))
    if clustered:  # a third of the sites lie together and share most of their scatter
        together = np.arange(sites) < max(3, sites // 3)
        scatter[together] = np.sqrt(0.8) * scatter[0] + np.sqrt(0.2) * scatter[together]
    common = truth["s_common"] * (rng.standard_normal((models, 2)) + rng.standard_normal(2))
    shared = turned(factor, annual) + known + 100.0 * AIR_SD_HPA * rng.standard_normal(2) + scatter
    shared += np.einsum("sij,sj->si", root, rng.standard_normal((sites, 2)))
    own = truth["s_local"] * rng.standard_normal((sites, models, 2))
    own += weather_sd[:, None, None] * rng.standard_normal((sites, models, 2))
    phasor = np.where(present[..., None], shared[:, None] + common + own, np.nan)
    covariance = record + noise / present.sum(axis=1)[:, None, None]
    truth |= {"in phase": annual[0], "quadrature": annual[1], "amplitude": float(np.hypot(*annual))}
    return Case(*datasets(phasor, covariance, noise, factor, known), truth)


def datasets(
    phasor: Floats, covariance: Floats, noise: Floats, factor: NDArray[np.complex128], known: Floats
) -> tuple[xr.Dataset, xr.Dataset]:
    """Site phasors and fingerprints as the network stage receives them."""
    names = [f"site {s}" for s in range(len(phasor))]
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
    """Records believed as if their noise were white: squared errors 35 times too small, measured on real colours."""
    return replace(case, phasors=case.phasors.assign(covariance=case.phasors["covariance"] / 35.0).pipe(_with_units))


def _with_units(phasors: xr.Dataset) -> xr.Dataset:
    phasors["covariance"].attrs["units"] = "Pa2"
    phasors["model_noise"] = phasors["model_noise"] / 35.0
    phasors["model_noise"].attrs["units"] = "Pa2"
    return phasors


NO_COMMON = replace(PRIORS, model_common_hpa=1e-6)
NORMAL: dict[str, object] = {"site_scatter": "normal", "group_scatter": False}
STUDENT: dict[str, object] = {"site_scatter": "student-t", "group_scatter": False}
KINDS = {
    "normal": Kind(NORMAL),
    "no common error": Kind(NORMAL, priors=NO_COMMON),
    "models as replicates": Kind(NORMAL, priors=NO_COMMON, distort=as_replicates),
    "records as white noise": Kind(NORMAL, distort=as_white_noise),
    "clustered sites as independent": Kind(NORMAL, clustered=True),
}


@dataclass(frozen=True)
class Study:
    """Ranks of the truth, one row a network: among how many of `RANKS` draws it is the larger."""

    ranks: dict[str, NDArray[np.int64]]
    region: Floats  # share of the draws nearer to their mean than the truth is

    def covered(self, level: float) -> int:
        return int(np.sum(self.region < level))


def study(count: int, kind: Kind, *, seed: int) -> Study:
    rows, region = [], []
    for number in range(count):
        rng = np.random.default_rng([seed, number])
        student = kind.settings["site_scatter"] == "student-t"
        case = kind.distort(draw_case(rng, student=student, clustered=kind.clustered))
        settings = PosteriorSettings(seed=number, **kind.settings)  # type: ignore[arg-type]
        posterior = sample_posterior(
            case.phasors, case.fingerprints, settings=settings, priors=kind.priors, atmosphere_sd_hpa=AIR_SD_HPA
        )
        draws = posterior.draws
        names = [str(name) for name in posterior.to_dataset()["scale_name"].values]
        scales = posterior.scales.reshape(len(draws), -1)
        chosen = rng.choice(len(draws), RANKS, replace=False)
        drawn = {"in phase": draws[:, 0], "quadrature": draws[:, 1], "amplitude": np.hypot(*draws.T)}
        drawn |= dict(zip(names, scales.T, strict=True))
        rows.append({name: int(np.sum(drawn[name][chosen] < true)) for name, true in case.truth.items()})
        region.append(nearer(draws, np.array([case.truth["in phase"], case.truth["quadrature"]])))
    return Study({name: np.array([row[name] for row in rows]) for name in rows[0]}, np.array(region))


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
