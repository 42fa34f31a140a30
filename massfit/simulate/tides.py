"""Short tides of an invented site.

Lines by Doodson numbers with the mean rates of Meeus (1991, ch. 22 and 47), and the
nodal factors of Pugh (1987, table 4.3). Amplitudes are drawn; they are nobody's tide.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.constants import SEA_WATER_DENSITY, STANDARD_GRAVITY

# degrees at 2000-01-01 12:00 and degrees a day: Moon, Sun, lunar perigee, lunar node
_EPOCH = np.array([218.3164477, 280.46646, 83.3532465, 125.04452])
_RATE = np.array([13.17639648, 0.98564736, 0.11140353, -0.05295377])


@dataclass(frozen=True)
class Line:
    """A short tide: multiples of (lunar time, s, h, p), relative size and nodal factor."""

    name: str
    multiples: tuple[int, int, int, int]
    leader: str
    ratio: float
    amplitude_nodal: tuple[float, float] = (1.0, 0.0)
    phase_nodal_deg: float = 0.0


@dataclass(frozen=True)
class DrawnLine:
    """A short tide of one site.

    Parameters
    ----------
    line : Line
    amplitude : float
        Metres, of 18.6 years.
    lag : float
        Radians.
    """

    line: Line
    amplitude: float
    lag: float


_LUNAR = (1.0, -0.037)
LINES = (
    Line("M2", (2, 0, 0, 0), "M2", 1.0, _LUNAR, -2.1),
    Line("S2", (2, 2, -2, 0), "M2", 0.42),
    Line("N2", (2, -1, 0, 1), "M2", 0.20, _LUNAR, -2.1),
    Line("K2", (2, 2, 0, 0), "M2", 0.115, (1.024, 0.286), -17.7),
    Line("2N2", (2, -2, 0, 2), "M2", 0.027, _LUNAR, -2.1),
    Line("NU2", (2, -1, 2, -1), "M2", 0.038, _LUNAR, -2.1),
    Line("T2", (2, 2, -3, 0), "M2", 0.025),
    Line("K1", (1, 1, 0, 0), "K1", 1.0, (1.006, 0.115), -8.9),
    Line("O1", (1, -1, 0, 0), "K1", 0.70, (1.009, 0.187), 10.8),
    Line("P1", (1, 1, -2, 0), "K1", 0.33),
    Line("Q1", (1, -2, 0, 1), "K1", 0.135, (1.009, 0.187), 10.8),
    Line("S1", (1, 1, -1, 0), "K1", 0.03),
    Line("M4", (4, 0, 0, 0), "M2", 0.003, (1.0, -0.074), -4.2),
)
# median metres of the leading line, and the log-normal spread between sites
_LEADERS = {"M2": (0.28, 0.5), "K1": (0.14, 0.5)}


def short_tides(rng: np.random.Generator, time: NDArray[np.datetime64]) -> NDArray[np.float64]:
    """Diurnal and shorter tides of one site, with their nodal modulation.

    Parameters
    ----------
    rng : numpy.random.Generator
    time : (n,) array of datetime64
        UTC.

    Returns
    -------
    (n,) array
        Pa.

    Examples
    --------
    >>> time = np.datetime64("2015-01-01T00:30") + np.timedelta64(1, "h") * np.arange(48)
    >>> float(np.ptp(short_tides(np.random.default_rng(3), time))) > 1000.0
    True
    """
    return tide_at(draw_tides(rng), time)


def draw_tides(rng: np.random.Generator) -> tuple[DrawnLine, ...]:
    """Draw the short tides of one site."""
    leaders = {name: median * np.exp(spread * rng.standard_normal()) for name, (median, spread) in _LEADERS.items()}
    # the response of a real ocean varies smoothly from line to line; 10 % is common practice
    return tuple(
        DrawnLine(
            line,
            amplitude=leaders[line.leader] * line.ratio * np.exp(0.1 * rng.standard_normal()),
            lag=rng.uniform(0.0, 2.0 * np.pi),
        )
        for line in LINES
    )


def tide_at(lines: Sequence[DrawnLine], time: NDArray[np.datetime64]) -> NDArray[np.float64]:
    """Diurnal and shorter tides that were drawn, with their nodal modulation.

    Parameters
    ----------
    lines : sequence of DrawnLine
    time : (n,) array of datetime64
        UTC.

    Returns
    -------
    (n,) array
        Pa.
    """
    elapsed = np.asarray(time, dtype="datetime64[ns]") - np.datetime64("2000-01-01T12:00", "ns")
    days = elapsed.astype(np.int64) / 86_400e9
    moon, sun, perigee, node = np.deg2rad(_EPOCH[:, None] + _RATE[:, None] * days)
    # Doodson's lunar time: the Moon's hour angle at Greenwich, counted from midnight
    lunar_time = 2.0 * np.pi * (days + 0.5) + sun - moon
    arguments = np.stack([lunar_time, moon, sun, perigee])
    height = np.zeros(days.size)
    for drawn in lines:
        size, swing = drawn.line.amplitude_nodal
        turn = np.deg2rad(drawn.line.phase_nodal_deg) * np.sin(node)
        angle = np.asarray(drawn.line.multiples) @ arguments + turn - drawn.lag
        height += drawn.amplitude * (size + swing * np.cos(node)) * np.cos(angle)
    return height * SEA_WATER_DENSITY * STANDARD_GRAVITY
