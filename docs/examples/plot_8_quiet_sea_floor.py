"""
Where the sea floor is quiet
============================

An ocean model says where its bottom pressure varies little, and so where a recorder would see the mass of the ocean
best. Here an invented model over a part of the Pacific has a storm track in the north and a few eddies.
"""

import numpy as np
import xarray as xr

import massfit
from massfit import figures

rng = np.random.default_rng(2)
time = np.arange("2011-01-03", "2016-01-01", 5, dtype="datetime64[D]").astype("datetime64[ns]")
latitude, longitude = np.arange(-38.0, 50.0, 4.0), np.arange(162.0, 240.0, 4.0)
storms = 60.0 + 200.0 * np.exp(-(((latitude - 44.0) / 12.0) ** 2))
eddies = 250.0 * np.exp(-(((latitude[:, None] + 20.0) / 6.0) ** 2) - ((longitude - 200.0) / 8.0) ** 2)
ocean = massfit.OceanFunction.builtin()
places = np.meshgrid(latitude, longitude, indexing="ij")
wet = np.array([ocean.fraction_at(*place) > 0.5 for place in zip(*map(np.ravel, places), strict=True)])
noise = rng.normal(0.0, 1.0, (time.size, latitude.size, longitude.size)) * (storms[:, None] + eddies)
noise = np.where(wet.reshape(places[0].shape), noise, np.nan)  # a model has no value on land
pressure = xr.DataArray(noise, {"time": time, "lat": latitude, "lon": longitude}, ("time", "lat", "lon"))

found = massfit.screen_sea_floor([massfit.ModelField("invented model", pressure, "removed")], record_years=[2.0])
figures.field_map(found["sd"].isel(model=0, missing_dims="ignore") / 100.0, label="standard deviation / hPa")
