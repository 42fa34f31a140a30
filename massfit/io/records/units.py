"""Unit spellings of pressure and their factors to pascal: a closed table.

General unit parsers read "db" as an area and "m" as a length; here a spelling
is a pressure or it is refused.
"""

from difflib import get_close_matches

from massfit.constants import STANDARD_GRAVITY
from massfit.errors import Fault, InputError

_POUND_PER_SQUARE_INCH = 0.45359237 * STANDARD_GRAVITY / 0.0254**2
"""Pa; avoirdupois pound and inch by definition, 6894.757 Pa (NIST SP 811, appendix B.8)."""

_PASCAL = {
    "Pa": 1.0,
    "hPa": 1.0e2,
    "kPa": 1.0e3,
    "mbar": 1.0e2,
    "dbar": 1.0e4,
    "decibar": 1.0e4,
    "bar": 1.0e5,
    "psi": _POUND_PER_SQUARE_INCH,
    # the offset of an absolute gauge is a constant, and every deployment has its own
    "psia": _POUND_PER_SQUARE_INCH,
}
_WATER_HEIGHT_M = {"mm": 1.0e-3, "cm": 1.0e-2, "m": 1.0}

SPOKEN_UNITS = {
    "pascal": "Pa", "pascals": "Pa", "n/m2": "Pa", "n m-2": "Pa", "hectopascal": "hPa", "hectopascals": "hPa",
    "kilopascal": "kPa", "kilopascals": "kPa", "millibar": "mbar", "millibars": "mbar", "mb": "mbar", "db": "dbar",
    "decibars": "dbar", "bars": "bar", "psig": "psi", "lbf/in2": "psi", "pounds per square inch": "psi",
    "mm h2o": "mm", "mmh2o": "mm", "cm h2o": "cm", "cmh2o": "cm", "m h2o": "m", "mh2o": "m", "centimeter": "cm",
    "centimeters": "cm", "centimetre": "cm", "centimetres": "cm", "millimeter": "mm", "millimeters": "mm",
    "millimetre": "mm", "millimetres": "mm", "meter": "m", "meters": "m", "metre": "m", "metres": "m",
}  # fmt: skip
"""Other words for the same, in small letters: not read, since each has been used for something else, but suggested."""

PRESSURE_UNITS = (*_PASCAL, *_WATER_HEIGHT_M)
"""Every spelling that is read; the last three are heights of water."""


def pascal_per_unit(units: str, *, density_kg_m3: float | None = None, source: str = "", name: str = "units") -> float:
    """Pascals in one unit of pressure.

    Parameters
    ----------
    units : str
        One of `PRESSURE_UNITS`, in this spelling.
    density_kg_m3 : float, optional
        Density of the water, kg m-3; needed for a height of water.
    source, name : str
        File and variable that an error names.

    Returns
    -------
    float
        Pa per unit; heights of water at standard gravity.

    Raises
    ------
    InputError
        For a spelling that is not in the table and a height without density.

    Examples
    --------
    >>> pascal_per_unit("dbar")
    10000.0
    >>> round(pascal_per_unit("psi"), 3)
    6894.757
    >>> round(pascal_per_unit("cm", density_kg_m3=1025.0), 4)
    100.5182
    """
    spelling = units.strip()
    if spelling in _PASCAL:
        return _PASCAL[spelling]
    if spelling not in _WATER_HEIGHT_M:
        raise InputError(Fault(source, name, f"unknown unit {units!r}", _allowed(), _suggestion(spelling)))
    if density_kg_m3 is None or not density_kg_m3 > 0:
        problem = f"{units!r} is a height of water and its density is {density_kg_m3!r}"
        raise InputError(Fault(source, name, problem, "Must be positive, kg m-3", "State density_kg_m3"))
    return _WATER_HEIGHT_M[spelling] * density_kg_m3 * STANDARD_GRAVITY


def _allowed() -> str:
    return "Must be one of " + ", ".join(PRESSURE_UNITS)


def _suggestion(spelling: str) -> str:
    folded = SPOKEN_UNITS | {unit.casefold(): unit for unit in PRESSURE_UNITS}
    word = " ".join(spelling.casefold().split())
    near = [word] if word in folded else get_close_matches(word, folded, n=1, cutoff=0.75)
    return f"Did you mean {folded[near[0]]!r}?" if near else "Convert the data to one of these"
