"""
From one record to one phasor
=============================

A recorder drifts by far more than the ocean breathes. Drift and annual cycle have to be found together: whoever takes
the drift off first takes a part of the cycle with it.
"""

import numpy as np
from scipy.optimize import curve_fit

import massfit
from massfit import figures
from massfit.report.figures.record_panels import RecordRow

# %%
# An invented record of eighteen months: a cycle of 0.9 hPa that peaks 275 days after 1 January, a drift of 12 hPa
# that decays within 70 days, a slope, and red noise.

rng = np.random.default_rng(7)
days = np.arange(548)
time = np.datetime64("2016-01-01T12", "ns") + days * np.timedelta64(1, "D")
cycle = 90.0 * np.cos(2.0 * np.pi * (days + 0.5 - 275.0) / 365.2422)
weather = np.zeros(days.size)
for day in days[1:]:
    weather[day] = 0.9 * weather[day - 1] + rng.normal(0.0, 12.0)
pressure = cycle - 1200.0 * np.exp(-days / 70.0) + 0.15 * days + weather

# %%
# Together. The answer is a mixture over the shapes of drift and noise that the record allows.

record = massfit.ReducedRecord("Amphora/1", time, pressure, np.empty((0, days.size)), time[0])
fit = massfit.fit_site([record], models=[], reference_year=2016, rng=rng, site="Amphora")
print(fit)

# %%
# Drift first, cycle afterwards: the curve swallows a part of the cycle.


def decay(day, level, slope, size, scale):
    return level + slope * day + size * np.exp(-day / scale)


(level, slope, size, scale), _ = curve_fit(decay, days, pressure, p0=(0.0, 0.0, -1000.0, 60.0))
rest = pressure - decay(days, level, slope, size, scale)
angle = 2.0 * np.pi * (days + 0.5) / 365.2422
basis = np.column_stack([np.cos(angle), np.sin(angle), np.ones(days.size)])
first = np.linalg.lstsq(basis, rest, rcond=None)[0][:2]
mean, covariance = fit.single_gaussian()
print(f"hidden    {90.0:5.1f} Pa")
print(f"together  {np.hypot(*mean[0]):5.1f} Pa, standard deviation about {np.sqrt(np.trace(covariance) / 2.0):.0f} Pa")
print(f"in turn   {np.hypot(*first):5.1f} Pa")

# %%
# The record as every report shows it.

(drift,) = fit.drifts
annual = basis[:, :2] @ mean[0] / 100.0
row = RecordRow(
    "Amphora", [(time, (pressure - pressure.mean()) / 100.0, (drift.drift - pressure.mean()) / 100.0)],
    time, {}, time, drift.reduced / 100.0, annual,
)  # fmt: skip
figures.record_panels([row])
