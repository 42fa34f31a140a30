"""One wrong site pulls the answer along under normal scatter, and loses its say under Student scatter."""

import numpy as np
import pytest

from massfit.posterior.robustness import moved_site, surest_site
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


def test_the_surest_site_has_the_smallest_covariance(given: Variant) -> None:
    phasors = given.phasors.copy(deep=True)
    phasors["covariance"].values[7] *= 0.01
    assert surest_site(phasors) == "site 8"
