"""The two routes against each other, and both against samplers that know nothing of either."""

from dataclasses import replace

import numpy as np
import pytest

from massfit.posterior.importance import integrate_scales
from massfit.posterior.network_model import Choices, second_routes
from massfit.posterior.sample import sample_posterior
from massfit.settings import PosteriorSettings, Priors

PRIOR = np.array([30.0, 30.0, 15.0, 15.0])
SLOW = [pytest.param(seed, marks=pytest.mark.slow, id=f"network {seed}") for seed in range(4, 100)]


@pytest.mark.parametrize("seed", [*(pytest.param(seed, id=f"network {seed}") for seed in range(4)), *SLOW])
def test_the_routes_agree_in_networks_of_every_kind(invent, seed):
    """Means within four Monte Carlo errors, widths within 3 %, one or two load members, both kinds of scatter."""
    rng = np.random.default_rng(seed)
    network = invent(
        seed,
        sites=int(rng.integers(2, 25)),
        models=int(rng.integers(1, 5)),
        members=1 + int(rng.random() < 0.2),
        missing=float(rng.choice([0.0, 0.3])),
        scales=tuple(100.0 * np.array([0.3, 0.3, 0.15]) * np.abs(rng.standard_t(4, size=3))),
        placed=bool(rng.random() < 0.6),
    )
    settings = PosteriorSettings(seed=seed, site_scatter=str(rng.choice(["normal", "student-t"])))
    posterior = sample_posterior(*network.datasets(), settings=settings, priors=Priors())
    assert abs(posterior.convergence.second_route_mean_shift_errors) < 4.0
    assert posterior.convergence.second_route_sd_ratio == pytest.approx(1.0, abs=0.03)
    assert posterior.converged, posterior.convergence.failures()


def one_site_off(invent, scatter):
    """Shift of |A| when one of 20 sites is put 1.5 hPa off, along A: mean of 6 networks, by the second route, hPa."""
    shifts = []
    for seed in range(6):
        network = invent(seed, sites=20, models=3, scales=(10.0, 10.0, 10.0))
        # records of several years: half the error of the other invented networks
        quiet = replace(network.observations, part_covariance=0.25 * network.observations.part_covariance)
        network = replace(network, observations=quiet, admittance=np.full((1, 20), 1.05 + 0.0j))
        phasor = network.observations.part_phasor.copy()
        phasor[7] += 150.0 * np.array([10.0, 85.0]) / np.hypot(10.0, 85.0)
        off = replace(network, observations=replace(network.observations, part_phasor=phasor))
        settings = PosteriorSettings(site_scatter=scatter, group_scatter=False)
        means = [
            second_routes(each.observations, each.admittance, Choices(settings, Priors(), 0.04), draws=1500)[0].mean
            for each in (network, off)
        ]
        shifts.append((means[1] - means[0]) @ np.array([10.0, 85.0]) / np.hypot(10.0, 85.0) / 100.0)
    return float(np.mean(shifts))


def test_student_scatter_holds_a_wrong_site_down(invent):
    # 1.5 hPa / 20 sites / 1.05 = 0.071 hPa where all weigh alike [closed form]
    normal, student = one_site_off(invent, "normal"), one_site_off(invent, "student-t")
    print(f"one of 20 sites off by 1.5 hPa moves the answer by {normal:.3f} (normal) and {student:.3f} hPa (Student)")
    assert normal == pytest.approx(0.071, abs=0.02)
    assert student < 0.4 * normal


def plain_gibbs(network, *, steps, rng, chains=24, unit_prior=PRIOR):
    """Sample every latent by hand, none integrated out: (steps, chains, 2) draws of A and (..., 4) of the scales.

    Given the scales and stretches, all phasors and latents are jointly normal and written out as dense vectors; the
    scales are moved by random walks given the latents, the stretches drawn given the site effects.
    """
    seen = network.observations
    pairs = [tuple(pair) for pair in np.argwhere(seen.present)]
    sites, models, years = len(seen.sites), len(seen.models), len(seen.years)
    place = np.arange(sites)
    place[-1] = place[-2]  # the last two lie at one place
    labels = sorted({label for label in seen.group if label})
    away = seen.year_share - seen.period_share
    blocks = {"A": 1, "a": 1, "g": years, "u": sites - 1, "v": len(labels), "lone": sites, "c0": 1, "c": models}
    starts = dict(zip(blocks, np.cumsum([0, *list(blocks.values())[:-1]]), strict=True))
    size = 2 * sum(blocks.values())
    design = np.zeros((2 * len(pairs), size))

    def put(row, block, index, matrix):
        column = 2 * (starts[block] + index)
        design[2 * row : 2 * row + 2, column : column + 2] += matrix

    for row, (s, m) in enumerate(pairs):
        factor = network.admittance[0, s]
        turn = np.array([[factor.real, -factor.imag], [factor.imag, factor.real]])
        put(row, "A", 0, turn)
        put(row, "a", 0, np.eye(2))
        for y in range(years):
            put(row, "g", y, away[s, y] * turn)
        put(row, "u", place[s], np.eye(2))
        if seen.group[s]:
            put(row, "v", labels.index(seen.group[s]), np.eye(2))
        else:
            put(row, "lone", s, np.eye(2))
        put(row, "c0", 0, np.eye(2))
        put(row, "c", m, np.eye(2))
    record = np.zeros((len(pairs) * 2, len(pairs) * 2))
    for i, (s, _) in enumerate(pairs):
        for j, (t, _) in enumerate(pairs):
            if s == t:
                shared = seen.part_covariance[s, 0] - seen.model_noise[s] / seen.model_count[s]
                own = seen.model_noise[s] if i == j else 0.0
                record[2 * i : 2 * i + 2, 2 * j : 2 * j + 2] = shared + own
    value = np.concatenate([seen.part_phasor[s, 0, m] for s, m in pairs])
    latent = np.repeat(list(blocks), [2 * n for n in blocks.values()])
    d = np.eye(len(value))  # local disagreement: an effect of its own for every pair
    whole = np.hstack([design, d])
    precision = np.linalg.inv(record)
    gram, pull = whole.T @ precision @ whole, whole.T @ (precision @ value)
    log_scales = np.log(unit_prior) + 0.3 * rng.standard_normal((chains, 4))
    stretch = np.ones((chains, sites - 1))
    kept, scales_kept = [], []
    for step in range(steps):
        scale = np.exp(log_scales)
        sd = np.empty((chains, whole.shape[1]))
        sd[:, :size] = np.array([{"A": 500.0, "a": 4.0, "g": 5.0}.get(name, 1.0) for name in latent])
        sd[:, :size][:, latent == "u"] = np.repeat(scale[:, :1] * np.sqrt(stretch), 2, axis=1)
        sd[:, :size][:, np.isin(latent, ["v", "lone"])] = scale[:, 3:4]
        sd[:, :size][:, np.isin(latent, ["c0", "c"])] = scale[:, 2:3]
        sd[:, size:] = scale[:, 1:2]
        total = sd[:, :, None] * gram * sd[:, None] + np.eye(whole.shape[1])
        root = np.linalg.cholesky(total)
        right = np.linalg.solve(root, (sd * pull)[..., None]) + rng.standard_normal((*sd.shape, 1))
        effect = sd * np.linalg.solve(np.swapaxes(root, 1, 2), right)[..., 0]
        u = effect[:, :size][:, latent == "u"].reshape(chains, -1, 2)
        square = (u**2).sum(axis=2)
        groups = {1: effect[:, size:], 2: effect[:, :size][:, np.isin(latent, ["c0", "c"])]}
        # lone effects of sites that have a group are not in use: they only follow their prior, and may not vote
        lone = np.repeat([not label for label in seen.group], 2)
        shared = effect[:, :size]
        groups[3] = np.hstack([shared[:, latent == "v"], shared[:, latent == "lone"][:, lone]])

        def log_density(logs, groups=groups, square=square, stretch=stretch):
            ratio = logs - np.log(unit_prior)
            density = (ratio - 2.5 * np.log1p(np.exp(2 * ratio) / 4)).sum(axis=1)
            density -= square.shape[1] * 2 * logs[:, 0] + 0.5 * (square / stretch).sum(axis=1) * np.exp(-2 * logs[:, 0])
            for k, values in groups.items():
                density -= values.shape[1] * logs[:, k] + 0.5 * (values**2).sum(axis=1) * np.exp(-2 * logs[:, k])
            return density

        for _ in range(4):
            proposed = log_scales + 0.35 * rng.standard_normal(log_scales.shape) * (rng.random((chains, 4)) < 0.5)
            accept = np.log(rng.random(chains)) < log_density(proposed) - log_density(log_scales)
            log_scales = np.where(accept[:, None], proposed, log_scales)
        half = 2.0 + 0.5 * square * np.exp(-2 * log_scales[:, :1])
        stretch = half / rng.standard_gamma(3.0, half.shape)
        if step >= steps // 5:
            kept.append(effect[:, :2])
            scales_kept.append(log_scales)
    return np.array(kept), np.array(scales_kept)


@pytest.mark.slow
@pytest.mark.parametrize("seed", [1, 2])
def test_sampling_every_latent_agrees(invent, regression, seed):
    network = invent(seed, sites=7, models=2, missing=0.2, placed=True)
    draws, log_scales = plain_gibbs(network, steps=6000, rng=np.random.default_rng(seed))
    model = regression(network, student=True, group_scatter=True)
    route = integrate_scales(model, PRIOR, draws=10_000)
    sd = np.sqrt(np.diag(route.covariance))
    between = draws.mean(axis=0)  # 24 independent chains give the error of the mean
    error = np.hypot(between.std(axis=0, ddof=1) / np.sqrt(24), route.standard_error)
    assert np.all(error < 0.05 * sd)
    assert np.all(np.abs(draws.mean(axis=(0, 1)) - route.mean) < 4.0 * error)
    levels = np.array([0.158655, 0.841345])
    width = np.diff(np.quantile(draws.reshape(-1, 2), levels, axis=0), axis=0)[0]
    np.testing.assert_allclose(width / np.diff(route.quantiles(levels), axis=0)[0], 1.0, atol=0.06)
    of_chains = log_scales.mean(axis=0)
    for k in range(4):
        node = route.log_scales[:, k]
        spread = np.sqrt(route.weight @ (node - route.weight @ node) ** 2)
        tolerance = 4.0 * np.hypot(of_chains[:, k].std() / np.sqrt(24), spread / np.sqrt(route.effective_nodes))
        assert abs(of_chains[:, k].mean() - route.weight @ node) < tolerance


@pytest.mark.slow
@pytest.mark.parametrize("student", [False, True], ids=["normal", "student"])
def test_nested_sampling_agrees_on_evidence_and_moments(invent, regression, student):
    """Agree with dynesty over A, s_site (and the stretches): one model, a, c and d held at next to nothing."""
    import dynesty
    from scipy import stats

    network = invent(3, sites=4, models=1, scales=(30.0, 0.0, 0.0))
    seen, factor = network.observations, network.admittance[0]
    model = regression(network, student=student, atmosphere_sd=1e-6)
    tiny = np.array([30.0, 1e-6, 1e-6])
    route = integrate_scales(model, tiny, draws=10_000)

    def transform(unit):
        annual = stats.norm.ppf(unit[:2], scale=500.0)
        scale = 30.0 * stats.t.ppf(0.5 + 0.5 * unit[2], 4)
        return np.concatenate([annual, [scale], stats.invgamma.ppf(unit[3:], 2.0, scale=2.0)])

    def log_likelihood(point):
        z = factor * (point[0] + 1j * point[1])
        stretch = point[3:] if student else np.ones(4)
        density = 0.0
        for s in range(4):
            residual = seen.mean_phasor[s] - [z[s].real, z[s].imag]
            total = seen.covariance[s] + point[2] ** 2 * stretch[s] * np.eye(2)
            square = residual @ np.linalg.solve(total, residual)
            density -= 0.5 * (square + np.linalg.slogdet(2.0 * np.pi * total)[1])
        return density

    sampler = dynesty.NestedSampler(
        log_likelihood, transform, 7 if student else 3, nlive=600, rstate=np.random.default_rng(1)
    )
    sampler.run_nested(print_progress=False, dlogz=0.05)
    results = sampler.results
    weight = np.exp(results.logwt - results.logz[-1])
    weight /= weight.sum()
    mean = weight @ results.samples[:, :2]
    sd = np.sqrt(weight @ (results.samples[:, :2] - mean) ** 2)
    assert route.log_evidence == pytest.approx(results.logz[-1], abs=4.0 * results.logzerr[-1])
    error = 4.0 * np.sqrt((weight**2).sum())
    np.testing.assert_allclose((mean - route.mean) / sd, 0.0, atol=error)
    np.testing.assert_allclose(np.sqrt(np.diag(route.covariance)) / sd, 1.0, atol=error)
