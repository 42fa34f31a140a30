"""Invented networks of site phasors, and a slow twin that writes the covariance of all phasors out."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pytest
import xarray as xr

from massfit.posterior.likelihood import LinearModel, linear_model, observation_rows
from massfit.posterior.observations import Observations


def block(factor: complex) -> np.ndarray:
    return np.array([[factor.real, -factor.imag], [factor.imag, factor.real]])


@dataclass(frozen=True)
class Invented:
    """Observations with the admittances they were made with, and what they were made of."""

    observations: Observations
    admittance: np.ndarray  # (member, site)
    truth: np.ndarray  # (2,) Pa

    def datasets(self) -> tuple[xr.Dataset, xr.Dataset]:
        seen = self.observations
        count = len(seen.sites)

        def variable(dims: tuple[str, ...], values: np.ndarray, units: str) -> tuple:
            return dims, values, {"units": units}

        covariance = ("site", "part", "component", "component2")
        phasors = xr.Dataset(
            {
                "phasor": variable(("site", "part", "model", "component"), seen.part_phasor, "Pa"),
                "weight": variable(("site", "part"), seen.weight, "1"),
                "covariance": variable(covariance, seen.part_covariance, "Pa2"),
                "model_noise": variable(("site", "component", "component2"), seen.model_noise, "Pa2"),
                "reduced_sd": variable(("site",), np.full(count, 150.0), "Pa"),
                "days": variable(("site",), np.full(count, 900.0), "d"),
            },
            coords={"site": list(seen.sites), "model": list(seen.models)},
            attrs={"reference_year": 2016},
        )
        components = np.stack([self.admittance.real, self.admittance.imag], axis=-1)
        fingerprints = xr.Dataset(
            {"admittance": variable(("member", "site", "component"), components, "1")},
            coords={"site": list(seen.sites), "member": [f"pattern {k + 1}" for k in range(len(components))]},
            attrs={
                "earth_model": "invented",
                "max_degree": 180,
                "ocean_area_m2": 3.626e14,
                "sea_water_density_kg_m3": 1025.0,
            },
        )
        return phasors, fingerprints


def invent_network(
    seed: int = 1,
    *,
    sites: int = 8,
    models: int = 3,
    members: int = 1,
    scales: tuple[float, float, float] = (25.0, 20.0, 12.0),
    missing: float = 0.0,
    bare_sites: int = 0,
    truth: tuple[float, float] = (10.0, 85.0),
) -> Invented:
    """Phasors made site by site from the equation of the network model, r = 1, Pa."""
    rng = np.random.default_rng(seed)
    site_sd, local_sd, common_sd = scales
    common = common_sd * (rng.standard_normal(2) + rng.standard_normal((models + 1, 2)))
    air = 4.0 * rng.standard_normal(2)
    phasor = np.full((sites, 1, models + 1, 2), np.nan)
    covariance, noise = np.zeros((sites, 2, 2)), np.zeros((sites, 2, 2))
    admittance = 1.1 + 0.1 * (rng.standard_normal((members, sites)) + 0.3j * rng.standard_normal((members, sites)))
    for s in range(sites):
        turn = rng.standard_normal((2, 3))
        covariance[s] = 200.0 * np.eye(2) + 60.0 * turn @ turn.T
        bare = s < bare_sites
        chosen = [models] if bare else [m for m in range(models) if rng.random() >= missing] or [0]
        if not bare:
            noise[s] = 30.0 * np.eye(2) + 5.0 * np.outer(turn[:, 0], turn[:, 0])
        record = covariance[s] - noise[s] / len(chosen)
        shared = block(admittance[0, s]) @ truth + air + rng.multivariate_normal([0, 0], record)
        shared = shared + site_sd * rng.standard_normal(2)
        for m in chosen:
            own = local_sd * rng.standard_normal(2) + rng.multivariate_normal([0, 0], noise[s])
            phasor[s, 0, m] = shared + common[m] + own
    columns = slice(None) if bare_sites else slice(models)
    names = (*(f"model {m + 1}" for m in range(models)), "none")[columns]
    return Invented(
        Observations(
            tuple(f"site {s + 1}" for s in range(sites)),
            names,
            np.ones((sites, 1)),
            phasor[:, :, columns],
            covariance[:, None],
            noise,
        ),
        admittance,
        np.array(truth),
    )


class DenseTwin:
    """All phasors in one vector and their covariance term by term, from the equation itself."""

    def __init__(
        self,
        network: Invented,
        *,
        annual_sd: float = 500.0,
        atmosphere_sd: float = 4.0,
        truth: float = 1.0,
        member: int = 0,
    ) -> None:
        seen = network.observations
        self.pairs = [tuple(pair) for pair in np.argwhere(seen.present)]
        self.value = np.concatenate([seen.part_phasor[s, 0, m] for s, m in self.pairs])
        self.annual = annual_sd * np.vstack([block(network.admittance[member, s]) for s, _ in self.pairs])
        self.annual_sd = annual_sd
        size = len(self.value)
        self.terms = {name: np.zeros((size, size)) for name in ("record", "noise", "site", "local", "common", "air")}
        counts = self.counts = seen.present.sum(axis=1)
        for i, (s, m) in enumerate(self.pairs):
            for j, (t, n) in enumerate(self.pairs):
                at = np.s_[2 * i : 2 * i + 2, 2 * j : 2 * j + 2]
                self.terms["air"][at] = atmosphere_sd**2 * np.eye(2)
                self.terms["common"][at] = (float(m == n) + truth) * np.eye(2)
                if s == t:
                    self.terms["record"][at] = seen.part_covariance[s, 0] - seen.model_noise[s] / counts[s]
                    self.terms["site"][at] = np.eye(2)
                if (s, m) == (t, n):
                    self.terms["noise"][at] = seen.model_noise[s]
                    self.terms["local"][at] = np.eye(2)

    def noise(self, log_scales: np.ndarray) -> np.ndarray:
        """(n, size, size), everything but A."""
        variance = np.exp(2.0 * np.asarray(log_scales))[:, :, None, None]
        fixed = self.terms["record"] + self.terms["noise"] + self.terms["air"]
        scaled = [variance[:, i] * self.terms[name] for i, name in enumerate(("site", "local", "common"))]
        return fixed + sum(scaled)

    def log_likelihood(self, log_scales: np.ndarray) -> np.ndarray:
        total = self.noise(log_scales) + self.annual @ self.annual.T
        solved = np.linalg.solve(total, np.broadcast_to(self.value[:, None], (*total.shape[:2], 1)))[..., 0]
        size = len(self.value)
        density = -0.5 * (solved @ self.value + np.linalg.slogdet(total)[1] + size * np.log(2.0 * np.pi))
        # the rows hold means over M_s models: both components shrink by the root of M_s
        return density + np.log(self.counts).sum()

    def gain(self, log_scales: np.ndarray) -> np.ndarray:
        """Linear map (n, 2, size) from the phasors to the posterior mean of A."""
        total = self.noise(log_scales) + self.annual @ self.annual.T
        return self.annual_sd * np.swapaxes(np.linalg.solve(total, self.annual[None]), 1, 2)

    def moments(self, log_scales: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        gain = self.gain(log_scales)
        return gain @ self.value, self.annual_sd**2 * np.eye(2) - self.annual_sd * gain @ self.annual


@pytest.fixture(scope="session")
def invent() -> Callable[..., Invented]:
    return invent_network


@pytest.fixture(scope="session")
def dense_twin() -> type[DenseTwin]:
    return DenseTwin


@pytest.fixture(scope="session")
def regression() -> Callable[..., LinearModel]:
    def build(
        network: Invented,
        *,
        annual_sd: float = 500.0,
        atmosphere_sd: float = 4.0,
        truth: float = 1.0,
        member: int = 0,
    ) -> LinearModel:
        rows = observation_rows(network.observations)
        return linear_model(
            rows, network.admittance[member], annual_sd=annual_sd, atmosphere_sd=atmosphere_sd, truth=truth
        )

    return build
