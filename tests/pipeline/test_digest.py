"""The digest of a part: equal for equal content in any process, other for any change."""

import subprocess
import sys
from dataclasses import replace

import numpy as np
import pytest
import xarray as xr

from massfit.pipeline.digest import digest
from massfit.settings import Priors
from massfit.site import Site

SITE = Site("A", 1.0, 2.0)
DATA = xr.Dataset({"p": (("t",), np.arange(3.0), {"units": "Pa"})}, {"t": [0, 1, 2]}, {"year": 2016})


@pytest.mark.parametrize(
    ("one", "other"),
    [
        (1, 1.0),
        (1, True),
        ("1", 1),
        ((1, 2), [1, 2]),
        ((1, (2, 3)), ((1, 2), 3)),
        (("ab", "c"), ("a", "bc")),
        ({"a": 1}, {"a": 2}),
        (0.0, -0.0),
        (np.zeros(2), np.zeros(3)),
        (np.zeros((2, 3)), np.zeros((3, 2))),
        (np.zeros(2), np.zeros(2, np.float32)),
        (np.array([1.0, 2.0]), np.array([1.0, np.nextafter(2.0, 3.0)])),
        (np.array(["a", "b"], object), np.array(["ab", ""], object)),
        (SITE, replace(SITE, group="north")),
        (Priors(), Priors(year_sd_hpa=0.06)),
        (DATA, DATA.assign_attrs(year=2017)),
        (DATA, DATA.assign(p=DATA["p"] + 1e-12)),
        (DATA, DATA.rename_dims(t="u")),
        (np.random.default_rng(1), np.random.default_rng(2)),
        (len, max),
    ],
)
def test_any_change_shows(one: object, other: object) -> None:
    assert digest(one) == digest(one)
    assert digest(one) != digest(other)


def test_what_is_equal_has_one_digest() -> None:
    assert digest({"a": 1, "b": 2}) == digest({"b": 2, "a": 1})
    assert digest(np.arange(6.0).reshape(2, 3)) == digest(np.asfortranarray(np.arange(6.0).reshape(2, 3)))
    assert digest(DATA) == digest(DATA.copy(deep=True))
    assert digest(np.array([np.nan])) == digest(np.array([np.nan]))


def test_a_generator_that_was_used_is_another() -> None:
    rng = np.random.default_rng(1)
    before = digest(rng)
    rng.normal()
    assert digest(rng) != before


def test_another_process_finds_the_same() -> None:
    # text is hashed with another salt there, and sets come in another order
    code = "from massfit.pipeline.digest import digest; print(digest({'a', 'b', 'c', ('d', 1.5)}))"
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout.strip()
    assert found == digest({"a", "b", "c", ("d", 1.5)})


def test_content_that_is_not_known_is_refused() -> None:
    with pytest.raises(TypeError, match="has no digest"):
        digest(object())
