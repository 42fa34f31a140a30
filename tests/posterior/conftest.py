"""Invented networks of site phasors, and a slow twin that writes the covariance of all phasors out."""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
import pytest
import xarray as xr

from massfit.posterior.observations import Observations
from massfit.posterior.regression import LinearModel, linear_model
from massfit.posterior.rows import observation_rows
from massfit.posterior.sharing import find_sharing


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
        optional = {}
        if seen.years:
            optional["year_share"] = variable(("site", "year"), seen.year_share, "1")
            optional["period_share"] = variable(("year",), seen.period_share, "1")
        if seen.position is not None:
            latitude, longitude = np.degrees(seen.position.T)
            optional["latitude"] = variable(("site",), latitude, "degrees_north")
            optional["longitude"] = variable(("site",), longitude, "degrees_east")
        groups = {"group": (("site",), np.array(seen.group, dtype=object))} if seen.group else {}
        phasors = xr.Dataset(
            {
                **optional,
                "phasor": variable(("site", "part", "model", "component"), seen.part_phasor, "Pa"),
                "weight": variable(("site", "part"), seen.weight, "1"),
                "covariance": variable(covariance, seen.part_covariance, "Pa2"),
                "model_noise": variable(("site", "component", "component2"), seen.model_noise, "Pa2"),
                "reduced_sd": variable(("site",), np.full(count, 150.0), "Pa"),
                "days": variable(("site",), np.full(count, 900.0), "d"),
            },
            coords={"site": list(seen.sites), "model": list(seen.models), "year": list(seen.years), **groups},
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
    placed: bool = False,
) -> Invented:
    """Phasors made site by site from the equation of the network model, r = 1, Pa.

    Where the sites are placed they have positions, groups (every fifth has none) and years besides, and the last two
    lie at one place; nothing of that is in the phasors.
    """
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
    where = {}
    if placed:
        place = np.random.default_rng([seed, 1])
        position = np.column_stack([place.uniform(-0.8, 0.8, sites), place.uniform(0, 6.28, sites)])
        position[-1] = position[-2]
        where = {
            "position": position,
            "group": tuple("" if s % 5 == 4 else "ABC"[s % 3] for s in range(sites)),
            "years": (2014, 2015, 2016, 2017),
            "year_share": place.dirichlet(np.ones(4), sites),
            "period_share": np.array([0.3, 0.3, 0.3, 0.1]),
        }
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
            **where,
        ),
        admittance,
        np.array(truth),
    )


def arc_km(first: np.ndarray, second: np.ndarray) -> float:
    """Angle between two directions, by their cross and dot products, on a sphere of 6371 km."""
    x, y = (
        np.array([np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)]) for lat, lon in (first, second)
    )
    return 6371.0 * float(np.arctan2(np.linalg.norm(np.cross(x, y)), x @ y))


class DenseTwin:
    """All phasors in one vector and their covariance term by term, from the equation itself."""

    def __init__(
        self,
        network: Invented,
        *,
        annual_sd: float = 500.0,
        atmosphere_sd: float = 4.0,
        year_sd: float = 5.0,
        unmodelled_sd: float = 100.0,
        truth: float = 1.0,
        member: int = 0,
        group_scatter: bool | float = False,
        stretch: np.ndarray | None = None,
    ) -> None:
        seen = network.observations
        self.pairs = [tuple(pair) for pair in np.argwhere(seen.present)]
        self.value = np.concatenate([seen.part_phasor[s, 0, m] for s, m in self.pairs])
        self.annual = annual_sd * np.vstack([block(network.admittance[member, s]) for s, _ in self.pairs])
        self.annual_sd = annual_sd
        size = len(self.value)
        names = ("record", "noise", "site", "local", "common", "group", "air", "year", "unmodelled")
        self.terms = {name: np.zeros((size, size)) for name in names}
        counts = self.counts = seen.present.sum(axis=1)
        stretched = np.ones(len(seen.sites)) if stretch is None else stretch
        away = seen.year_share - seen.period_share if len(seen.years) > 1 else np.zeros((len(seen.sites), 1))
        for i, (s, m) in enumerate(self.pairs):
            for j, (t, n) in enumerate(self.pairs):
                at = np.s_[2 * i : 2 * i + 2, 2 * j : 2 * j + 2]
                distance = 0.0 if s == t else np.inf
                if s != t and seen.position is not None:
                    distance = arc_km(seen.position[s], seen.position[t])
                turn = block(network.admittance[member, s]) @ block(network.admittance[member, t]).T
                self.terms["air"][at] = atmosphere_sd**2 * np.eye(2)
                self.terms["common"][at] = (float(m == n) + truth) * np.eye(2)
                self.terms["year"][at] = year_sd**2 * (away[s] @ away[t]) * turn
                self.terms["group"][at] = self.shared(seen, s, t, distance, group_scatter) * np.eye(2)
                if "none" in seen.models and {m, n} == {seen.models.index("none")}:
                    alike = 1.0 if seen.position is None else np.exp(-distance / 3000.0)
                    self.terms["unmodelled"][at] = unmodelled_sd**2 * alike * np.eye(2)
                if s == t:
                    self.terms["record"][at] = seen.part_covariance[s, 0] - seen.model_noise[s] / counts[s]
                if distance < 10.0:
                    self.terms["site"][at] = stretched[s] * np.eye(2)
                if (s, m) == (t, n):
                    self.terms["noise"][at] = seen.model_noise[s]
                    self.terms["local"][at] = np.eye(2)

    @staticmethod
    def shared(seen: Observations, s: int, t: int, distance: float, group_scatter: bool | float) -> float:
        if group_scatter is False:
            return 0.0
        if group_scatter is True:
            return float(s == t or (seen.group[s] == seen.group[t] != ""))
        return float(np.exp(-(distance if distance > 10.0 else 0.0) / group_scatter))

    def noise(self, log_scales: np.ndarray) -> np.ndarray:
        """(n, size, size), everything but A."""
        variance = np.exp(2.0 * np.asarray(log_scales))[:, :, None, None]
        fixed = sum(self.terms[name] for name in ("record", "noise", "air", "year", "unmodelled"))
        names = ("site", "local", "common", "group")[: variance.shape[1]]
        return fixed + sum(variance[:, i] * self.terms[name] for i, name in enumerate(names))

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
        year_sd: float = 5.0,
        unmodelled_sd: float = 100.0,
        truth: float = 1.0,
        member: int | slice = 0,
        group_scatter: bool | float = False,
        student: bool = False,
        mixed: tuple[str, ...] = (),
    ) -> LinearModel:
        return linear_model(
            observation_rows(network.observations, mixed),
            network.admittance[member : member + 1] if isinstance(member, int) else network.admittance[member],
            find_sharing(network.observations, group_scatter),
            annual_sd=annual_sd,
            atmosphere_sd=atmosphere_sd,
            year_sd=year_sd,
            unmodelled_sd=unmodelled_sd,
            truth=truth,
            student=student,
        )

    return build


def make_two_parts(network, site, offset, weight=0.5, narrow=1.0):
    """Give one site a mixture of two parts, `offset` (Pa) to either side of its phasor."""
    seen = network.observations
    phasor, covariance = np.repeat(seen.part_phasor, 2, axis=1), np.repeat(seen.part_covariance, 2, axis=1)
    weights = np.tile([1.0, 0.0], (len(seen.sites), 1))
    phasor[site, 0] += 2 * (1 - weight) * np.asarray(offset)
    phasor[site, 1] -= 2 * weight * np.asarray(offset)
    covariance[site] *= narrow
    weights[site] = [weight, 1.0 - weight]
    return replace(network, observations=replace(seen, weight=weights, part_phasor=phasor, part_covariance=covariance))


@pytest.fixture(scope="session")
def two_parts() -> Callable[..., Invented]:
    return make_two_parts
