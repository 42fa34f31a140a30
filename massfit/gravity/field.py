"""Gravity fields as coefficients, each with the conventions it is written in."""

from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np
from numpy.typing import NDArray

from massfit.display import Described, Description
from massfit.errors import Fault, InputError

TideSystem = Literal["tide_free", "zero_tide", "mean_tide", "unknown"]
TIDE_SYSTEMS: tuple[str, ...] = get_args(TideSystem)


@dataclass(frozen=True)
class Conventions:
    """What a set of coefficients refers to.

    Parameters
    ----------
    gm : float
        Geocentric gravitational constant, m3 s-2.
    radius_m : float
        Reference radius, m.
    tide_system : str
        Of the permanent tide: "tide_free", "zero_tide", "mean_tide" or "unknown".
    """

    gm: float
    radius_m: float
    tide_system: TideSystem = "unknown"


@dataclass(frozen=True)
class Span:
    """The time a field stands for, both instants UTC.

    Parameters
    ----------
    start, end : numpy.datetime64
        First instant, and the first instant after.
    """

    start: np.datetime64
    end: np.datetime64

    @property
    def middle(self) -> np.datetime64:
        """Half way between start and end."""
        return self.start + (self.end - self.start) / 2

    @property
    def days(self) -> float:
        """Length, days."""
        return float((self.end - self.start) / np.timedelta64(1, "D"))

    def overlap_days(self, other: "Span") -> float:
        """Days that two spans share, 0 where they do not meet."""
        shared = min(self.end, other.end) - max(self.start, other.start)
        return max(0.0, float(shared / np.timedelta64(1, "D")))


@dataclass(frozen=True, eq=False, repr=False)
class GravityField(Described):
    """Fully normalised coefficients of the potential for one span of time.

    Parameters
    ----------
    name : str
        As the file calls the field.
    coefficients : (2, N + 1, N + 1) array
        C and S by degree and order, 4-pi normalised, without the Condon-Shortley phase.
    conventions : Conventions
    span : Span, optional
        None for a static field.
    sd : (2, N + 1, N + 1) array, optional
        Standard deviations as the file gives them.
    product : str
        What the field is, as its file says, for example "gravity_field".
    source : str
        The file, and the member of an archive.
    filtered : bool
        Whether the file says that it was smoothed or filtered.

    Raises
    ------
    InputError
        Coefficients of another shape.

    Examples
    --------
    >>> coefficients = np.zeros((2, 3, 3))
    >>> coefficients[0, 2, 0] = -4.8417e-4
    >>> span = Span(np.datetime64("2031-03-01"), np.datetime64("2031-04-01"))
    >>> GravityField("invented", coefficients, Conventions(3.986004415e14, 6378136.3, "tide_free"), span)
    Gravity field
      name         invented
      max degree   2
      span         2031-03-01 to 2031-04-01
      GM, radius   3.986004415e+14 m3 s-2, 6378136.3 m
      tide system  tide_free
    """

    name: str
    coefficients: NDArray[np.float64]
    conventions: Conventions
    span: Span | None = None
    sd: NDArray[np.float64] | None = None
    product: str = "gravity_field"
    source: str = ""
    filtered: bool = False

    def __post_init__(self) -> None:
        shape = self.coefficients.shape
        if len(shape) != 3 or shape[0] != 2 or shape[1] != shape[2]:
            allowed = "Must be (2, N + 1, N + 1)"
            raise InputError(Fault(self.source or self.name, "coefficients", f"the shape is {shape}", allowed))

    @property
    def max_degree(self) -> int:
        """Highest degree held."""
        return int(self.coefficients.shape[1]) - 1

    def describe(self) -> Description:
        """Name, span and conventions."""
        return "Gravity field", {
            "name": self.name,
            "max degree": str(self.max_degree),
            "span": "static" if self.span is None else f"{self.span.start} to {self.span.end}",
            "GM, radius": f"{self.conventions.gm:.9e} m3 s-2, {self.conventions.radius_m:.1f} m",
            "tide system": self.conventions.tide_system,
        }


@dataclass(frozen=True, eq=False)
class Periodic:
    """One sine or cosine term of a model that changes with time.

    Parameters
    ----------
    period_years : float
        In years of 365.25 days.
    cosine, sine : (2, M + 1, M + 1) array
        Amplitudes of cos and sin of 2 pi (t - epoch) / period; M is the highest degree that changes.
    cosine_sd, sine_sd : (2, M + 1, M + 1) array, optional
        Their standard deviations as the file gives them.
    """

    period_years: float
    cosine: NDArray[np.float64]
    sine: NDArray[np.float64]
    cosine_sd: NDArray[np.float64] | None = None
    sine_sd: NDArray[np.float64] | None = None


@dataclass(frozen=True, eq=False)
class GravityModel:
    """A static field with trend and periodic terms, about one epoch.

    Parameters
    ----------
    field : GravityField
        The field at the epoch; its span says when the model holds, None for always.
    epoch : numpy.datetime64
    trend : (2, M + 1, M + 1) array
        Per year of 365.25 days; M is the highest degree that changes.
    periodic : tuple of Periodic
    """

    field: GravityField
    epoch: np.datetime64
    trend: NDArray[np.float64]
    periodic: tuple[Periodic, ...] = ()
