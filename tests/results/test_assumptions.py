"""What a run says it assumed is what its network holds."""

from dataclasses import replace

import numpy as np
import xarray as xr

from massfit.earth.profile import prem
from massfit.network import Network
from massfit.results.assumptions import stated_assumptions


def test_a_cut_to_the_days_of_a_model_is_said(invented: Network) -> None:
    first, *others = invented.circulation
    cut = replace(invented, circulation=(replace(first, partial="cut"), *others))
    assert f"records are cut to the days of {first.name} where these cover less" in " ".join(stated_assumptions(cut))
    assert "records are cut" not in " ".join(stated_assumptions(invented))


def test_the_source_of_the_ocean_mean_air_pressure_is_named(invented: Network) -> None:
    field = xr.DataArray(np.zeros((1, 1, 1)), dims=("time", "lat", "lon"))
    none = replace(invented, ocean_mean_atmosphere=None, air_pressure=None)
    assert "removed with the series given" in " ".join(stated_assumptions(invented))
    assert "removed with the mean of the air-pressure field" in " ".join(
        stated_assumptions(replace(none, air_pressure=field))
    )
    assert "taken as already removed" in " ".join(stated_assumptions(none))


def test_rotation_and_earth_are_those_of_the_run(invented: Network) -> None:
    settings = invented.settings
    turning = replace(settings, fingerprint=replace(settings.fingerprint, rotational_feedback=True))
    assert "elastic (PREM)" in " ".join(stated_assumptions(invented))
    assert "no rotational feedback" in " ".join(stated_assumptions(invented))
    told = " ".join(stated_assumptions(replace(invented, settings=turning, earth=replace(prem(), name="Mine"))))
    assert "elastic (the Earth profile Mine)" in told
    assert "the annual wobble that loads and air cause is fed back" in told
    assert "no rotational feedback" not in told
