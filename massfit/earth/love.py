"""Load Love numbers of a layered Earth, in a stated frame of degree one."""

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from massfit.constants import GRAVITATIONAL_CONSTANT
from massfit.display import Described, Description
from massfit.earth.profile import EarthProfile, prem
from massfit.earth.propagate import load_response
from massfit.errors import Fault, InputError

FloatArray = NDArray[np.float64]
DegreeOneFrame = Literal["CE", "CM", "CF"]

FRAMES: tuple[DegreeOneFrame, ...] = ("CE", "CM", "CF")
"""Origins of degree one: centre of mass of the solid Earth, of the whole Earth, centre of the surface figure."""

# largest step in (n + 2) ln r; halving it moves no PREM number by more than 1e-7 of itself
_STEP = 0.5


@dataclass(frozen=True, eq=False, repr=False)
class LoveNumbers(Described):
    """Load Love numbers h', l', k' by degree.

    Under a load whose own potential at the surface is phi in degree n, the surface rises by
    h' phi / g, moves sideways by l' / g times the surface gradient of phi, and the potential of
    the deformed Earth adds k' phi.

    Parameters
    ----------
    h, l, k : (max_degree + 1,) arrays
        Indexed by degree, not multiplied by it; index 0 is zero. Read-only.
    frame : str
        Origin of degree one: ``"CE"``, ``"CM"`` or ``"CF"``.
    profile : str
        Name of the Earth profile.
    reference : str
        Source of the profile.
    integrated_to : int
        Degrees above it carry the limit: h', n l' and n k' as at this degree.

    Examples
    --------
    >>> love = love_numbers(max_degree=2)
    >>> love.k.round(3)
    array([ 0.   ,  0.026, -0.306])
    >>> love.in_frame("CM").k.round(3)
    array([ 0.   , -1.   , -0.306])
    """

    h: FloatArray
    l: FloatArray  # noqa: E741 - the usual name of the number
    k: FloatArray
    frame: DegreeOneFrame
    profile: str
    reference: str
    integrated_to: int

    @property
    def max_degree(self) -> int:
        """Highest degree."""
        return len(self.h) - 1

    def describe(self) -> Description:
        """Profile, frame, and some of the numbers."""
        degrees = [degree for degree in (1, 2, 3, 10, 100) if degree <= self.max_degree]
        some = {f"degree {n}": f"h' {self.h[n]:.4f}, l' {self.l[n]:.4f}, k' {self.k[n]:.4f}" for n in degrees}
        return f"Load Love numbers to degree {self.max_degree}", {
            "profile": self.profile,
            "degree one": f"in {self.frame}",
            **some,
        }

    def in_frame(self, frame: DegreeOneFrame) -> "LoveNumbers":
        """Move the origin of degree one.

        A shift of the origin takes the same amount off h', l' and 1 + k' of degree 1
        (Blewitt 2003), so that 1 + k' - h' is the same in every frame.

        Parameters
        ----------
        frame : str
            ``"CE"``, where k' = 0; ``"CM"``, where k' = -1; ``"CF"``, where h' + 2 l' = 0.

        Returns
        -------
        LoveNumbers

        Raises
        ------
        InputError
            There is no such frame.
        """
        if frame not in FRAMES:
            raise InputError(_frame_fault(frame))
        shift = {
            "CE": float(self.k[1]),
            "CM": 1.0 + float(self.k[1]),
            "CF": float(self.h[1] + 2.0 * self.l[1]) / 3.0,
        }[frame]
        moved = (_fixed(numbers - shift * _unit(1, len(numbers))) for numbers in (self.h, self.l, self.k))
        h, l, k = moved  # noqa: E741
        return replace(self, h=h, l=l, k=k, frame=frame)


def love_numbers(
    profile: EarthProfile | None = None,
    *,
    max_degree: int = 400,
    frame: DegreeOneFrame = "CF",
    integrate_to: int = 5000,
) -> LoveNumbers:
    """Compute the load Love numbers of an Earth profile.

    Parameters
    ----------
    profile : EarthProfile, optional
        PREM with its ocean replaced by upper crust by default.
    max_degree : int
        Highest degree, from 1.
    frame : str
        Origin of degree one, ``"CE"``, ``"CM"`` or ``"CF"``.
    integrate_to : int
        Highest degree that is integrated, from 1; above it h', n l' and n k' stay constant.

    Returns
    -------
    LoveNumbers

    Raises
    ------
    InputError
        One fault for every argument that cannot be used.

    Notes
    -----
    Static elastic-gravitational equations of Alterman, Jarosch & Pekeris (1959) with the loading
    conditions of Farrell (1972), a static fluid core after Saito (1974), and the frames of
    Blewitt (2003).

    Examples
    --------
    >>> love_numbers(max_degree=4).h.round(2)
    array([ 0.  , -0.26, -0.99, -1.05, -1.05])
    """
    profile = prem() if profile is None else profile
    faults = _argument_faults(profile, max_degree, frame, integrate_to)
    if faults:
        raise InputError(faults)
    last = min(max_degree, integrate_to)
    degrees = np.arange(1.0, last + 1.0)
    h, l, k = load_response(profile, degrees, step=_STEP)  # noqa: E741
    fall = last / np.arange(last + 1.0, max_degree + 1.0)
    earth_centred = LoveNumbers(
        _fixed(np.concatenate([[0.0], h, h[-1] * np.ones_like(fall)])),
        _fixed(np.concatenate([[0.0], l, l[-1] * fall])),
        _fixed(np.concatenate([[0.0], k, k[-1] * fall])),
        frame="CE",
        profile=profile.name,
        reference=profile.reference,
        integrated_to=last,
    )
    return earth_centred.in_frame(frame)


def half_space_limits(profile: EarthProfile) -> tuple[float, float, float]:
    """Limits of h', n l' and n k' for high degrees: Boussinesq's half-space of the surface rock.

    With the Lame parameters lambda and mu, density rho, gravity g and radius a of the surface::

        h' = - g^2 (lambda + 2 mu) / (4 pi G mu (lambda + mu))
        n l' = g^2 / (4 pi G (lambda + mu))
        n k' = - rho g a / (2 mu)

    Parameters
    ----------
    profile : EarthProfile

    Returns
    -------
    h, degree_times_l, degree_times_k : float

    Notes
    -----
    Farrell (1972), where the third also holds the attraction of the compressed rock.

    Examples
    --------
    >>> [round(limit, 2) for limit in half_space_limits(prem())]
    [-6.22, 1.89, -3.06]
    """
    surface, g = profile.radius, profile.surface_gravity
    shear, first = float(profile.shear_modulus(surface)), float(profile.lame_first(surface))
    stiffness = 4.0 * np.pi * GRAVITATIONAL_CONSTANT * (first + shear) / g**2
    return (
        -(first + 2.0 * shear) / (shear * stiffness),
        1.0 / stiffness,
        -float(profile.density(surface)) * g * surface / (2.0 * shear),
    )


def _unit(index: int, size: int) -> FloatArray:
    vector = np.zeros(size)
    vector[index] = 1.0
    return vector


def _fixed(numbers: FloatArray) -> FloatArray:
    numbers.setflags(write=False)
    return numbers


def _frame_fault(frame: object) -> Fault:
    return Fault("love_numbers", "frame", f"the value is {frame!r}", "Must be 'CE', 'CM' or 'CF'")


def _argument_faults(profile: EarthProfile, max_degree: object, frame: object, integrate_to: object) -> list[Fault]:
    faults = [
        Fault("love_numbers", name, f"the value is {value!r}", "Must be a whole number from 1")
        for name, value in {"max_degree": max_degree, "integrate_to": integrate_to}.items()
        if isinstance(value, bool) or not isinstance(value, int | np.integer) or value < 1
    ]
    if frame not in FRAMES:
        faults.append(_frame_fault(frame))
    if profile.layers[-1].is_fluid:
        faults.append(
            Fault(
                "love_numbers",
                "profile",
                f"the surface of {profile.name!r} is fluid",
                "A load needs a solid surface",
                "Replace the ocean by the layer beneath",
            )
        )
    return faults
