"""What a run says it assumed is what its network holds."""

from dataclasses import replace

import numpy as np
import xarray as xr

from massfit.network import Network
from massfit.results.assumptions import stated_assumptions


def test_the_source_of_the_ocean_mean_air_pressure_is_named(invented: Network) -> None:
    field = xr.DataArray(np.zeros((1, 1, 1)), dims=("time", "lat", "lon"))
    none = replace(invented, ocean_mean_atmosphere=None, air_pressure=None)
    assert "removed with the series given" in " ".join(stated_assumptions(invented))
    assert "removed with the mean of the air-pressure field" in " ".join(
        stated_assumptions(replace(none, air_pressure=field))
    )
    assert "taken as already removed" in " ".join(stated_assumptions(none))
