"""Recovery of known truth over many invented networks of site phasors, with controls that must fail."""

from dataclasses import dataclass, replace

import numpy as np
import pytest

from massfit.posterior.importance import integrate_scales
from massfit.posterior.network_model import (
    Choices,
    inflation,
    member_spread,
    network_model,
    scale_priors,
    second_routes,
)
from massfit.posterior.observations import Observations
from massfit.posterior.sites import leave_one_out
from massfit.settings import PosteriorSettings, Priors

SITES, MODELS, MEMBERS = 20, 3, 5
PLAIN = PosteriorSettings(site_scatter="normal", group_scatter=False)
TRUE_SCALES = (25.0, 20.0, 12.0)  # Pa: s_site, s_local, s_common


@dataclass(frozen=True)
class Case:
    observations: Observations
    admittance: np.ndarray  # (member, site)
    truth: np.ndarray  # (2,) Pa


def matrices(factor: np.ndarray) -> np.ndarray:
    return np.moveaxis(np.array([[factor.real, -factor.imag], [factor.imag, factor.real]]), [0, 1], [-2, -1])


def half_t(rng: np.random.Generator, scale: float) -> float:
    return scale * abs(rng.standard_t(4))


def draw_network(
    rng: np.random.Generator, *, scales_from_prior: bool, missing: float = 0.2, common_spread: float = 0.0
) -> Case:
    """Phasors of a network whose truth and models are exchangeable, and whose load is one more member.

    `common_spread` is the standard deviation, per component, of what a member does to all sites alike.
    """
    prior = Priors()
    limits = (prior.site_scatter_hpa, prior.model_local_hpa, prior.model_common_hpa)
    scales = [100.0 * half_t(rng, limit) for limit in limits] if scales_from_prior else TRUE_SCALES
    site_sd, local_sd, common_sd = scales
    # members and truth: a common pattern of admittances plus three patterns in random amounts
    patterns = rng.standard_normal((3, SITES)) + 0.5j * rng.standard_normal((3, SITES))
    common_pattern = 1.08 + 0.04 * rng.standard_normal(SITES) + 0.02j * rng.standard_normal(SITES)
    admittance = common_pattern + 0.015 * rng.standard_normal((MEMBERS + 1, 3)) @ patterns
    alike = rng.standard_normal((2, MEMBERS + 1, 1)) if common_spread else np.zeros((2, 1, 1))
    admittance = admittance * (1.0 + common_spread * (alike[0] + 1j * alike[1]))
    truth = np.array([5.0, 85.0]) + 20.0 * rng.standard_normal(2)
    root = rng.standard_normal((SITES, 2, 3))
    size = rng.uniform(8.0, 30.0, SITES)[:, None, None] ** 2
    record = size * (0.6 * np.eye(2) + 0.15 * root @ np.swapaxes(root, 1, 2))
    noise = rng.uniform(3.0, 9.0, SITES)[:, None, None] ** 2 * np.eye(2)
    present = rng.random((SITES, MODELS)) >= missing
    present[:, 0] |= ~present.any(axis=1)
    counts = present.sum(axis=1)[:, None, None]
    shared = matrices(admittance[-1]) @ truth + 4.0 * rng.standard_normal(2) + site_sd * rng.standard_normal((SITES, 2))
    shared += np.einsum("sij,sj->si", np.linalg.cholesky(record), rng.standard_normal((SITES, 2)))
    common = common_sd * (rng.standard_normal(2) + rng.standard_normal((MODELS, 2)))
    own = local_sd * rng.standard_normal((SITES, MODELS, 2))
    own += np.sqrt(noise[:, None, 0, :1]) * rng.standard_normal((SITES, MODELS, 2))
    phasor = np.where(present[..., None], shared[:, None] + common + own, np.nan)
    observations = Observations(
        tuple(f"site {s}" for s in range(SITES)),
        tuple(f"model {m}" for m in range(MODELS)),
        np.ones((SITES, 1)),
        phasor[:, None],
        (record + noise / counts)[:, None],
        noise,
    )
    return Case(observations, admittance[:-1], truth)


def as_replicates(case: Case) -> Case:
    """Every site-model pair as if it were a site of its own."""
    seen = case.observations
    site, model = np.nonzero(seen.present)
    return Case(
        Observations(
            tuple(f"pair {k}" for k in range(len(site))),
            ("any",),
            np.ones((len(site), 1)),
            seen.part_phasor[site, 0, model][:, None, None],
            seen.part_covariance[site],
            np.zeros((len(site), 2, 2)),
        ),
        case.admittance[:, site],
        case.truth,
    )


def with_one_member(case: Case) -> Case:
    """The first load member alone, as if the fingerprint were known: it is not the one the truth was made with."""
    return replace(case, admittance=case.admittance[:1])


def squared_distance_rank(
    case: Case, settings: PosteriorSettings, priors: Priors, rng: np.random.Generator, draws: int = 2000
) -> float:
    """Share of the pooled posterior that lies nearer to its mean than the truth does."""
    routes = second_routes(case.observations, case.admittance, Choices(settings, priors, 0.04), draws=1000)
    centre = np.mean([route.mean for route in routes], axis=0)
    stretch = np.sqrt(inflation(len(routes)))
    pooled = []
    for route in routes:
        node = rng.choice(len(route.weight), size=draws, p=route.weight)
        noise = rng.standard_normal((draws, 2))
        drawn = route.node_mean[node] + np.einsum("nij,nj->ni", np.linalg.cholesky(route.node_covariance[node]), noise)
        pooled.append(drawn + (stretch - 1.0) * (route.mean - centre))
    sample = np.concatenate(pooled)
    precision = np.linalg.inv(np.cov(sample.T))
    mean = sample.mean(axis=0)

    def distance(points: np.ndarray) -> np.ndarray:
        return np.einsum("ni,ij,nj->n", points - mean, precision, points - mean)

    return float((distance(sample) < distance(case.truth[None])[0]).mean())


def coverage(
    count: int, kind: str, *, seed: int = 1, scales_from_prior: bool = False, common_spread: float = 0.0
) -> float:
    """Share of networks whose truth lies in the 95 % region."""
    rng = np.random.default_rng(seed)
    priors = Priors()
    ranks = []
    for _ in range(count):
        case = draw_network(rng, scales_from_prior=scales_from_prior, common_spread=common_spread)
        if kind == "one wrong member":
            case = with_one_member(case)
        if kind == "no common error":
            priors = replace(Priors(), model_common_hpa=1e-6)
        if kind == "models as replicates":
            case, priors = as_replicates(case), replace(Priors(), model_common_hpa=1e-6)
        settings = replace(PLAIN, model_truth="centred") if kind == "truth taken as centred" else PLAIN
        ranks.append(squared_distance_rank(case, settings, priors, rng))
    return float(np.mean(np.array(ranks) < 0.95))


def test_the_region_covers_and_the_controls_do_not():
    # 30 networks: .95 has a standard error of .04; the controls lie far below
    assert coverage(30, "full") >= 0.85
    assert coverage(12, "no common error") <= 0.85
    assert coverage(12, "models as replicates") <= 0.6


def test_one_wrong_member_covers_too_little_and_the_mixture_does_not():
    # what the members do to all sites alike has a standard deviation of 20 % here, so that 30 networks show it:
    # the single member covers .69 of 320 networks, 26 or more of 30 happens to it once in a hundred studies
    assert coverage(30, "one wrong member", common_spread=0.2) <= 25 / 30
    # .95 has a standard error of .04
    assert coverage(15, "full", common_spread=0.1) >= 13 / 15


def test_the_spread_between_members_is_the_error_of_one_more():
    # members that differ by 10 % per component at all sites alike move |A| = 0.85 hPa by 8.5 Pa per component; the
    # inflated spread of K of them expects (K + 1) / K of that variance, both components together
    rng = np.random.default_rng(5)
    choices = Choices(PLAIN, Priors(), 0.04)
    spreads, sizes = [], []
    for _ in range(6):
        case = draw_network(rng, scales_from_prior=False, common_spread=0.1)
        spreads.append(np.trace(member_spread(second_routes(case.observations, case.admittance, choices))))
        sizes.append(np.sum(case.truth**2))
    expected = 2.0 * 0.1**2 * (MEMBERS + 1) / MEMBERS * np.mean(sizes)
    # each is about chi-square with 2 (K - 1) degrees of freedom; three standard errors
    assert abs(np.mean(spreads) / expected - 1.0) < 3.0 / np.sqrt(6 * (MEMBERS - 1))


def test_sites_predicted_from_the_others_have_residuals_of_unit_size():
    rng = np.random.default_rng(3)
    squares = []
    for _ in range(8):
        case = draw_network(rng, scales_from_prior=False)
        choices = Choices(PLAIN, Priors(), 0.04)
        model = network_model(case.observations, case.admittance[:1], choices)
        routes = [integrate_scales(model, scale_priors(Priors(), model.scale_count))]
        squares += [check.standardised_residual**2 for check in leave_one_out(model, routes)]
    # half a chi-square with two degrees of freedom: mean 1, standard deviation 1; 160 of them, three standard errors
    assert abs(np.mean(squares) - 1.0) < 3.0 / np.sqrt(160)


@pytest.mark.slow
@pytest.mark.parametrize(
    ("kind", "scales_from_prior", "low", "high"),
    [
        # two-sided 99 % binomial limits of .95 over 320 networks; with scales drawn from the prior .95 is exact,
        # but for the spread of five members, and fixed scales may cover more
        ("full", True, 0.919, 0.981),
        ("full", False, 0.919, 0.995),
        ("no common error", False, 0.0, 0.80),
        ("models as replicates", False, 0.0, 0.50),
        ("truth taken as centred", False, 0.0, 0.90),
    ],
)
def test_coverage_over_320_networks(kind, scales_from_prior, low, high):
    covered = coverage(320, kind, scales_from_prior=scales_from_prior)
    print(f"{kind}, scales {'from the prior' if scales_from_prior else 'fixed'}: {covered:.3f}")
    assert low <= covered <= high


@pytest.mark.slow
@pytest.mark.parametrize(
    ("kind", "common_spread", "low", "high"),
    [
        # two-sided 99 % binomial limits over 320 networks: of .95, and of .865, which a member's error of 8.5 Pa beside
        # the truth's own of 8.5 Pa leaves of a region made for 17 Pa per component (2-D normal, closed form)
        ("full", 0.1, 0.919, 0.981),
        ("one wrong member", 0.1, 0.816, 0.914),
        # where the members hardly differ, one is as good as all
        ("one wrong member", 0.0, 0.919, 0.981),
        # here it is the larger part of the variance: five members leave the tails a little short, one is far off
        ("full", 0.2, 0.876, 0.981),
        ("one wrong member", 0.2, 0.0, 0.80),
    ],
)
def test_coverage_of_the_fingerprint_over_320_networks(kind, common_spread, low, high):
    covered = coverage(320, kind, common_spread=common_spread)
    print(f"{kind}, members differ by {100 * common_spread:.0f} % at all sites alike: {covered:.3f}")
    assert low <= covered <= high
