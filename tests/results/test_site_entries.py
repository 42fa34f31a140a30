"""Numbers of a site before the network, against closed forms."""

import numpy as np
import pytest
import xarray as xr

from massfit.annual.cautions import QUIET_SD, site_cautions
from massfit.results.site_entries import LEAST_P, judgement, site_entry
from massfit.site import Interval, Site

DAY = 365.2422


def phasors() -> xr.Dataset:
    """One site, two models, two parts; the second part of little weight."""
    phasor = np.full((1, 2, 3, 2), np.nan)
    phasor[0, :, :2] = [[[0.0, 90.0], [0.0, 70.0]], [[40.0, 80.0], [40.0, 80.0]]]
    covariance = np.array([[[[100.0, 0.0], [0.0, 25.0]], [[400.0, 0.0], [0.0, 25.0]]]])
    return xr.Dataset(
        {
            "phasor": (("site", "part", "model", "component"), phasor),
            "weight": (("site", "part"), [[0.75, 0.25]]),
            "covariance": (("site", "part", "component", "component2"), covariance),
            "reduced_sd": (("site",), [120.0]),
        },
        {"site": ["A"], "model": ["one", "two", "none"]},
    )


def test_mean_and_covariance_are_those_of_the_mixture() -> None:
    entry = site_entry(Site("A", -10.0, 200.0, 4000.0, "north"), phasors())
    assert entry["phasor_hpa"] == pytest.approx([0.1, 0.8])
    # within: 0.75 * 100 + 0.25 * 400; between: 0.75 * 0.25 * 40^2 in the first component; Pa^2 to hPa^2
    np.testing.assert_allclose(entry["phasor_covariance_hpa2"], [[(175.0 + 300.0) / 1e4, 0.0], [0.0, 25.0 / 1e4]])
    assert entry["phasor_by_model_hpa"] == {
        "one": pytest.approx([0.1, 0.875]),
        "two": pytest.approx([0.1, 0.725]),
    }
    assert entry["parts"] == 2
    assert entry["warnings"] == []


def test_amplitude_and_peak_to_first_order() -> None:
    entry = site_entry(Site("A", -10.0, 200.0), phasors())
    assert entry["amplitude_hpa"] == pytest.approx(np.hypot(0.1, 0.8))
    assert entry["peak_day"] == pytest.approx(np.arctan2(0.8, 0.1) / (2 * np.pi) * DAY)
    # against draws
    draws = np.random.default_rng(1).multivariate_normal([0.1, 8.0], entry["phasor_covariance_hpa2"], 200_000)
    angle = np.arctan2(draws[:, 1], draws[:, 0])
    wide = site_entry(Site("A", -10.0, 200.0), phasors().assign(phasor=phasors()["phasor"] + np.array([0.0, 720.0])))
    assert wide["amplitude_sd_hpa"] == pytest.approx(np.hypot(*draws.T).std(), rel=0.02)
    assert wide["peak_sd_days"] == pytest.approx(angle.std() / (2 * np.pi) * DAY, rel=0.02)


def test_exclusions_are_listed_and_a_site_without_a_model_is_warned_about() -> None:
    gap = Interval(np.datetime64("2015-03-01", "ns"), np.datetime64("2015-03-10", "ns"), "dragged")
    bare = phasors().isel(model=[0]).assign_coords(model=["none"])
    entry = site_entry(Site("A", -10.0, 200.0, exclude=(gap,)), bare)
    assert entry["exclude"] == [["2015-03-01T00:00:00", "2015-03-10T00:00:00", "dragged"]]
    assert any("the annual cycle of the circulation is still in the phasor" in text for text in entry["warnings"])


@pytest.mark.parametrize(("sd", "count"), [(QUIET_SD + 1.0, 1), (QUIET_SD - 1.0, 0), (np.nan, 0)])
def test_quietness(sd: float, count: int) -> None:
    assert len(site_cautions(sd, ["one"])) == count


def test_residuals_that_are_not_white_are_doubted() -> None:
    judged = {"portmanteau": 70.0, "portmanteau_degrees": 27}
    assert judgement({**judged, "portmanteau_p": 2.0 * LEAST_P}) == []
    assert "portmanteau 70 for 27 degrees" in judgement({**judged, "portmanteau_p": 0.5 * LEAST_P})[0]
    assert judgement(None) == []
