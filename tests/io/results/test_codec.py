"""What is stored comes back with every bit, and nothing but listed classes is stored or read."""

import io
import json

import numpy as np
import pytest
import xarray as xr

from massfit.io.results.codec import CLASSES, decode, encode
from massfit.pipeline.digest import digest
from massfit.records.record import Action
from massfit.results.estimate import Estimate

VALUES = (
    None, True, 3, -0.1, "Å\n", float("inf"), (), [1, (2.5, "x")], {2014: 0.25, "a": None},
    np.float64(0.1), np.int32(-4), np.bool_(True), np.datetime64("2016-02-29T12", "ns"), np.complex128(1 - 2j),
    np.array([[1.0, np.nan, -0.0]]), np.asfortranarray(np.arange(6.0).reshape(2, 3)), np.zeros((0, 2)),
    np.array(["2016-01-01", "NaT"], dtype="datetime64[ns]"), np.array([["a", "ø"]], dtype=object),
    np.array(["b", "cc"]),
    Action("spikes rejected", 3, "over 5 sd"), (Action("a", 1), Action("b", 2)),
)  # fmt: skip


@pytest.mark.parametrize("value", VALUES, ids=repr)
def test_a_value_comes_back_as_it_was(value: object) -> None:
    found = decode(encode(value))
    assert type(found) is type(value)
    # the digest is another route over the same content, down to types and bits
    assert digest(found) == digest(value)
    if isinstance(value, np.ndarray):
        assert found.dtype == value.dtype
        assert found.flags.f_contiguous == value.flags.f_contiguous


def test_what_a_run_stores_comes_back_as_it_was(run: Estimate) -> None:
    for reduction in run.reductions:
        assert digest(decode(encode(reduction))) == digest(reduction)
    stored = (run.posterior.member_convergence, run.posterior.second_route)
    assert digest(decode(encode(stored))) == digest(stored)
    assert {type(run.reductions[0]), type(stored[0][0]), type(stored[1][0])} <= set(CLASSES.values())


def test_a_dataset_keeps_coordinates_and_attributes() -> None:
    dataset = xr.Dataset(
        {"pressure": (("time", "model"), np.ones((2, 1)), {"units": "Pa"})},
        {"time": np.array(["2016-01-01", "2016-01-02"], "datetime64[ns]"), "model": ["invented"], "depth": 3.0},
        {"notes": "a\nb", "count": np.int64(2)},
    )
    found = decode(encode(dataset))
    xr.testing.assert_identical(found, dataset)
    assert type(found.attrs["count"]) is np.int64


class Unlisted:
    pass


@pytest.mark.parametrize(
    "value",
    [Unlisted(), Unlisted, len, {1, 2}, b"x", 1j, np.array([Unlisted()])],
    ids=lambda value: type(value).__name__,
)
def test_nothing_else_is_stored(value: object) -> None:
    with pytest.raises(TypeError, match=r"not stored|not among the classes"):
        encode(value)


def archive(tree: object, **arrays: np.ndarray) -> bytes:
    file = io.BytesIO()
    np.savez(file, tree=np.frombuffer(json.dumps(tree).encode(), np.uint8), **arrays)
    return file.getvalue()


def test_no_other_class_is_made_and_no_object_unpickled() -> None:
    assert decode(archive({"tuple": [1, {"array": "a0"}]}, a0=np.ones(1))) == (1, np.ones(1))  # control
    with pytest.raises(KeyError):
        decode(archive({"class": "subprocess.Popen", "fields": {"args": ["true"]}}))
    with pytest.raises(KeyError):
        decode(archive({"eval": []}))
    with pytest.raises(ValueError, match="allow_pickle=False"):
        decode(archive({"array": "a0"}, a0=np.array([Unlisted()], dtype=object)))
