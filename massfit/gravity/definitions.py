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
class Part:
    """What other definitions leave in.

    Parameters
    ----------
    quantity : str
        What a cycle is of with the part in it.
    phasor : complex
        Of the part, Pa.
    at_recorders : bool
        Whether it is the mean over the recorders of something that has no mean over the ocean, such as a tide: then
        only the recorders' own answer can hold it.
    """

    quantity: str
    phasor: complex
    at_recorders: bool = False


@dataclass(frozen=True)
class Definition:
    """One way to state a cycle.

    Parameters
    ----------
    determination : str
        Whose cycle.
    name : str
    quantity : str
        What the phasor is of.
    phasor : complex
        Pa.
    """

    determination: str
    name: str
    quantity: str
    phasor: complex


def redefined(
    determination: str, phasor: complex, parts: Mapping[str, Part], *, recorders: bool
) -> tuple[Definition, ...]:
    """Re-express a cycle with each part put in.

    Parameters
    ----------
    determination : str
        Label.
    phasor : complex
        Ocean-mean pressure of the ocean's water, Pa.
    parts : mapping of str to Part
        Under the name of each.
    recorders : bool
        Whether the cycle is that of the recorders.

    Returns
    -------
    tuple of Definition
        The cycle itself first.

    Examples
    --------
    >>> parts = {"air": Part("water and the air above", -63.0), "Sa": Part("water and Sa", 3.0, at_recorders=True)}
    >>> found = redefined("satellites", 85.0 + 0j, parts, recorders=False)
    >>> [(each.name, each.phasor.real) for each in found]
    [('as it is', 85.0), ('with air', 22.0)]
    """
    first = Definition(determination, "as it is", "water of the whole ocean", phasor)
    put_in = [
        Definition(determination, f"with {name}", part.quantity, phasor + part.phasor)
        for name, part in parts.items()
        if recorders or not part.at_recorders
    ]
    return (first, *put_in)


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
