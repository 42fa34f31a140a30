"""Fits joined into the Dataset that the network stage receives."""

from dataclasses import replace

import numpy as np
import pytest

from massfit.annual.dataset import site_phasors
from massfit.annual.fit import Estimate, NoiseFit, SiteFit
from massfit.annual.noise import NoiseModel
from massfit.contracts import SITE_PHASORS, require
from massfit.errors import InputError
from massfit.network import ReducedSite

NOISE = NoiseModel(np.zeros(0), np.zeros(0), np.ones(1))


def invented_fit(site, models, parts):
    columns = max(len(models), 1)
    phasor = np.arange(parts * columns * 2, dtype=float).reshape(parts, columns, 2)
    nothing = Estimate(0.0, 0.0)
    return SiteFit(
        site=site, models=models, weight=np.full(parts, 1 / parts), phasor=phasor,
        covariance=np.tile(np.eye(2), (parts, 1, 1)), model_noise=np.zeros((2, 2)), reduced_sd=1.0, days=100,
        effective_sample_size=50.0, noise=NoiseFit({}, nothing, nothing, (nothing,), NOISE), drifts=(),
        year_share={2016: 1.0},
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


COVARIANCE = np.array([[90.0, 10.0], [10.0, 60.0]])


def test_phasors_made_elsewhere_stand_behind_the_fits():
    mean = ReducedSite("D", np.array([5.0, 80.0]), COVARIANCE, (2014, 2016), ("x", "y"))
    each = ReducedSite("E", np.array([[4.0, 79.0]]), COVARIANCE, (2014, 2016), ("y",), model_noise=0.1 * COVARIANCE)
    bare = ReducedSite("F", np.array([6.0, 81.0]), COVARIANCE, (2015, 2015))
    data = site_phasors(FITS[:2], models=["x", "y"], reference_year=2016, reduced=[mean, each, bare])
    require(data, SITE_PHASORS)
    assert list(data.site.values) == ["A", "B", "D", "E", "F"]
    np.testing.assert_array_equal(data.mean_only, [0, 0, 1, 0, 0])
    np.testing.assert_array_equal(data.phasor.sel(site="D").isel(part=0), [[5, 80], [5, 80], [np.nan, np.nan]])
    np.testing.assert_array_equal(data.phasor.sel(site="E").isel(part=2)[1], [4, 79])
    np.testing.assert_array_equal(data.phasor.sel(site="F", model="none").isel(part=0), [6, 81])
    np.testing.assert_array_equal(data.weight.sel(site="D"), [1, 0, 0])
    np.testing.assert_array_equal(data.covariance.sel(site="F", part=1), COVARIANCE)
    np.testing.assert_array_equal(data.model_noise.sel(site="E"), 0.1 * COVARIANCE)
    np.testing.assert_array_equal(np.isnan(data.days), [False, False, True, True, True])
    assert "mean_only" not in site_phasors(FITS, models=["x", "y"], reference_year=2016)


def test_every_fault_of_a_phasor_made_elsewhere_is_listed():
    wrong = ReducedSite(
        "A", np.zeros((3, 2)), np.array([[1.0, 2.0], [2.0, 1.0]]), (2016, 2014), ("x", "z", "z"), -np.eye(2)
    )
    with pytest.raises(InputError) as caught:
        site_phasors(FITS[:1], models=["x", "y"], reference_year=2016, reduced=[wrong])
    assert [fault.name for fault in caught.value.faults] == [
        "site", "models", "models", "covariance", "model_noise", "years",
    ]  # fmt: skip


@pytest.mark.parametrize("phasor", [np.zeros(3), np.zeros((1, 2)), np.array([np.nan, 1.0])])
def test_a_phasor_of_another_shape_is_a_fault(phasor):
    wrong = ReducedSite("D", phasor, COVARIANCE, (2014, 2014), ("x", "y"))
    with pytest.raises(InputError, match="two for each model"):
        site_phasors([], models=["x", "y"], reference_year=2016, reduced=[wrong])
