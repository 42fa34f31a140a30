"""
One wrong site among ten
========================

Ten invented sites say what they see of a cycle of 0.85 hPa, each with an error of 0.1 hPa. The last one is wrong by 3
hPa. With Student's scatter it loses its say; with normal scatter it drags the answer along.
"""

import numpy as np
import xarray as xr
from matplotlib.figure import Figure

import massfit
from massfit import figures
from massfit.results.chains import chain_diagnostics
from massfit.results.posterior_groups import posterior_groups
from massfit.settings import PosteriorSettings, Priors

rng = np.random.default_rng(11)
names = [f"site {number}" for number in range(1, 11)]
truth = 85.0 * np.array([np.cos(4.73), np.sin(4.73)])  # Pa; the peak is on 2 October
seen = truth + rng.normal(0.0, 10.0, (10, 2))
seen[-1] += [300.0, 0.0]


def pascals(dims, values, units="Pa"):
    return (dims, np.asarray(values, dtype=float), {"units": units})


error = np.broadcast_to(100.0 * np.eye(2), (10, 1, 2, 2))
phasors = xr.Dataset(
    {
        "phasor": pascals(("site", "part", "model", "component"), seen[:, None, None]),
        "weight": pascals(("site", "part"), np.ones((10, 1)), "1"),
        "covariance": pascals(("site", "part", "component", "component2"), error, "Pa2"),
        "model_noise": pascals(("site", "component", "component2"), np.zeros((10, 2, 2)), "Pa2"),
        "reduced_sd": pascals(("site",), np.full(10, 150.0)),
        "days": pascals(("site",), np.full(10, 1200.0), "d"),
    },
    coords={"site": names, "model": ["invented model"]},
    attrs={"reference_year": 2016},
)
admittance = np.broadcast_to([1.1, 0.0], (1, 10, 2))
fingerprints = xr.Dataset(
    {"admittance": pascals(("member", "site", "component"), admittance, "1")},
    coords={"site": names, "member": ["invented load"]},
    attrs={"earth_model": "", "max_degree": 180, "ocean_area_m2": 3.6e14, "sea_water_density_kg_m3": 1025},
)
phasors["phasor"] *= 1.1  # each sees the cycle through its fingerprint

answers = {}
for scatter in ("normal", "student-t"):
    settings = PosteriorSettings(site_scatter=scatter, group_scatter=False)
    answers[scatter] = massfit.sample_posterior(phasors, fingerprints, settings=settings, priors=Priors())
    draws = answers[scatter].draws / 100.0
    middle, sd = draws[:, 0].mean(), draws[:, 0].std()
    print(f"{scatter:9s} in phase {middle:+.3f} (sd {sd:.3f}), hidden {truth[0] / 100.0:+.3f} hPa")

# %%
# The sites, the two answers with one standard deviation, and the truth.

figure = Figure(figsize=(6.0, 3.0), layout="constrained")
axes = figure.subplots()
axes.plot(*seen.T / 100.0, "o", color="#E69F00", markeredgecolor="black", label="what a site says")
for (scatter, answer), colour, marker in zip(answers.items(), ("#4D4D4D", "#0072B2"), "s^", strict=True):
    middle, sd = answer.draws.mean(axis=0) / 100.0, answer.draws.std(axis=0) / 100.0
    axes.errorbar(*middle, xerr=sd[0], yerr=sd[1], fmt=marker, color=colour, label=f"answer, {scatter} scatter")
axes.plot(*truth / 100.0, "x", color="black", markersize=9, label="hidden")
axes.set(xlabel="in phase / hPa", ylabel="quadrature / hPa", ylim=(-1.5, -0.3))
axes.legend(frameon=False, ncols=2)

# %%
# Whether the draws can be trusted.

groups = posterior_groups(answers["student-t"], phasors, fingerprints)
figures.convergence_figure(chain_diagnostics(groups["posterior"]))
