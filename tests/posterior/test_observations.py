from dataclasses import replace

import numpy as np
import pytest
from scipy import linalg

from massfit.errors import InputError
from massfit.posterior.observations import RECORD_FLOOR, read_observations, record_covariance


def test_sites_are_matched_by_id_in_any_order(invent):
    network = invent(members=2)
    phasors, fingerprints = network.datasets()
    turned = fingerprints.isel(site=[5, 2, 7, 0, 1, 3, 6, 4])
    _, admittance = read_observations(phasors, turned)
    np.testing.assert_array_equal(admittance, network.admittance)


def test_the_air_load_response_is_taken_off(invent):
    phasors, fingerprints = invent().datasets()
    response = np.arange(16.0).reshape(8, 2)
    fingerprints["air_load_response"] = (("site", "component"), response, {"units": "Pa"})
    before = phasors["phasor"].values.copy()
    observations, _ = read_observations(phasors, fingerprints)
    np.testing.assert_allclose(observations.part_phasor, before - response[:, None, None])
    np.testing.assert_array_equal(phasors["phasor"].values, before)


def test_every_fault_is_listed(invent):
    phasors, fingerprints = invent().datasets()
    phasors["weight"].values[1] = 0.7
    phasors["covariance"].values[2, 0] = -np.eye(2)
    phasors["model_noise"].values[3, 0, 0] = np.nan
    phasors["phasor"].values[4] = np.nan
    fingerprints["admittance"].values[0, 5] = 0.0
    with pytest.raises(InputError) as caught:
        read_observations(phasors, fingerprints)
    assert [fault.name for fault in caught.value.faults] == [f"site {s}" for s in (2, 3, 4, 5, 6)]


def test_sites_without_fingerprint_and_repeated_names_are_faults(invent):
    phasors, fingerprints = invent().datasets()
    repeated = phasors.assign_coords(model=["model 1", "model 1", "model 3"])
    with pytest.raises(InputError) as caught:
        read_observations(repeated, fingerprints.isel(site=slice(7)))
    assert [fault.name for fault in caught.value.faults] == ["model 1", "site 8"]


def test_unnamed_sites_are_a_fault(invent):
    phasors, fingerprints = invent().datasets()
    with pytest.raises(InputError, match="coordinate 'site' is missing"):
        read_observations(phasors.drop_vars("site"), fingerprints)


def test_a_site_has_models_or_none(invent):
    phasors, fingerprints = invent(bare_sites=1).datasets()
    phasors["phasor"].values[1, :, -1] = 1.0
    with pytest.raises(InputError, match="'none' beside 3 models"):
        read_observations(phasors, fingerprints)


def test_copies_of_a_model_are_a_fault(invent):
    phasors, fingerprints = invent().datasets()
    phasors["phasor"].values[:, :, 2] = phasors["phasor"].values[:, :, 0] + 0.005
    with pytest.raises(InputError, match="model 1, model 3: the two models give the same phasor at all 8 sites"):
        read_observations(phasors, fingerprints)
    phasors["phasor"].values[3, :, 2] += 0.1  # one site apart is enough to be a model of its own
    read_observations(phasors, fingerprints)


def test_a_mean_over_models_is_read_and_goes_with_any_of_its_models(invent):
    phasors, fingerprints = invent().datasets()
    phasors["mean_only"] = (("site",), np.arange(8) == 2, {"units": "1"})
    observations, _ = read_observations(phasors, fingerprints)
    assert observations.mean_only == {"site 3"}
    np.testing.assert_array_equal(observations.has_contrasts, np.arange(8) != 2)
    # what the mean would be without one of its models is not known
    fewer, left = observations.without_model("model 1")
    np.testing.assert_array_equal(left, np.arange(8) != 2)
    assert fewer.models == ("model 2", "model 3")
    _, left = observations.without_model("no such model")
    assert left.all()


def test_a_mixture_hands_on_its_moments(invent):
    seen = invent(sites=1, models=2).observations
    parts = np.array([[[0.0, 0.0], [10.0, 0.0]], [[4.0, 2.0], [14.0, 2.0]]])
    covariance = np.array([[[9.0, 1.0], [1.0, 4.0]], [[1.0, 0.0], [0.0, 1.0]]])
    mixture = replace(seen, weight=np.array([[0.25, 0.75]]), part_phasor=parts[None], part_covariance=covariance[None])
    # second moments of a mixture by hand: shifts of 3 and 1 of the four units between the parts
    step = np.array([4.0, 2.0])
    expected = 0.25 * covariance[0] + 0.75 * covariance[1] + 0.25 * 0.75 * np.outer(step, step)
    np.testing.assert_allclose(mixture.covariance[0], expected)
    np.testing.assert_allclose(mixture.mean_phasor[0], [8.0, 1.5])


def test_the_record_covariance_stays_a_covariance():
    covariance = np.array([[400.0, 90.0], [90.0, 150.0]])
    noise = np.array([[900.0, -200.0], [-200.0, 120.0]])
    plain = record_covariance(covariance, noise / 20.0, 3)
    np.testing.assert_allclose(plain, covariance - noise / 60.0, rtol=1e-12)
    floored = record_covariance(covariance, noise, 1)
    # generalised eigenvalues against the full covariance (scipy), not below the floor
    relative = linalg.eigh(floored, covariance, eigvals_only=True)
    unfloored = linalg.eigh(covariance - noise, covariance, eigvals_only=True)
    np.testing.assert_allclose(relative, np.maximum(unfloored, RECORD_FLOOR), rtol=1e-10)
    assert unfloored.min() < 0
