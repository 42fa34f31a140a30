"""Built-in annual load patterns of water, snow and ice on land.

Each member is a sum of smooth regional patterns. Regions, sizes and months are
rounded (from memory) after the basin cycles that satellite gravity sees: Tapley
et al. (2004), Schmidt et al. (2006), Syed et al. (2008), Luthcke et al. (2013) for
the ice sheets; where these give nothing, common practice. The members are equally
plausible variants of that one picture; none is fitted to anything.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field
from difflib import get_close_matches
from typing import Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.pattern import LoadPattern
from massfit.phasor import phasor_from_peak

Kind = Literal["snow", "rain", "monsoon", "ice"]

_REFERENCE = "built-in; rounded after Tapley et al. 2004, Schmidt et al. 2006, Syed et al. 2008, Luthcke et al. 2013"


class Region(NamedTuple):
    """A region: place, half widths (deg), amplitude (mm of water) and day of the maximum."""

    name: str
    kind: Kind
    latitude: float
    longitude: float
    half_height: float
    half_width: float
    amplitude: float
    day: float


REGIONS = (
    Region("Alaska and Yukon", "snow", 62, -146, 4, 9, 110, 88),
    Region("Mackenzie and northern Canada", "snow", 61, -110, 6, 13, 55, 88),
    Region("Rocky Mountains and Columbia", "snow", 48, -118, 6, 6, 110, 78),
    Region("Quebec and Labrador", "snow", 53, -72, 6, 10, 90, 83),
    Region("Mississippi and eastern United States", "snow", 38, -87, 6, 9, 60, 78),
    Region("western and central Europe", "snow", 48, 12, 5.5, 12, 65, 60),
    Region("Scandinavia and north-west Russia", "snow", 62, 30, 6, 14, 80, 73),
    Region("Volga and Dnieper", "snow", 54, 43, 6, 12, 85, 73),
    Region("Anatolia and the Zagros", "snow", 37, 43, 4, 8, 70, 73),
    Region("Pamir and Tien Shan", "snow", 39, 71, 4, 7, 55, 88),
    Region("Ob", "snow", 59, 70, 7, 10, 75, 88),
    Region("Yenisey", "snow", 61, 92, 8, 9, 65, 93),
    Region("Lena", "snow", 62, 122, 7, 13, 40, 98),
    Region("Kamchatka and Kolyma", "snow", 63, 158, 5, 11, 65, 98),
    Region("Eurasian plains and forests", "snow", 54, 75, 7, 32, 35, 80),
    Region("plains of North America", "snow", 47, -98, 6, 10, 45, 80),
    Region("Patagonia", "snow", -46, -73, 6, 2, 90, 250),
    Region("Amazon", "rain", -5, -61, 5.5, 7.5, 220, 110),
    Region("Tocantins and eastern Brazil", "rain", -11, -48, 5, 5, 150, 90),
    Region("Orinoco", "rain", 6, -67, 3, 4, 140, 245),
    Region("Parana", "rain", -21, -53, 5, 5, 70, 95),
    Region("Zambezi and southern Congo", "rain", -13, 25, 5, 9, 140, 85),
    Region("northern Congo and Chari", "rain", 8, 20, 4, 7, 90, 280),
    Region("Madagascar", "rain", -18, 46, 4, 2, 110, 75),
    Region("Sahel and Niger", "monsoon", 11, -4, 3.5, 9, 95, 270),
    Region("Ethiopia and Blue Nile", "monsoon", 10, 37, 3.5, 4, 100, 260),
    Region("Ganges and Brahmaputra", "monsoon", 25, 87, 3.5, 7, 150, 255),
    Region("southern India", "monsoon", 18, 79, 5, 4, 110, 265),
    Region("Indochina", "monsoon", 17, 102, 5, 5, 160, 265),
    Region("southern China", "monsoon", 28, 111, 4, 7, 35, 200),
    Region("northern Australia", "monsoon", -15, 133, 3.5, 8, 120, 80),
    Region("southern Greenland", "ice", 67, -42, 6, 7, 80, 130),
    Region("northern Greenland", "ice", 77, -42, 4, 14, 30, 130),
    Region("West Antarctica", "ice", -75, -100, 4, 22, 40, 270),
    Region("coast of East Antarctica", "ice", -69, 90, 3, 45, 25, 270),
)
"""Regions of the built-in patterns."""


@dataclass(frozen=True)
class _Variant:
    """One member: factors and delays (days) by kind, and a factor on the widths."""

    name: str
    factor: dict[Kind, float] = field(default_factory=dict)
    delay: dict[Kind, float] = field(default_factory=dict)
    widen: float = 1.0


_VARIANTS = (
    _Variant("nominal"),
    _Variant("snow-rich", {"snow": 1.25, "rain": 0.9}),
    _Variant("rain-rich", {"rain": 1.2, "snow": 0.9}),
    _Variant("strong-monsoon", {"monsoon": 1.2, "snow": 1.1, "rain": 1.1}),
    _Variant("slow-rivers", {"monsoon": 0.9}, {"rain": 15.0, "snow": 5.0}),
    _Variant("wide-basins", widen=1.3),
    _Variant("large-ice", {"ice": 2.0, "snow": 0.95}),
)

BUILTIN_NAMES = tuple(variant.name for variant in _VARIANTS)
"""Names of the built-in members."""


def builtin_loads(names: Sequence[str] = ("all",)) -> tuple[LoadPattern, ...]:
    """Built-in members of the load ensemble.

    Parameters
    ----------
    names : sequence of str
        Names out of `BUILTIN_NAMES`, or "all" for every one.

    Returns
    -------
    tuple of LoadPattern
        On cells of one degree, kg m-2 of whole-cell area, zero over the ocean, in
        the order asked for and each once.

    Raises
    ------
    InputError
        A name that is not known.

    Examples
    --------
    >>> [pattern.name for pattern in builtin_loads(("nominal", "snow-rich"))]
    ['nominal', 'snow-rich']
    """
    known = {variant.name: variant for variant in _VARIANTS}
    wanted = dict.fromkeys(name for asked in names for name in (BUILTIN_NAMES if asked == "all" else (asked,)))
    if faults := [_unknown(name) for name in wanted if name not in known]:
        raise InputError(faults)
    latitude, longitude = np.arange(-89.5, 90.0), np.arange(-179.5, 180.0)
    ocean = OceanFunction.builtin()
    land = 1.0 - regrid(ocean.fraction, ocean.cells, CellGrid.from_centres(latitude, longitude))
    return tuple(
        LoadPattern(name, latitude, longitude, land * _total(known[name], latitude, longitude), _REFERENCE)
        for name in wanted
    )


def _total(variant: _Variant, latitude: NDArray[np.float64], longitude: NDArray[np.float64]) -> NDArray[np.complex128]:
    total = np.zeros((latitude.size, longitude.size), dtype=complex)
    for region in REGIONS:
        amplitude = region.amplitude * variant.factor.get(region.kind, 1.0) / variant.widen**2
        phasor = phasor_from_peak(amplitude, region.day + variant.delay.get(region.kind, 0.0))
        north = (latitude - region.latitude) / (variant.widen * region.half_height)
        turn = np.mod(longitude - region.longitude + 180.0, 360.0) - 180.0
        east = turn / (variant.widen * region.half_width)
        total += phasor * np.outer(np.exp(-0.5 * north**2), np.exp(-0.5 * east**2))
    return total


def _unknown(name: str) -> Fault:
    near = get_close_matches(name, BUILTIN_NAMES, 1)
    action = f"Did you mean {near[0]!r}?" if near else ""
    allowed = f"Known are {', '.join(BUILTIN_NAMES)} and all"
    return Fault("builtin", name, "there is no such built-in load", allowed, action)
