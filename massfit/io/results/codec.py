"""Finished parts of a run as bytes and back: listed classes only, and reading runs no code."""

import io
import json
from collections.abc import Mapping
from dataclasses import fields, is_dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.diagnostics import DriftCurve, ResidualSpectrum, SiteDiagnostics, Whiteness, YearPhasor
from massfit.annual.fit import DriftFit, NoiseFit, SiteFit
from massfit.annual.fit import Estimate as NumberEstimate
from massfit.annual.noise import NoiseModel
from massfit.corrections.phasors import CorrectionPhasor
from massfit.posterior.convergence import Convergence
from massfit.posterior.importance import ScalePosterior
from massfit.records.record import Action, Calibrations, DailyRecord, LevelChange, TidalConstant
from massfit.results.estimate import SiteReduction
from massfit.site import Interval, Site

CLASSES: dict[str, type] = {
    f"{kind.__module__}.{kind.__qualname__}": kind
    for kind in (
        Action, Calibrations, Convergence, CorrectionPhasor, DailyRecord, DriftCurve, DriftFit, Interval, LevelChange,
        NoiseFit, NoiseModel, NumberEstimate, ResidualSpectrum, ScalePosterior, Site, SiteDiagnostics, SiteFit,
        SiteReduction, TidalConstant, Whiteness, YearPhasor,
    )
}  # fmt: skip
"""The only classes that are written and read."""

_TREE = "tree"

Arrays = dict[str, NDArray[Any]]


def encode(value: Any) -> bytes:
    """Write a value as an npz archive: the arrays, and their arrangement as JSON.

    Parameters
    ----------
    value : object
        Numbers, text, arrays (no objects but text), tuples, lists, mappings, Datasets, and the classes of `CLASSES`,
        one inside the other.

    Returns
    -------
    bytes

    Raises
    ------
    TypeError
        Anything else.

    Examples
    --------
    >>> decode(encode((1.5, {"day": np.datetime64("2016-01-01")})))
    (1.5, {'day': np.datetime64('2016-01-01')})
    """
    arrays: Arrays = {}
    tree = json.dumps(_pack(value, arrays))
    archive = io.BytesIO()
    np.savez(archive, allow_pickle=False, **{_TREE: np.frombuffer(tree.encode(), np.uint8), **arrays})
    return archive.getvalue()


def decode(data: bytes) -> Any:
    """Read what `encode` wrote; numbers keep every bit.

    Parameters
    ----------
    data : bytes

    Returns
    -------
    object

    Raises
    ------
    ValueError, LookupError, TypeError, OSError, zipfile.BadZipFile
        For anything that `encode` did not write.
    """
    with np.load(io.BytesIO(data), allow_pickle=False) as archive:
        arrays = {name: archive[name] for name in archive.files}
    return _unpack(json.loads(arrays.pop(_TREE).tobytes()), arrays)


def _pack(value: Any, arrays: Arrays) -> Any:
    if isinstance(value, np.ndarray | np.generic):
        return _pack_array(value, arrays)
    if value is None or isinstance(value, str | bool | int | float):
        return value
    if isinstance(value, list | tuple):
        return {"list" if isinstance(value, list) else "tuple": [_pack(item, arrays) for item in value]}
    if isinstance(value, xr.Dataset):
        return {"dataset": _pack_dataset(value, arrays)}
    if isinstance(value, Mapping):
        return {"mapping": [[_pack(key, arrays), _pack(item, arrays)] for key, item in value.items()]}
    name = f"{type(value).__module__}.{type(value).__qualname__}"
    if CLASSES.get(name) is not type(value) or not is_dataclass(value):
        raise TypeError(f"{name} is not among the classes that are stored")
    own = {field.name: _pack(getattr(value, field.name), arrays) for field in fields(value)}
    return {"class": name, "fields": own}


def _pack_array(value: NDArray[Any] | np.generic, arrays: Arrays) -> dict[str, Any]:
    array = np.asarray(value)
    if array.dtype.kind in "OT":
        words = array.ravel().tolist()
        if not all(isinstance(word, str) for word in words):
            raise TypeError("an array of objects that are not text is not stored")
        return {"words": words, "shape": list(array.shape)}
    name = f"a{len(arrays)}"
    arrays[name] = array
    return {"array": name} if isinstance(value, np.ndarray) else {"scalar": name}


def _pack_dataset(dataset: xr.Dataset, arrays: Arrays) -> dict[str, Any]:
    variables = [
        [str(name), list(variable.dims), _pack(variable.values, arrays), _pack(dict(variable.attrs), arrays)]
        for name, variable in dataset.variables.items()
    ]
    return {"variables": variables, "coords": sorted(map(str, dataset.coords)), "attrs": _pack(dataset.attrs, arrays)}


def _unpack(tree: Any, arrays: Arrays) -> Any:
    if not isinstance(tree, dict):
        return tree
    if "class" in tree:
        own = {name: _unpack(item, arrays) for name, item in tree["fields"].items()}
        return CLASSES[tree["class"]](**own)
    if "words" in tree:
        return np.array(tree["words"], dtype=object).reshape(tree["shape"])
    ((kind, content),) = tree.items()
    if kind == "array":
        return arrays[content]
    if kind == "scalar":
        return arrays[content][()]
    if kind == "mapping":
        return {_unpack(key, arrays): _unpack(item, arrays) for key, item in content}
    if kind == "dataset":
        return _unpack_dataset(content, arrays)
    return {"list": list, "tuple": tuple}[kind](_unpack(item, arrays) for item in content)


def _unpack_dataset(tree: dict[str, Any], arrays: Arrays) -> xr.Dataset:
    variables = {
        name: (dims, _unpack(values, arrays), _unpack(attrs, arrays)) for name, dims, values, attrs in tree["variables"]
    }
    return xr.Dataset(variables, attrs=_unpack(tree["attrs"], arrays)).set_coords(tree["coords"])
