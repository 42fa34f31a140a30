"""Long-period tides of second degree, in equilibrium with the tidal potential.

Lines and amplitudes: Cartwright & Tayler (1971) and Cartwright & Edden (1973). Arguments: the mean
longitudes that follow from the fundamental arguments of Simon et al. (1994), as adopted in the IERS
Conventions (2010), eq. 5.43. The difference of UTC from barycentric time (about 70 s) turns the fastest line by
0.04 degrees and is left out.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

GAMMA_2 = 0.6928
"""1 + k_2 - h_2 of the body tide: the part of the potential that the ocean sees on the yielding Earth."""

NORMALISATION = float(np.sqrt(5.0 / (4.0 * np.pi)))
"""Factor of the degree-2 zonal function in the normalisation of Cartwright & Tayler (1971)."""


@dataclass(frozen=True)
class Line:
    """One line of the zonal tide: ``height_m * cos(argument)``.

    Parameters
    ----------
    name : str
    multipliers : tuple of int
        Of s, h, p, N', p_s in the argument.
    height_m : float
        Amplitude H in the normalisation of Cartwright & Tayler, m.
    """

    name: str
    multipliers: tuple[int, int, int, int, int]
    height_m: float

    @property
    def period_days(self) -> float:
        """Mean period, days."""
        century = np.diff(mean_longitudes(np.array(["2000-01-01T12", "2100-01-01T12"], dtype="datetime64[ns]")), axis=0)
        return float(2.0 * np.pi * 36_525.0 / (century[0] @ np.array(self.multipliers)))

    def nodal_share(self, lines: "tuple[Line, ...]") -> float:
        """Part of the height by which the side lines one turn of the node away raise and lower it in 18.6 years.

        Parameters
        ----------
        lines : tuple of Line
            All lines that are summed.
        """
        beside = [(*self.multipliers[:3], self.multipliers[3] + turn, self.multipliers[4]) for turn in (-1, 1)]
        # a side line is modulated by its main line as little as the node's own line is by a constant
        larger = [line for line in lines if line.multipliers in beside and abs(line.height_m) < abs(self.height_m)]
        return float(sum(abs(line.height_m / self.height_m) for line in larger)) if any(self.multipliers[:3]) else 0.0


LINES = (
    Line("node", (0, 0, 0, 1, 0), 0.0279),
    Line("Sa", (0, 1, 0, 0, -1), -0.0049),
    Line("Ssa", (0, 2, 0, 0, 0), -0.0310),
    Line("MSm", (1, -2, 1, 0, 0), -0.0067),
    Line("Mm", (1, 0, -1, 0, 0), -0.0352),
    Line("MSf", (2, -2, 0, 0, 0), -0.0058),
    Line("Mf", (2, 0, 0, 0, 0), -0.0666),
    Line("2s+N'", (2, 0, 0, 1, 0), -0.0276),
    Line("Mtm", (3, 0, -1, 0, 0), -0.0127),
)
"""The lines above a quarter of a millimetre at the equator, and Mtm's part of them."""

# degrees at J2000.0, then arc seconds per power of Julian centuries: l, l', F, D, Omega of eq. 5.43
_FUNDAMENTAL = np.array(
    [
        [134.96340251, 1717915923.2178, 31.8792, 0.051635, -0.00024470],
        [357.52910918, 129596581.0481, -0.5532, 0.000136, -0.00001149],
        [93.27209062, 1739527262.8478, -12.7512, -0.001037, 0.00000417],
        [297.85019547, 1602961601.2090, -6.3706, 0.006593, -0.00003169],
        [125.04455501, -6962890.5431, 7.4722, 0.007702, -0.00005939],
    ]
)


def mean_longitudes(time: NDArray[np.datetime64]) -> NDArray[np.float64]:
    """Mean longitudes s, h, p, N' and p_s.

    Parameters
    ----------
    time : (n,) array of datetime64
        UTC.

    Returns
    -------
    (n, 5) array of float
        Rad, not reduced to one turn: Moon, Sun, lunar perigee, minus the lunar node, solar perigee.

    Examples
    --------
    >>> at_2000 = mean_longitudes(np.array(["2000-01-01T12:00"], dtype="datetime64[ns]"))
    >>> np.round(np.degrees(at_2000[0]) % 360.0, 2)
    array([218.32, 280.47,  83.35, 234.96, 282.94])
    """
    elapsed = np.asarray(time, dtype="datetime64[ns]") - np.datetime64("2000-01-01T12:00:00", "ns")
    centuries = elapsed.astype(np.int64) / (86_400e9 * 36_525.0)
    coefficients = _FUNDAMENTAL.copy()
    coefficients[:, 1:] /= 3600.0
    anomaly, sun_anomaly, latitude, elongation, node = np.radians(
        np.polynomial.polynomial.polyval(centuries, coefficients.T)
    )
    moon = latitude + node
    sun = moon - elongation
    return np.stack([moon, sun, moon - anomaly, -node, sun - sun_anomaly], axis=-1)


def zonal_height(time: NDArray[np.datetime64], *, lines: tuple[Line, ...] = LINES) -> NDArray[np.float64]:
    """Height by which the zonal function of degree 2 is multiplied to give the equilibrium tide.

    Parameters
    ----------
    time : (n,) array of datetime64
        UTC.
    lines : tuple of Line
        The lines that are summed.

    Returns
    -------
    (n,) array of float
        m: ``gamma_2 sqrt(5 / 4 pi) sum H cos(argument)``.

    Examples
    --------
    >>> time = np.arange("2016-01-01", "2017-01-01", dtype="datetime64[D]").astype("datetime64[ns]")
    >>> bool(abs(zonal_height(time)).max() < 0.1)
    True
    """
    multipliers = np.array([line.multipliers for line in lines], dtype=float)
    heights = np.array([line.height_m for line in lines])
    arguments = mean_longitudes(time) @ multipliers.T
    return np.asarray(GAMMA_2 * NORMALISATION * (np.cos(arguments) @ heights))


def line_table(response: float, *, lines: tuple[Line, ...] = LINES) -> list[dict[str, object]]:
    """Period and amplitude of every line at a site.

    Parameters
    ----------
    response : float
        Of the site per metre of :func:`zonal_height`, in any unit per metre.
    lines : tuple of Line

    Returns
    -------
    list of dict
        `line`, `period_days`, `amplitude` in the unit of the response, and `nodal_share`, the part by which the
        amplitude rises and falls with the node of the Moon's orbit.

    Examples
    --------
    >>> table = line_table(-0.5e3)  # the classical height on the equator, mm
    >>> [(row["line"], round(row["period_days"], 2), round(row["amplitude"], 1)) for row in table[4:7]]
    [('Mm', 27.55, 7.7), ('MSf', 14.77, 1.3), ('Mf', 13.66, 14.6)]
    """
    scale = abs(response) * GAMMA_2 * NORMALISATION
    return [
        {
            "line": line.name,
            "period_days": line.period_days,
            "amplitude": scale * abs(line.height_m),
            "nodal_share": line.nodal_share(lines),
        }
        for line in lines
    ]


def zonal_function(latitude_deg: NDArray[np.float64] | float) -> NDArray[np.float64]:
    """Legendre function of degree 2 of the sine of latitude: 1 at the poles, -1/2 at the equator.

    Parameters
    ----------
    latitude_deg : (...,) array
        Degrees north.

    Returns
    -------
    (...,) array of float

    Examples
    --------
    >>> float(zonal_function(0.0))
    -0.5
    """
    return np.asarray(1.5 * np.sin(np.radians(latitude_deg)) ** 2 - 0.5)
