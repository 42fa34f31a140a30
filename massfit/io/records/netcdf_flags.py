"""Quality flags that a CF NetCDF file ties to its pressure."""

from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr

from massfit.errors import Fault, InputError
from massfit.io.network.reading import did_you_mean, nearest
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.flags import NO_FLAGS
from massfit.io.records.samples import Flags
from massfit.records.record import Action

_AGGREGATE = "aggregate_quality_flag"
_KINDS = ("status_flag", "quality_flag")
"""Ends of the CF standard names of flags, aggregate_quality_flag and those of single tests among them."""


@dataclass(frozen=True)
class FlagNames:
    """Variables whose flags are used, and what is said of others.

    Parameters
    ----------
    used : tuple of str
    actions : tuple of Action
    """

    used: tuple[str, ...] = ()
    actions: tuple[Action, ...] = ()


def flag_names(dataset: xr.Dataset, variable: xr.DataArray, entry: DeploymentFile) -> FlagNames:
    """Find the flags of a variable: the stated ones, else those that its `ancillary_variables` names.

    Of several the aggregate is used where there is one, and otherwise every one of them.

    Parameters
    ----------
    dataset : xarray.Dataset
        Not decoded.
    variable : xarray.DataArray
        Pressure.
    entry : DeploymentFile
        Its `flag_variable`.

    Returns
    -------
    FlagNames

    Raises
    ------
    InputError
        No such variable, of other dimensions than the pressure, or with flags that are bits.
    """
    fitting = [str(name) for name, data in dataset.variables.items() if _may_be_flags(data) and name != variable.name]
    same = [name for name in fitting if _wide(dataset[name]) == _wide(variable)]
    if entry.flag_variable is not None:
        if entry.flag_variable == NO_FLAGS:
            return FlagNames()
        if entry.flag_variable not in same:
            raise InputError(_absent(dataset, variable, entry, same))
        return FlagNames((_numbered(dataset, entry.flag_variable, entry),))
    tied = str(variable.attrs.get("ancillary_variables", "")).split()
    flags = [name for name in tied if name in same and _is_flag(dataset[name])]
    aggregate = [name for name in flags if dataset[name].attrs.get("standard_name") == _AGGREGATE]
    used = tuple(_numbered(dataset, name, entry) for name in (aggregate or flags))
    return FlagNames(used, _unused(dataset, same, used, tied))


def flags_of(data: xr.DataArray, entry: DeploymentFile) -> Flags:
    """Read flags with their meanings (CF Conventions 1.13, section 3.5).

    Parameters
    ----------
    data : xarray.DataArray
        Not decoded, of the wanted samples.
    entry : DeploymentFile

    Returns
    -------
    Flags
        NaN where the value is the fill value.

    Raises
    ------
    InputError
        As many meanings as values are wanted.
    """
    values = data.values.astype(np.float64).ravel()
    words = str(data.attrs.get("flag_meanings", "")).replace(",", " ").split()
    numbers = _numbers(data.attrs.get("flag_values"))
    for key in ("_FillValue", "missing_value"):
        fill = _numbers(data.attrs.get(key))
        values[np.isin(values, [number for number in fill if number not in numbers])] = np.nan
    if words and numbers and len(words) != len(numbers):
        problem = f"there are {len(numbers)} flag_values and {len(words)} flag_meanings"
        action = 'Correct them, or state `keep_flags` and drop one; flag_variable = "none" uses no flags'
        raise InputError(Fault(entry.file, str(data.name), problem, "Must be as many", action))
    return Flags(str(data.name), values, dict(zip(numbers, words, strict=True)) if words and numbers else {})


def _numbers(values: Any) -> list[int]:
    """Flag values of an attribute, which some files write as text."""
    if values is None:
        return []
    if isinstance(values, str):
        values = values.replace(",", " ").replace("b", " ").split()
    return [int(float(value)) for value in np.atleast_1d(np.asarray(values)).tolist()]


def _may_be_flags(data: xr.Variable) -> bool:
    return data.dtype.kind in "iuf" and bool(data.dims)


def _wide(data: xr.DataArray) -> set[str]:
    return {str(dim) for dim in data.dims if data.sizes[dim] > 1}


def _is_flag(data: xr.DataArray) -> bool:
    standard_name = str(data.attrs.get("standard_name", ""))
    return standard_name.endswith(_KINDS) or "flag_values" in data.attrs or "flag_masks" in data.attrs


def _numbered(dataset: xr.Dataset, name: str, entry: DeploymentFile) -> str:
    """Refuse flags that are bits, of which one number holds several."""
    if "flag_masks" in dataset[name].attrs and entry.keep_flags is None:
        problem = "its flags are bits (flag_masks), of which a sample may have several"
        action = 'State `keep_flags`, the numbers of good samples, or flag_variable = "none"'
        raise InputError(Fault(entry.file, name, problem, "Read by default are flag_values", action))
    return name


def _absent(dataset: xr.Dataset, variable: xr.DataArray, entry: DeploymentFile, same: list[str]) -> Fault:
    name = str(entry.flag_variable)
    allowed = f"Must be numbers along {variable.dims}: {', '.join(same) or 'there are none'}"
    if name in dataset.variables:
        problem = f"{name!r} is no variable of numbers along the dimensions of {variable.name!r}"
        return Fault(entry.file, "flag_variable", problem, allowed, "Correct it")
    action = did_you_mean(nearest(name, same), "Correct it")
    return Fault(entry.file, "flag_variable", f"{name!r} is not in the file", allowed, action)


def _unused(dataset: xr.Dataset, same: list[str], used: tuple[str, ...], tied: list[str]) -> tuple[Action, ...]:
    """Say which flags are there and not used: those that nothing ties to the pressure."""
    if used:
        return ()
    misfits = [name for name in tied if name in dataset.variables and name not in same and _is_flag(dataset[name])]
    others = [name for name in same if _is_flag(dataset[name]) and name not in tied]
    others = [name for name in others if not any(name in _tied(data) for data in dataset.variables.values())]
    notes = ((misfits, "not of the dimensions of the pressure"), (others, "`flag_variable` may name it"))
    return tuple(Action("flags not used", len(names), f"{', '.join(names)}: {why}") for names, why in notes if names)


def _tied(data: xr.Variable) -> list[str]:
    return str(data.attrs.get("ancillary_variables", "")).split()
