"""
How long a record has to be
===========================

Over one year an exponential drift and an annual cycle look much alike; over two they do not. The standard deviation
of the annual phasor shows it before any record is at hand, since the noise decides, not the values.
"""

import numpy as np
from matplotlib.figure import Figure

import massfit

rng = np.random.default_rng(1)
years = np.array([0.75, 1.0, 1.5, 2.0, 3.0])
sizes = {"exponential+linear": [], "none": []}
for length in years:
    days = np.arange(int(365.25 * length))
    time = np.datetime64("2016-01-01T12", "ns") + days * np.timedelta64(1, "D")
    pressure = rng.normal(0.0, 30.0, days.size)
    for drift, found in sizes.items():
        record = massfit.ReducedRecord("A/1", time, pressure, np.empty((0, days.size)), time[0], drift=drift)
        priors = massfit.make_settings(
            network={"name": "one", "reference_year": 2016},
            corrections={"ocean_mean_atmosphere": "already-removed"},
            priors={"noise_forms": ["white"]},
        ).priors
        _, covariance = massfit.fit_site(
            [record], models=[], reference_year=2016, rng=rng, priors=priors
        ).single_gaussian()
        found.append(float(np.sqrt(np.trace(covariance) / 2.0)))

inflation = np.array(sizes["exponential+linear"]) / np.array(sizes["none"])
for length, factor in zip(years, inflation, strict=True):
    print(f"{length:4.2f} years: the drift costs a factor of {factor:.2f}")

# %%
# White noise of 0.3 hPa a day throughout.

figure = Figure(figsize=(6.0, 3.0), layout="constrained")
axes = figure.subplots()
axes.plot(years, sizes["exponential+linear"], "o-", color="#0072B2", label="drift fitted with the cycle")
axes.plot(years, sizes["none"], "s--", color="#4D4D4D", label="no drift in the record")
axes.set(xlabel="length / years", ylabel="sd of the phasor / Pa", yscale="log")
axes.set_yticks([2, 5, 10, 20, 50], ["2", "5", "10", "20", "50"])
axes.minorticks_off()
axes.legend(frameon=False)
