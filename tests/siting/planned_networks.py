"""Invented networks whose phasors are drawn from the network model, and the same with one site more."""

from dataclasses import replace

import numpy as np

from massfit.posterior.observations import Observations


def block(factor: complex) -> np.ndarray:
    return np.array([[factor.real, -factor.imag], [factor.imag, factor.real]])


def invented_observations(
    seed: int, *, sites: int = 8, models: int = 3, scales: tuple[float, ...] = (20.0, 15.0, 10.0), members: int = 2
) -> tuple[Observations, np.ndarray]:
    """Observations with positions, groups and years, and admittances (member, site)."""
    rng = np.random.default_rng(seed)
    position = np.column_stack([rng.uniform(-0.8, 0.8, sites), rng.uniform(0, 6.28, sites)])
    admittance = 1.1 + 0.05 * (rng.standard_normal((members, sites)) + 0.3j * rng.standard_normal((members, sites)))
    observations = Observations(
        tuple(f"site {s + 1:03d}" for s in range(sites)),
        tuple(f"model {m + 1}" for m in range(models)),
        np.ones((sites, 1)),
        np.zeros((sites, 1, models, 2)),
        np.array([[turned(rng, 150.0, 60.0)] for _ in range(sites)]),
        np.array([turned(rng, 20.0, 10.0) for _ in range(sites)]),
        years=(2014, 2015, 2016, 2017),
        year_share=rng.dirichlet(np.ones(4), sites),
        period_share=np.full(4, 0.25),
        position=position,
        group=tuple("" if s % 4 == 3 else "AB"[s % 2] for s in range(sites)),
    )
    return draw_phasors(rng, observations, admittance[0], scales), admittance


def turned(rng: np.random.Generator, level: float, more: float) -> np.ndarray:
    direction = rng.standard_normal(2)
    return level * np.eye(2) + more * np.outer(direction, direction)


def draw_phasors(
    rng: np.random.Generator,
    observations: Observations,
    admittance: np.ndarray,
    scales: tuple[float, ...],
    *,
    truth: np.ndarray | None = None,
    student: bool = False,
) -> Observations:
    """Phasors from the equation of the network model, term by term (r = 1, groups without scatter), Pa."""
    count, models = len(observations.sites), len(observations.models)
    truth = np.array([10.0, 85.0]) if truth is None else truth
    common = scales[2] * (rng.standard_normal(2) + rng.standard_normal((models, 2)))
    air, years = 4.0 * rng.standard_normal(2), 5.0 * rng.standard_normal((len(observations.years), 2))
    phasor = np.empty((count, 1, models, 2))
    for s in range(count):
        away = observations.year_share[s] - observations.period_share
        stretch = 2.0 / rng.standard_gamma(2.0) if student else 1.0
        record = observations.part_covariance[s, 0] - observations.model_noise[s] / models
        shared = block(admittance[s]) @ (truth + away @ years) + air + rng.multivariate_normal([0, 0], record)
        shared = shared + scales[0] * np.sqrt(stretch) * rng.standard_normal(2)
        for m in range(models):
            weather = rng.multivariate_normal([0, 0], observations.model_noise[s])
            phasor[s, 0, m] = shared + common[m] + scales[1] * rng.standard_normal(2) + weather
    return replace(observations, part_phasor=phasor)


def with_candidate(
    observations: Observations,
    position: np.ndarray,
    record: np.ndarray,
    *,
    group: str = "",
    phasor: np.ndarray | None = None,
    years: int = 2,
) -> Observations:
    """One site more, last, of which the mean over its models is known, in years after all others."""
    count, models = len(observations.sites), len(observations.models)
    told = np.zeros(2) if phasor is None else phasor
    shares = np.zeros((count + 1, len(observations.years) + years))
    shares[:-1, : len(observations.years)] = observations.year_share
    shares[-1, len(observations.years) :] = 1.0 / years
    return replace(
        observations,
        sites=(*observations.sites, "zz candidate"),
        weight=np.ones((count + 1, 1)),
        part_phasor=np.concatenate([observations.part_phasor, np.broadcast_to(told, (1, 1, models, 2))]),
        part_covariance=np.concatenate([observations.part_covariance, record[None, None]]),
        model_noise=np.concatenate([observations.model_noise, np.zeros((1, 2, 2))]),
        mean_only=observations.mean_only | {"zz candidate"},
        years=(*observations.years, *range(2027, 2027 + years)),
        year_share=shares,
        period_share=np.append(observations.period_share, np.zeros(years)),
        position=np.vstack([observations.position, position]),
        group=(*observations.group, group),
    )
