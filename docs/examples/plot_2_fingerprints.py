"""
How a site sees the ocean's mass
================================

Water that leaves the land does not spread evenly over the sea. Where it lay, its attraction is missing and the ground
rises; far away the sea gets more than its share. The *fingerprint* of a site is the factor between the cycle of the
ocean mean and the cycle at the site.
"""

import numpy as np
import xarray as xr

import massfit
from massfit import figures
from massfit.fingerprint.maps import admittance_maps

love = massfit.love_numbers(max_degree=60)
operator = massfit.prepare_operator(massfit.OceanFunction.builtin(), love, max_degree=60)
pattern = massfit.builtin_loads(("nominal",))
sites = [
    massfit.Site("Amphora", latitude_deg=-11.25, longitude_deg=205.5),
    massfit.Site("Basket", latitude_deg=8.5, longitude_deg=184.0),
    massfit.Site("Cradle", latitude_deg=4.0, longitude_deg=322.0),
]

# %%
# One adjoint solve for each site gives its footprint, which then serves every load. The argument of the factor is a
# delay: a site with a positive one peaks later than the ocean mean.

found = massfit.site_fingerprints(operator, sites, pattern)
factors = found["admittance"].values[0] @ np.array([1.0, 1.0j])
for site, factor in zip(sites, factors, strict=True):
    delay = np.angle(factor) / (2.0 * np.pi) * 365.2422
    print(f"{site.id}: {abs(factor):.3f} of the ocean mean, {delay:+.1f} days")

# %%
# The same for the whole ocean, by a forward solve. The heavy line is the ocean mean itself: most of the tropical
# Pacific sees more; the coasts of the lands that lose the water see less.

maps = admittance_maps(operator, pattern)
parts = maps["map_admittance"].values[0]
ratio = xr.DataArray(np.linalg.norm(parts, axis=-1), {name: maps[name] for name in ("lat", "lon")}, ("lat", "lon"))
figures.field_map(
    ratio,
    {site.id: (site.latitude_deg, site.longitude_deg) for site in sites},
    label="amplitude / ocean mean",
    at_sites=np.abs(factors),
    neutral=1.0,
)
