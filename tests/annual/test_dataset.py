"""Fits joined into the Dataset that the network stage receives."""

from dataclasses import replace

import numpy as np
import pytest

from massfit.annual.dataset import site_phasors
from massfit.annual.fit import Estimate, NoiseFit, SiteFit
from massfit.contracts import SITE_PHASORS, require
from massfit.errors import InputError


def invented_fit(site, models, parts):
    columns = max(len(models), 1)
    phasor = np.arange(parts * columns * 2, dtype=float).reshape(parts, columns, 2)
    nothing = Estimate(0.0, 0.0)
    return SiteFit(
        site=site, models=models, weight=np.full(parts, 1 / parts), phasor=phasor,
        covariance=np.tile(np.eye(2), (parts, 1, 1)), model_noise=np.zeros((2, 2)), reduced_sd=1.0, days=100,
        effective_sample_size=50.0, noise=NoiseFit((), (), nothing), drifts=(), year_share={2016: 1.0},
    )  # fmt: skip


FITS = [invented_fit("A", ("x", "y"), 3), invented_fit("B", ("y",), 1), invented_fit("C", (), 2)]


def test_dataset_keeps_the_contract():
    data = site_phasors(FITS, models=["x", "y"], reference_year=2016)
    require(data, SITE_PHASORS)
    assert list(data.model.values) == ["x", "y", "none"]
    assert data.attrs["reference_year"] == 2016


def test_missing_pairs_are_nan_and_unused_parts_repeat_the_first():
    data = site_phasors(FITS, models=["x", "y"], reference_year=2016)
    present = np.isfinite(data.phasor.isel(part=0, component=0))
    np.testing.assert_array_equal(present, [[True, True, False], [False, True, False], [False, False, True]])
    np.testing.assert_array_equal(data.phasor.sel(site="A", model="y").values, FITS[0].phasor[:, 1])
    np.testing.assert_array_equal(data.phasor.sel(site="B", model="y").values, np.tile(FITS[1].phasor[0, 0], (3, 1)))
    np.testing.assert_allclose(data.weight, [[1 / 3] * 3, [1, 0, 0], [0.5, 0.5, 0]])
    np.testing.assert_array_equal(data.covariance.sel(site="B", part=1), np.eye(2))


def test_without_a_bare_site_there_is_no_pseudo_model():
    assert list(site_phasors(FITS[:2], models=["x", "y"], reference_year=2016).model.values) == ["x", "y"]


def test_unknown_models_repeated_sites_and_the_kept_name_are_faults():
    with pytest.raises(InputError) as caught:
        site_phasors([*FITS[:2], replace(FITS[0], models=("x", "z"))], models=["x", "y", "none"], reference_year=2016)
    assert {fault.name for fault in caught.value.faults} == {"site", "z", "none"}
