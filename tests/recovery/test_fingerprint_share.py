"""The share of the fingerprint in the variance of the answer, through the public face of the posterior."""

import numpy as np
import pytest
import xarray as xr

import massfit
from massfit.phasor import as_components
from massfit.posterior.summary import summarise
from massfit.settings import PosteriorSettings, Priors

TRUTH = complex(10.0, 85.0)  # Pa
SETTINGS = PosteriorSettings(site_scatter="normal", group_scatter=False)


def share_and_variance(factors: list[float]) -> tuple[float, float]:
    """Share of the fingerprint, and variance of A (Pa2, both components), where member k is `factors[k]` everywhere."""
    sites, models = 4, 2
    rng = np.random.default_rng(8)
    phasor = as_components(np.full((sites, 1, models), TRUTH)) + 4.0 * rng.standard_normal((sites, 1, models, 2))

    def variable(dims: tuple[str, ...], values: np.ndarray, units: str) -> tuple:
        return dims, np.asarray(values, dtype=float), {"units": units}

    eye = np.broadcast_to(25.0 * np.eye(2), (sites, 1, 2, 2))
    phasors = xr.Dataset(
        {
            "phasor": variable(("site", "part", "model", "component"), phasor, "Pa"),
            "weight": variable(("site", "part"), np.ones((sites, 1)), "1"),
            "covariance": variable(("site", "part", "component", "component2"), eye, "Pa2"),
            "model_noise": variable(("site", "component", "component2"), np.zeros((sites, 2, 2)), "Pa2"),
            "reduced_sd": variable(("site",), np.full(sites, 150.0), "Pa"),
            "days": variable(("site",), np.full(sites, 900.0), "d"),
        },
        coords={"site": list("abcd"), "model": ["one", "two"]},
        attrs={"reference_year": 2016},
    )
    admittance = as_components(np.array(factors)[:, None] * np.ones((1, sites), dtype=complex))
    fingerprints = xr.Dataset(
        {"admittance": variable(("member", "site", "component"), admittance, "1")},
        coords={"site": list("abcd"), "member": [f"member {k}" for k in range(len(factors))]},
        attrs={"earth_model": "", "max_degree": 180, "ocean_area_m2": 3.6e14, "sea_water_density_kg_m3": 1025.0},
    )
    posterior = massfit.sample_posterior(phasors, fingerprints, settings=SETTINGS, priors=Priors())
    summary = summarise(
        posterior, phasors, fingerprints, reference_year=2016, ocean_area_m2=3.6e14, sea_water_density=1025.0
    )
    shares = summary["variance_share"]
    assert sum(shares.values()) == pytest.approx(1.0, abs=1e-9)  # type: ignore[attr-defined]
    return shares["fingerprint"], float(np.trace(np.cov(posterior.draws.T)))  # type: ignore[index]


def test_the_share_is_the_inflated_spread_of_the_members() -> None:
    # with F the same everywhere the answer under each member is that for F = 1 over F: |A| = 0.856 hPa over 0.8 and
    # over 1.2, two members whose mean square distance from their mean is inflated by (K + 1) / (K - 1) = 3
    share, total = share_and_variance([0.8, 1.2])
    expected = 3.0 * np.var([abs(TRUTH) / 0.8, abs(TRUTH) / 1.2])
    # the prior of A pulls by a few per cent, and draws have a Monte Carlo error of some per cent
    assert share * total == pytest.approx(expected, rel=0.15)
    # control: without the inflation it would be a third of that
    assert share * total > 2.0 * expected / 3.0
