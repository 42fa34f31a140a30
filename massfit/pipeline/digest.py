"""The SHA-256 of everything that a part of a run depends on."""

import hashlib
from collections.abc import Mapping, Set
from dataclasses import fields, is_dataclass
from datetime import date
from typing import Any

import numpy as np
import xarray as xr


def digest(value: Any) -> str:
    """SHA-256 of a value of any depth: equal values give the same one, in every process.

    Parameters
    ----------
    value : object
        Numbers, text, bytes, dates, arrays, Datasets, random generators, classes and functions by name, dataclasses,
        and tuples, lists, sets and mappings of them.

    Returns
    -------
    str
        64 hexadecimal digits.

    Raises
    ------
    TypeError
        A value whose content is not known here; hashing it by its address would be worse than stopping.

    Examples
    --------
    >>> digest({"a": (1, 2.0)}) == digest({"a": (1, 2.0)}), digest((1, 2)) == digest(((1,), 2))
    (True, False)
    """
    return _of(value).hex()


def _of(value: Any) -> bytes:
    """Digest of one value: its kind, then its content; parts enter as digests, so that none runs into the next."""
    kind, content = _content(value)
    return hashlib.sha256(b"\0".join([kind.encode(), *content])).digest()


def _content(value: Any) -> tuple[str, list[bytes]]:
    name = f"{type(value).__module__}.{type(value).__qualname__}"
    if isinstance(value, np.ndarray | np.generic):
        return _array_content(np.asarray(value))
    if value is None or isinstance(value, str | bool | int | float | complex | date):
        return name, [repr(value).encode()]
    if isinstance(value, bytes):
        return name, [hashlib.sha256(value).digest()]
    if isinstance(value, xr.Dataset):  # it is a Mapping too
        parts = {str(key): (item.dims, item.values, item.attrs) for key, item in value.variables.items()}
        return name, [_of(parts), _of(set(map(str, value.coords))), _of(value.attrs)]
    if isinstance(value, Mapping):
        return "mapping", sorted(_of((key, item)) for key, item in value.items())
    if isinstance(value, Set):
        return "set", sorted(_of(item) for item in value)
    if isinstance(value, tuple | list):
        return name, [_of(item) for item in value]
    if isinstance(value, np.random.Generator):
        return name, [_of(value.bit_generator.state)]
    if isinstance(value, type) or callable(value):
        return "name", [f"{value.__module__}.{value.__qualname__}".encode()]
    if is_dataclass(value):
        return name, [_of((field.name, getattr(value, field.name))) for field in fields(value)]
    raise TypeError(f"{name} has no digest")


def _array_content(array: np.ndarray[Any, Any]) -> tuple[str, list[bytes]]:
    if array.dtype.kind in "OT":
        return "words", [_of(list(array.shape)), _of(array.ravel().tolist())]
    content = hashlib.sha256(np.ascontiguousarray(array).tobytes()).digest()
    return "array", [array.dtype.str.encode(), repr(array.shape).encode(), content]
