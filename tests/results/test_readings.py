"""What sites and models say in the phasor plane, against the fingerprints they went through."""

from dataclasses import replace

import numpy as np
import pytest

from massfit.phasor import as_complex
from massfit.results.estimate import Estimate
from massfit.results.finished import FinishedRun, finished_run
from massfit.results.readings import answer_contours, answer_draws, model_readings, site_admittances, site_readings


@pytest.fixture(scope="module")
def finished(run: Estimate) -> FinishedRun:
    return finished_run(run, command="massfit estimate here")


def test_a_site_read_through_its_fingerprint_is_its_phasor(finished: FinishedRun) -> None:
    readings, covariances = site_readings(finished)
    factor = site_admittances(finished)
    known = finished.datasets["fingerprints.nc"]["air_load_response"].values / 100.0
    seen = as_complex(np.array([site["phasor_hpa"] for site in finished.summary["sites"]]))
    np.testing.assert_allclose(factor * as_complex(readings) + as_complex(known), seen, atol=1e-12)
    # turning and stretching by a complex factor scales every area by its square
    own = [np.linalg.det(site["phasor_covariance_hpa2"]) for site in finished.summary["sites"]]
    np.testing.assert_allclose(np.linalg.det(covariances), own / np.abs(factor) ** 4, rtol=1e-9)


def test_models_lie_about_the_answer_and_move_with_their_own_phasors(finished: FinishedRun) -> None:
    readings = model_readings(finished)
    assert list(readings) == [str(name) for name in finished.datasets["site_phasors.nc"]["model"].values]
    centre = answer_draws(finished).mean(axis=0)
    np.testing.assert_allclose(np.mean(list(readings.values()), axis=0), centre, atol=1e-9)
    # one model moved at every site by what 0.3 hPa of ocean mass would give there; the others move half as far back
    phasors = finished.datasets["site_phasors.nc"].copy(deep=True)
    factor = site_admittances(finished)[:, None]
    shift = 30.0 * np.concatenate([factor.real, factor.imag], axis=1)
    phasors["phasor"].values[:, :, 0] += shift[:, None]
    moved = model_readings(replace(finished, datasets={**finished.datasets, "site_phasors.nc": phasors}))
    steps = [moved[name] - readings[name] for name in readings]
    np.testing.assert_allclose(steps, [[0.2, 0.0], [-0.1, 0.0], [-0.1, 0.0]], atol=1e-9)


def test_contours_enclose_the_mean_and_stand_one_inside_the_other(finished: FinishedRun) -> None:
    (outer, large), (inner, small) = answer_contours(finished)
    assert (outer, inner) == (0.95, 0.5)
    extent = [np.ptp(np.concatenate(list(lines)), axis=0) for lines in (small, large)]
    assert np.all(extent[0] < extent[1])
