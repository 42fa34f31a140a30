"""What the analyst may choose, one frozen class a section of the network file.

The classes are the only definition of a setting: the network file is
validated against them and `run.json` repeats them. Units stand in the names.
"""

from collections.abc import Mapping
from dataclasses import fields
from datetime import date
from typing import Annotated, Any, Literal

from pydantic import ConfigDict, Field, PositiveFloat, TypeAdapter, ValidationError
from pydantic.dataclasses import dataclass

from massfit.errors import Fault, InputError

_STRICT = ConfigDict(extra="forbid", allow_inf_nan=False)

NonNegative = Annotated[float, Field(ge=0)]
NoiseForm = Literal["white", "exponential", "smooth", "power-law", "sum"]
DriftForm = Literal["exponential+linear", "logarithm+linear", "linear", "none", "compare"]

PREM = "prem"
"""The Earth model that ships with the package."""


@dataclass(frozen=True, config=_STRICT)
class Frame:
    """`[network]`: name, phase origin and the stated period.

    Parameters
    ----------
    name : str
        Name of the network, repeated in every output.
    reference_year : int
        Phases count from 1 January 00:00 UTC of this year.
    start, end : datetime.date, optional
        First and last day used, inclusive; the records are cut to them.
    references : tuple of str
        How data that have no `reference` of their own (air pressure, satellites, others) are cited.
    """

    name: Annotated[str, Field(min_length=1)]
    reference_year: Annotated[int, Field(ge=1900, le=2200)]
    start: date | None = None
    end: date | None = None
    references: Annotated[tuple[str, ...], Field(max_length=50)] = ()


@dataclass(frozen=True, config=_STRICT)
class Corrections:
    """`[corrections]`: what is taken off the records, and how.

    Parameters
    ----------
    ocean_mean_atmosphere : str, optional
        File of the ocean-mean air pressure, or ``"already-removed"``. No default:
        either this or `air_pressure` must be stated.
    tides : str
        Short tides: ``"remove"`` or ``"already-removed"``.
    long_period_tides : str
        ``"equilibrium"`` (self-consistent over the real ocean),
        ``"equilibrium-classical"`` or ``"none"``.
    pole_tide : str
        ``"observed"`` (self-consistent, from observed polar motion) or ``"none"``.
    ocean_mean_atmosphere_sd_hpa : float
        Common error of the ocean-mean air pressure, hPa per phasor component.
    atmosphere_load : str, optional
        File with the annual phasor of air pressure on land.
    ocean_mean_phasor_hpa : tuple of float, optional
        Annual phasor of the ocean-mean air pressure, hPa; needed with
        `atmosphere_load` when the series itself is already removed.
    air_pressure : str, optional
        File of surface air pressure (time, lat, lon); replaces the series and
        the load file.
    """

    ocean_mean_atmosphere: str | None = None
    tides: Literal["remove", "already-removed"] = "remove"
    long_period_tides: Literal["equilibrium", "equilibrium-classical", "none"] = "equilibrium"
    pole_tide: Literal["observed", "none"] = "observed"
    ocean_mean_atmosphere_sd_hpa: NonNegative = 0.04
    atmosphere_load: str | None = None
    ocean_mean_phasor_hpa: tuple[float, float] | None = None
    air_pressure: str | None = None


@dataclass(frozen=True, config=_STRICT)
class Fingerprint:
    """`[fingerprint]`: the load ensemble and the sea-level equation.

    Parameters
    ----------
    loads : tuple of str
        Files of load members, ``"builtin:NAME"`` patterns and ``"perturbed:N"``, N variants of the others, of equal
        weight.
    max_degree : int
        Highest spherical-harmonic degree of the solve.
    sea_water_density : float
        kg m-3.
    water_vapour_kg : float
        Half the annual range of the mass of water vapour in the air, kg.
    water_vapour_peak : str
        Month and day of its maximum, ``"MM-DD"``.
    rotational_feedback : bool
        Whether the solve holds the rotational response.
    earth_model : str
        ``"prem"``, or the file of an Earth profile.
    perturbed_amplitude_sd, perturbed_delay_sd_days : float
        Spreads of the regions of perturbed members: of the logarithm of the amplitude, and of the timing in days.
    perturbed_seed : int
        Their seed.
    """

    loads: Annotated[tuple[str, ...], Field(min_length=1)] = ("builtin:all",)
    max_degree: Annotated[int, Field(ge=20, le=1440)] = 180
    sea_water_density: Annotated[float, Field(ge=1000, le=1060)] = 1025.0
    water_vapour_kg: NonNegative = 0.65e15
    water_vapour_peak: Annotated[str, Field(pattern=r"^(0[1-9]|1[0-2])-(0[1-9]|[12]\d|3[01])$")] = "07-15"
    rotational_feedback: bool = False
    earth_model: Annotated[str, Field(min_length=1)] = PREM
    perturbed_amplitude_sd: Annotated[float, Field(ge=0, le=1)] = 0.2
    perturbed_delay_sd_days: Annotated[float, Field(ge=0, le=60)] = 10.0
    perturbed_seed: Annotated[int, Field(ge=0, lt=2**32)] = 1


@dataclass(frozen=True, config=_STRICT)
class PosteriorSettings:
    """`[posterior]`: the network model and its sampler.

    Parameters
    ----------
    seed : int
        Seed of every random number of the run.
    site_scatter : str
        ``"student-t"`` or ``"normal"``.
    group_scatter : bool or float
        Scatter shared by the sites of a group, or a correlation length in km.
    model_truth : str
        ``"exchangeable"`` (r = 1) or ``"centred"`` (r = 0).
    """

    seed: Annotated[int, Field(ge=0, lt=2**32)] = 1
    site_scatter: Literal["student-t", "normal"] = "student-t"
    group_scatter: bool | PositiveFloat = True
    model_truth: Literal["exchangeable", "centred"] = "exchangeable"


@dataclass(frozen=True, config=_STRICT)
class Priors:
    """`[priors]`: every prior by name, with the project's defaults.

    Parameters
    ----------
    annual_sd_hpa : float
        Normal prior of each component of the network phasor, hPa.
    site_scatter_hpa, model_local_hpa, model_common_hpa, group_scatter_hpa : float
        Scales of the half-t priors (4 degrees of freedom) of the network scales, hPa.
    year_sd_hpa : float
        Year-to-year standard deviation of the cycle, hPa per component.
    unmodelled_annual_hpa : float
        Standard deviation of the circulation's annual cycle where no model is subtracted, hPa per component.
    drift_exponential_sd_hpa, drift_slope_sd_hpa_per_year : float
        Normal priors of the drift terms.
    drift_time_min_days : float
        Shortest drift time constant, days; the longest is the deployment's length.
    noise_forms : tuple of str
        Forms of the noise of a site that are weighed by their evidence, equally likely before: ``"white"``,
        ``"exponential"``, ``"smooth"``, ``"power-law"``, ``"sum"``.
    noise_time_scales_days : tuple of float
        Time scales of the red noise, days: of the terms of ``"sum"``; the least and the largest of all others.
    red_noise_hpa, white_noise_hpa : float
        Scales of the half-t priors (4 degrees of freedom) of the noise amplitudes, hPa.
    """

    annual_sd_hpa: PositiveFloat = 5.0
    site_scatter_hpa: PositiveFloat = 0.3
    model_local_hpa: PositiveFloat = 0.3
    model_common_hpa: PositiveFloat = 0.15
    group_scatter_hpa: PositiveFloat = 0.15
    year_sd_hpa: PositiveFloat = 0.05
    unmodelled_annual_hpa: PositiveFloat = 1.0
    drift_exponential_sd_hpa: PositiveFloat = 30.0
    drift_slope_sd_hpa_per_year: PositiveFloat = 10.0
    drift_time_min_days: PositiveFloat = 3.0
    noise_forms: Annotated[tuple[NoiseForm, ...], Field(min_length=1)] = ("white", "exponential", "smooth", "power-law")
    noise_time_scales_days: Annotated[tuple[PositiveFloat, ...], Field(min_length=1, max_length=6)] = (2.0, 20.0, 200.0)
    red_noise_hpa: PositiveFloat = 0.5
    white_noise_hpa: PositiveFloat = 0.2


@dataclass(frozen=True, config=_STRICT)
class Gravity:
    """`[gravity]`: satellite gravity to compare with, and how its ocean mean is made.

    Parameters
    ----------
    fields : tuple of str
        One or more solutions, each a folder, archive or file of monthly fields, or a model with annual terms.
    degree_one, low_degree : str, optional
        Tables of degree one, and of C20 and C30.
    atmosphere, dealiasing : str, optional
        Monthly fields of the atmosphere, and of atmosphere and ocean together, as they were taken off.
    determinations : str, optional
        CSV of other determinations to set beside.
    max_degree : int
        Highest degree used.
    buffer_km : float
        Ocean nearer to land is left out.
    smoothing_km : float
        Distance at which a Gaussian smoothing falls to one half; 0 for none.
    site_smoothing_km : float
        The same for the pressure at the recorders, where it is longer than `smoothing_km`: without it the striped
        errors of monthly solutions hide the cycle at a point (common practice: 300 to 500 km).
    model_sd_hpa : float, optional
        Standard deviation of each component of the ocean mean of a model with annual terms, in place of what its
        file states; a model for which neither is there is shown and not weighed.
    c20, c30 : str
        ``"replaced"`` by `low_degree` where that is given, or the field's ``"own"``.
    degree_zero : str
        Global water mass: less the mass of the ``"atmosphere"`` product, less the ``"water-vapour"`` of the
        fingerprint, or ``"none"``. ``"best"`` takes the first of them that is at hand.
    restore_dealiasing : bool
        Whether the dealiasing product is added back.
    alias_lines : bool
        Whether alias lines of the tides are fitted where the series is long enough.
    start, end : datetime.date, optional
        First and last day; those of the network by default.
    """

    fields: Annotated[tuple[str, ...], Field(min_length=1, max_length=12)]
    degree_one: str | None = None
    low_degree: str | None = None
    atmosphere: str | None = None
    dealiasing: str | None = None
    determinations: str | None = None
    max_degree: Annotated[int, Field(ge=5, le=180)] = 60
    buffer_km: Annotated[float, Field(ge=0, le=2000)] = 300.0
    smoothing_km: Annotated[float, Field(ge=0, le=2000)] = 0.0
    site_smoothing_km: Annotated[float, Field(ge=0, le=2000)] = 500.0
    model_sd_hpa: Annotated[float, Field(gt=0, le=20)] | None = None
    c20: Literal["replaced", "own"] = "replaced"
    c30: Literal["replaced", "own"] = "replaced"
    degree_zero: Literal["best", "atmosphere", "water-vapour", "none"] = "best"
    restore_dealiasing: bool = False
    alias_lines: bool = True
    start: date | None = None
    end: date | None = None


@dataclass(frozen=True, config=_STRICT)
class Settings:
    """Every choice of one network file; :func:`make_settings` makes it from plain mappings.

    Parameters
    ----------
    frame : Frame
        `[network]`.
    corrections : Corrections
        `[corrections]`.
    fingerprint : Fingerprint
        `[fingerprint]`.
    posterior : PosteriorSettings
        `[posterior]`.
    priors : Priors
        `[priors]`.
    gravity : Gravity, optional
        `[gravity]`.

    Examples
    --------
    >>> corrections = Corrections(ocean_mean_atmosphere="already-removed")
    >>> settings = Settings(Frame("Invented", reference_year=2016), corrections, priors=Priors(year_sd_hpa=0.1))
    >>> settings.posterior.seed
    1
    """

    frame: Frame
    corrections: Corrections
    fingerprint: Fingerprint = Fingerprint()
    posterior: PosteriorSettings = PosteriorSettings()
    priors: Priors = Priors()
    gravity: Gravity | None = None


def make_settings(
    *,
    network: Mapping[str, object],
    corrections: Mapping[str, object],
    fingerprint: Mapping[str, object] | None = None,
    posterior: Mapping[str, object] | None = None,
    priors: Mapping[str, object] | None = None,
    gravity: Mapping[str, object] | None = None,
) -> Settings:
    """Make settings from the sections of a network file, each a mapping of its keys.

    Parameters
    ----------
    network, corrections : mapping
        Keys of :class:`Frame` and :class:`Corrections`. Files that these would name are given to
        :class:`massfit.Network` as data, and need not be named.
    fingerprint, posterior, priors : mapping, optional
        Keys of :class:`Fingerprint`, :class:`PosteriorSettings` and :class:`Priors`; all have defaults.
    gravity : mapping, optional
        Keys of :class:`Gravity`; without it there is no satellite comparison.

    Returns
    -------
    Settings

    Raises
    ------
    InputError
        Every key that is missing, unknown or out of range.

    Examples
    --------
    >>> settings = make_settings(
    ...     network={"name": "Invented", "reference_year": 2016},
    ...     corrections={"ocean_mean_atmosphere": "already-removed", "tides": "already-removed"},
    ...     posterior={"seed": 7},
    ... )
    >>> settings.frame.reference_year, settings.posterior.seed, settings.priors.annual_sd_hpa
    (2016, 7, 5.0)
    """
    given = {"frame": network, "corrections": corrections, "fingerprint": fingerprint}
    given |= {"posterior": posterior, "priors": priors, "gravity": gravity}
    document = {name: dict(section) for name, section in given.items() if section is not None}
    try:
        return TypeAdapter(Settings).validate_python(document)
    except ValidationError as error:
        raise InputError([_fault(found) for found in error.errors(include_url=False)]) from None


def _fault(error: Any) -> Fault:
    place = ["network" if part == "frame" else str(part) for part in error["loc"]]
    name = ".".join(place[:2])
    if error["type"] == "missing":
        return Fault("settings", name, "the key is missing", action="Add it")
    if error["type"] == "unexpected_keyword_argument":
        section = next(field.type for field in fields(Settings) if field.name == error["loc"][0])
        known = ", ".join(field.name for field in fields(section))  # type: ignore[arg-type]
        return Fault("settings", name, "unknown key", f"Known keys are {known}", "Correct or remove it")
    return Fault("settings", name, f"the value is {error['input']!r}", f"Must be {_allowed(error['msg'])}")


def _allowed(message: str) -> str:
    return message.removeprefix("Input should be ")
