import numpy as np
import pytest

from massfit.errors import InputError
from massfit.fingerprint.ocean import OceanFunction
from massfit.simulate.places import basin, draw_sites, unit_vectors


@pytest.mark.parametrize("seed", range(5))
def test_sites_lie_on_open_ocean_far_from_each_other(seed: int) -> None:
    ocean = OceanFunction.builtin()
    sites = draw_sites(ocean, 18, np.random.default_rng(seed))
    around = np.deg2rad(np.arange(0, 360, 15))
    for site in sites:
        # three degrees around every site there is nothing but ocean
        ring = ocean.fraction_at(site.latitude_deg + 3.0 * np.sin(around), site.longitude_deg + 3.0 * np.cos(around))
        assert np.all(ring == 1.0)
        assert site.depth_m is not None
        assert site.depth_m > 3800.0
    points = unit_vectors(
        np.array([site.latitude_deg for site in sites]), np.array([site.longitude_deg for site in sites])
    )
    nearest = np.sort(np.arccos(np.clip(points @ points.T, -1.0, 1.0)), axis=1)[:, 1]
    assert np.rad2deg(nearest.min()) > 8.0
    assert len({site.id for site in sites}) == 18
    assert {"tropical Pacific", "Atlantic"} <= {site.group for site in sites}


@pytest.mark.parametrize(
    ("latitude", "longitude", "name"),
    [
        (0.0, 250.0, "tropical Pacific"),
        (25.0, 180.0, "North Pacific"),
        (-30.0, 250.0, "South Pacific"),
        (-30.0, 345.0, "Atlantic"),
        (25.0, -40.0, "Atlantic"),
        (10.0, 65.0, "Indian Ocean"),
        (-30.0, 100.0, "Indian Ocean"),
        (-30.0, 160.0, "South Pacific"),
    ],
)
def test_basins(latitude: float, longitude: float, name: str) -> None:
    assert basin(latitude, longitude) == name


def test_too_many_sites_are_refused() -> None:
    with pytest.raises(InputError, match="5000 sites do not fit"):
        draw_sites(OceanFunction.builtin(), 5000, np.random.default_rng(1))
