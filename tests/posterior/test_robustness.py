"""One wrong site pulls the answer along under normal scatter, and loses its say under Student scatter."""

from dataclasses import replace

import numpy as np
import pytest

from massfit.posterior.robustness import moved_site, weightiest_site
from massfit.posterior.sample import sample_posterior
from massfit.posterior.what_if import Variant
from massfit.settings import PosteriorSettings, Priors


@pytest.fixture(scope="module")
def given(invent) -> Variant:
    phasors, fingerprints = invent(4, sites=12, models=2, members=2, scales=(15.0, 12.0, 8.0)).datasets()
    return Variant("", "", phasors, fingerprints, PosteriorSettings(group_scatter=False), Priors(), 0.04)


def test_a_far_site_loses_its_say_under_student_scatter_only(given: Variant, monkeypatch) -> None:
    # runs too short to be called converged: the shifts are many times their error
    monkeypatch.setattr("massfit.posterior.sample.STEPS", 150)
    monkeypatch.setattr("massfit.posterior.sample.MAX_STEPS", 150)
    found = moved_site(given, "site 3", offsets_hpa=(0.0, 5.0))
    assert found["site"] == "site 3"
    assert found["offset_hpa"] == [0.0, 5.0]
    normal, student = (np.array(found[scatter]["shift_hpa"]) for scatter in ("normal", "student-t"))
    assert normal[0] == student[0] == 0.0
    # one of twelve equal sites: a twelfth of its offset over its admittance, less what its record error takes
    assert 5.0 / 12 / 2 < normal[1] < 5.0 / 12 * 1.5
    assert student[1] < 0.35 * normal[1]
    # the scatter that one site stretches widens the normal answer
    assert found["normal"]["sd_hpa"][1] > 1.5 * found["student-t"]["sd_hpa"][1]


def test_the_weightiest_site_is_the_one_that_the_answer_leans_on(given: Variant, monkeypatch) -> None:
    monkeypatch.setattr("massfit.posterior.sample.STEPS", 40)
    monkeypatch.setattr("massfit.posterior.sample.MAX_STEPS", 40)
    phasors, prints = given.phasors.copy(deep=True), given.fingerprints.copy(deep=True)
    phasors["covariance"].values[7] *= 0.01  # the surest record, which sees little of the cycle
    phasors["covariance"].values[4] *= 0.05
    prints["admittance"].values[:, 7] *= 0.3
    one = replace(given, phasors=phasors, fingerprints=prints)
    posterior = sample_posterior(phasors, prints, settings=one.settings, priors=one.priors)
    assert weightiest_site(one, posterior) == "site 5"
