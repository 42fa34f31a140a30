"""Invented networks with a bad site and a redundant pair planted in them."""

from dataclasses import replace

import numpy as np
from siting.planned_networks import invented_observations

from massfit.posterior.network_model import Choices
from massfit.posterior.observations import Observations
from massfit.posterior.subsets import SubsetTables, subset_tables
from massfit.settings import PosteriorSettings, Priors

BAD, PAIR = 4, (1, 6)


def planted(seed: int = 3, *, sites: int = 9, offset_pa: float = 200.0, members: int = 1) -> tuple:
    """Sites of equal errors: one is off, two lie at one place and share its scatter; no groups."""
    seen, admittance = invented_observations(seed, sites=sites, members=members, scales=(25.0, 10.0, 3.0))
    phasor, position = seen.part_phasor.copy(), seen.position.copy()
    phasor[PAIR[1]] += phasor[PAIR[0]].mean(axis=1) - phasor[PAIR[1]].mean(axis=1)
    phasor[BAD] += np.array([0.8, -0.6]) * offset_pa
    position[PAIR[1]] = position[PAIR[0]]
    alike = {
        "part_covariance": np.tile(150.0 * np.eye(2), (sites, 1, 1, 1)),
        "model_noise": np.tile(20.0 * np.eye(2), (sites, 1, 1)),
        "year_share": np.full((sites, 4), 0.25),
        "group": ("",) * sites,
    }
    return replace(seen, part_phasor=phasor, position=position, **alike), admittance


def tables_of(observations: Observations, admittance: np.ndarray, scatter: str = "student-t") -> SubsetTables:
    choices = Choices(PosteriorSettings(site_scatter=scatter), Priors(), 0.04)
    return subset_tables(observations, admittance, choices)
