"""
How sure the fingerprint is
===========================

Nobody knows the annual cycle of water on land exactly. Where each region's amplitude is off by a fifth and its timing
by ten days, independently, the fingerprint of a far site hardly moves: most of it is geometry.
"""

import numpy as np
from matplotlib.figure import Figure

import massfit

love = massfit.love_numbers(max_degree=60)
operator = massfit.prepare_operator(massfit.OceanFunction.builtin(), love, max_degree=60)
(pattern,) = massfit.builtin_loads(("nominal",))
sites = [
    massfit.Site("mid Pacific", latitude_deg=-11.25, longitude_deg=205.5),
    massfit.Site("off Brazil", latitude_deg=-3.0, longitude_deg=322.0),
    massfit.Site("Bay of Bengal", latitude_deg=8.0, longitude_deg=87.0),
]
footprints = massfit.site_footprints(operator, sites)
responses = massfit.regional_responses(operator, footprints, pattern)
draws = massfit.draw_admittances(responses, rng=np.random.default_rng(3), draws=4000)

for site, values in zip(sites, draws.T, strict=True):
    ratio, delay = np.abs(values), np.angle(values) / (2.0 * np.pi) * 365.2422
    shown = f"ratio {ratio.mean():.3f} (sd {ratio.std():.3f}), delay {delay.mean():+5.1f} (sd {delay.std():.1f}) days"
    print(f"{site.id:14s} {shown}")

# %%
# Each point is one draw of all regions at once.

figure = Figure(figsize=(6.0, 3.4), layout="constrained")
axes = figure.subplots()
for site, values, marker, colour in zip(sites, draws.T[:, :400], "os^", ("#0072B2", "#E69F00", "#4D4D4D"), strict=True):
    delay = np.angle(values) / (2.0 * np.pi) * 365.2422
    axes.plot(delay, np.abs(values), marker, color=colour, markersize=2.5, alpha=0.5, label=site.id)
axes.set(xlabel="delay / days", ylabel="amplitude / ocean mean")
axes.legend(frameon=False)
