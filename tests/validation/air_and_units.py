"""Air pressure over the ocean, the area of the ocean, and units."""

from massfit.constants import FRESH_WATER_DENSITY, KG_PER_GT, PASCAL_PER_HPA, SEA_WATER_DENSITY, STANDARD_GRAVITY
from massfit.fingerprint.ocean import OceanFunction
from massfit.phasor import peak_days, phasor_from_peak
from validation.registry import Group, Row

AREA = "Air pressure and units"


def air_left_in() -> list[Row]:
    water = phasor_from_peak(0.85, 282.0)  # 10 October, counted from 0
    both = water + phasor_from_peak(0.63, 195.5)  # 15 July
    return [
        Row("amplitude / hPa", 1.10, abs(both), 0.01, ".2f"),
        Row("peak / days after 1 January", 247.0, float(peak_days(both)), 1.0, ".1f"),
    ]


def units() -> list[Row]:
    per_hpa = PASCAL_PER_HPA / STANDARD_GRAVITY
    area = OceanFunction.builtin().area_m2
    return [
        Row("1 hPa in mm of fresh water", 10.197, 1000.0 * per_hpa / FRESH_WATER_DENSITY, 5e-4, ".3f"),
        Row("1 hPa in mm of sea water", 9.948, 1000.0 * per_hpa / SEA_WATER_DENSITY, 5e-4, ".3f"),
        Row("1 hPa in Gt over 3.6184e14 m²", 3689.7, per_hpa * 3.6184e14 / KG_PER_GT, 0.05, ".1f"),
        Row("area of our ocean / 10¹⁴ m²", 3.6184, area / 1e14, 0.0181, ".4f"),
    ]


GROUPS = (
    Group("Ocean-mean air pressure left in", "closed form after a published size",
          "0.63 hPa, highest in northern summer (15 July taken): Dorandeu & Le Traon (1999), J. Atmos. Oceanic "
          "Technol. 16, 1279-1283; added to 0.85 hPa that peak on 10 October it gives 1.10 hPa on 5 September",
          "two decimals and whole days are written", air_left_in),
    Group("Units", "closed form", "standard gravity 9.80665 m s⁻²; textbook area of the ocean 3.6184e14 m²",
          "the digits written; the area of an ocean depends on which marginal waters count, within 0.5 %", units),
)  # fmt: skip
