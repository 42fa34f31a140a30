"""One annual cycle in the words of others: what is in it, and the unit it is printed in."""

from collections.abc import Mapping
from dataclasses import dataclass

from massfit.constants import (
    FRESH_WATER_DENSITY,
    KG_PER_GT,
    PASCAL_PER_HPA,
    SEA_WATER_DENSITY,
    STANDARD_GRAVITY,
)
from massfit.phasor import peak_days

TEXTBOOK_OCEAN_M2 = 3.6184e14
"""Area of the ocean that is widely printed (from memory), m2."""

_MM = 1000.0


@dataclass(frozen=True)
class Definition:
    """One way to state a cycle.

    Parameters
    ----------
    name : str
    quantity : str
        What the phasor is of.
    phasor : complex
        Pa.
    """

    name: str
    quantity: str
    phasor: complex


def redefined(phasor: complex, parts: Mapping[str, tuple[str, complex]]) -> tuple[Definition, ...]:
    """Re-express a cycle with each part put in or taken out.

    Parameters
    ----------
    phasor : complex
        Ocean-mean pressure of the ocean's water, Pa.
    parts : mapping of str to (str, complex)
        Under a name: what the quantity is with the part in it, and the part's phasor, Pa.

    Returns
    -------
    tuple of Definition
        The cycle itself first.

    Examples
    --------
    >>> found = redefined(85.0 + 0j, {"air": ("water and the air above", -63.0 + 0j)})
    >>> [(each.name, each.phasor.real) for each in found]
    [('as it is', 85.0), ('with air', 22.0)]
    """
    first = Definition("as it is", "water of the whole ocean", phasor)
    return (first, *(Definition(f"with {name}", text, phasor + part) for name, (text, part) in parts.items()))


def in_units(phasor: complex, ocean_area_m2: float) -> dict[str, float]:
    """Amplitude of a cycle in every unit in use.

    Parameters
    ----------
    phasor : complex
        Pa.
    ocean_area_m2 : float
        Of the ocean function.

    Returns
    -------
    dict of str to float
        With the unit in each name, and the peak day.

    Examples
    --------
    >>> found = in_units(100.0 + 0j, 3.6263e14)
    >>> round(found["water_mm"], 3), round(found["sea_water_mm"], 2), round(found["mass_textbook_area_gt"], 1)
    (10.197, 9.95, 3689.7)
    """
    layer = abs(phasor) / STANDARD_GRAVITY
    return {
        "amplitude_hpa": abs(phasor) / PASCAL_PER_HPA,
        "peak_day": float(peak_days(phasor)),
        "water_mm": _MM * layer / FRESH_WATER_DENSITY,
        "sea_water_mm": _MM * layer / SEA_WATER_DENSITY,
        "water_peak_to_trough_mm": 2.0 * _MM * layer / FRESH_WATER_DENSITY,
        "mass_gt": layer * ocean_area_m2 / KG_PER_GT,
        "mass_textbook_area_gt": layer * TEXTBOOK_OCEAN_M2 / KG_PER_GT,
    }
