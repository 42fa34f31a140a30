"""The analyst's inputs in memory: everything that `estimate` needs, no files.

`io.read_network` makes a Network from a network file, `simulate` from a seed,
and a notebook from arrays.
"""

from collections.abc import Collection, Mapping
from dataclasses import dataclass, field

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.display import Described, Description
from massfit.earth.profile import EarthProfile
from massfit.errors import Fault, InputError
from massfit.fingerprint.ocean import land_fault
from massfit.fingerprint.pattern import LoadPattern
from massfit.records.record import Record
from massfit.settings import PREM, Settings
from massfit.site import Site

TWICE = (
    "Observed polar motion already holds the response to the mass exchange, so it would count twice",
    "Set it to false",
)
"""Why the pole tide is not both taken off with observations and fed back, and what to do."""


@dataclass(frozen=True)
class Series:
    """An ocean-mean pressure series.

    Parameters
    ----------
    name : str
    time : (n,) array of datetime64[ns]
        Middle of each value's interval, UTC, strictly increasing.
    pressure : (n,) array of float64
        Pa; no NaN.

    Examples
    --------
    >>> time = np.datetime64("2016-01-01T12", "ns") + np.arange(366) * np.timedelta64(1, "D")
    >>> air = Series("ocean-mean air pressure", time, 63.0 * np.cos(2 * np.pi * (np.arange(366) - 200) / 365.2422))
    >>> float(abs(air.pressure).max().round(1))
    63.0
    """

    name: str
    time: NDArray[np.datetime64]
    pressure: NDArray[np.float64]


@dataclass(frozen=True)
class CirculationModel:
    """Bottom pressure of one ocean circulation model.

    Parameters
    ----------
    name : str
    pressure : xarray.DataArray
        Pa, over (time, site) with a coordinate of site ids, or over (time, lat, lon) in
        degrees; NaN on land. Time is the middle of each interval, UTC. May be lazy.
    ocean_mean : Series or None
        The model's own whole-ocean mean, to be subtracted; None where it is
        already removed.
    air_pressure : str
        "not-forced", "forced-included" or "forced-excluded".
    assimilates_satellite_gravity : bool
    partial : str
        What happens at a site of which the model covers a part of the days only: "missing", the model is left out
        there, or "cut", the record is cut to the days that it covers.
    reference : str
        Whose model it is and how it is cited; empty where it is not stated.

    Examples
    --------
    >>> time = np.datetime64("2016-01-01T12", "ns") + np.arange(366) * np.timedelta64(1, "D")
    >>> table = xr.DataArray(np.zeros((366, 2)), dims=("time", "site"), coords={"time": time, "site": ["A3", "B1"]})
    >>> model = CirculationModel("Invented model", table, ocean_mean=None, air_pressure="not-forced")
    >>> model.pressure.dims
    ('time', 'site')
    """

    name: str
    pressure: xr.DataArray
    ocean_mean: Series | None
    air_pressure: str
    assimilates_satellite_gravity: bool = False
    partial: str = "missing"
    reference: str = ""


@dataclass(frozen=True)
class ReducedSite:
    """Annual phasor of a site whose record was reduced elsewhere, taken as given.

    It is the phasor of the record less tides, pole tide, ocean-mean air pressure and drift, and
    less the circulation of the models named. The response to the air over land is still in it.

    Parameters
    ----------
    site : str
        Site id.
    phasor : (2,) or (n_model, 2) array
        In phase and quadrature, Pa, counted from the network's reference year: one with the mean of
        the models subtracted, or one for each model.
    covariance : (2, 2) array
        Of the record less the mean of the models, Pa2.
    years : (int, int)
        First and last calendar year of the record.
    models : tuple of str
        Circulation models that were subtracted; may be empty.
    model_noise : (2, 2) array
        Covariance of each model's own weather at the annual line, Pa2; zero where it is not known.

    Examples
    --------
    >>> ReducedSite("A3", np.array([12.0, 81.0]), 100.0 * np.eye(2), (2014, 2018), ("Model A", "Model B")).mean_only
    True
    """

    site: str
    phasor: NDArray[np.float64]
    covariance: NDArray[np.float64]
    years: tuple[int, int]
    models: tuple[str, ...] = ()
    model_noise: NDArray[np.float64] = field(default_factory=lambda: np.zeros((2, 2)))

    @property
    def mean_only(self) -> bool:
        """Whether several models were subtracted and only their mean is known."""
        return self.phasor.ndim == 1 and len(self.models) > 1

    @property
    def model_phasors(self) -> NDArray[np.float64]:
        """(max(n_model, 1), 2), Pa; the mean stands for every model where only it is known."""
        return np.array(np.broadcast_to(self.phasor, (max(len(self.models), 1), 2)))


def reduced_faults(reduced: ReducedSite, models: Collection[str]) -> list[Fault]:
    """Find what is wrong with a site that was reduced elsewhere.

    Parameters
    ----------
    reduced : ReducedSite
    models : collection of str
        Circulation models of the network.

    Returns
    -------
    list of Fault
        Under the names of the fields.

    Examples
    --------
    >>> site = ReducedSite("A", np.array([5.0, 80.0]), np.diag([90.0, -4.0]), (2014, 2016))
    >>> [fault.name for fault in reduced_faults(site, [])]
    ['covariance']
    """
    first, last = reduced.years
    repeated = sorted({model for model in reduced.models if reduced.models.count(model) > 1})
    unknown = [model for model in dict.fromkeys(reduced.models) if model not in models]
    faults = [
        Fault(reduced.site, "models", f'"{model}" stands twice', "Must be unique", "Remove one") for model in repeated
    ]
    known = f"Must be one of {', '.join(models)}" if models else "The network has no circulation model"
    faults += [Fault(reduced.site, "models", f'the network has no model "{model}"', known) for model in unknown]
    if reduced.phasor.shape not in {(2,), (max(len(reduced.models), 1), 2)} or not np.isfinite(reduced.phasor).all():
        shape = "Must be two finite numbers, or two for each model"
        faults.append(Fault(reduced.site, "phasor", f"the value is {reduced.phasor.tolist()}", shape))
    if not _is_covariance(reduced.covariance, least=1e-9):
        allowed = "Must be [[a, c], [c, b]], positive definite"
        faults.append(Fault(reduced.site, "covariance", f"the value is {reduced.covariance.tolist()}", allowed))
    if not _is_covariance(reduced.model_noise, least=-1e-9):
        allowed = "Must be [[a, c], [c, b]], without a negative variance"
        faults.append(Fault(reduced.site, "model_noise", f"the value is {reduced.model_noise.tolist()}", allowed))
    if not first <= last:
        problem = f"the value is [{first}, {last}]"
        faults.append(Fault(reduced.site, "years", problem, "Must be the first and the last year"))
    return faults


def _is_covariance(matrix: NDArray[np.float64], *, least: float) -> bool:
    """Whether it is symmetric, with eigenvalues of at least a share of its largest entry."""
    if matrix.shape != (2, 2) or not np.isfinite(matrix).all():
        return False
    scale = max(float(np.abs(matrix).max()), np.finfo(float).tiny)
    skew = abs(float(matrix[0, 1] - matrix[1, 0]))
    return bool(skew <= 1e-6 * scale and np.linalg.eigvalsh(0.5 * (matrix + matrix.T)).min() >= least * scale)


@dataclass(frozen=True, repr=False)
class Network(Described):
    """Everything a run needs.

    Parameters
    ----------
    settings : Settings
    sites : tuple of Site
        Including sites the analyst left out as a whole.
    records : tuple of Record
        Raw records, any number a site, each on its own clock.
    loads : tuple of LoadPattern
        Load ensemble, kg m-2.
    circulation : tuple of CirculationModel
    ocean_mean_atmosphere : Series, optional
        None where it is already removed from the records.
    atmosphere_load : LoadPattern, optional
        Annual phasor of air pressure on land, Pa (values over ocean are ignored).
    air_pressure : xarray.DataArray, optional
        Surface air pressure (time, lat, lon), Pa; replaces the two above.
    reduced : tuple of ReducedSite
        Phasors of sites that were reduced elsewhere; such a site has no records.
    earth : EarthProfile, optional
        PREM where none is given.
    models_elsewhere : tuple of str
        Models besides `circulation` that only such sites have subtracted.
    source : str
        Network file, as the analyst wrote it; empty when built in memory.
    inputs : mapping of str to str
        SHA-256 of every file read, by path relative to the network file.
    warnings : tuple of str
        What the reader noticed.

    Examples
    --------
    >>> from massfit.settings import make_settings
    >>> settings = make_settings(
    ...     network={"name": "One site", "reference_year": 2016},
    ...     corrections={"ocean_mean_atmosphere": "already-removed"},
    ... )
    >>> phasor = ReducedSite("A3", np.array([12.0, 81.0]), 100.0 * np.eye(2), (2014, 2018))
    >>> Network(settings, (Site("A3", -11.25, 205.5),), records=(), loads=(), reduced=(phasor,))
    Network: One site
      phases from   1 January 2016 00:00 UTC
      sites         1, 0 left out, 1 reduced elsewhere
      records       0
      models        none
      load members  none
      warnings      0
    """

    settings: Settings
    sites: tuple[Site, ...]
    records: tuple[Record, ...]
    loads: tuple[LoadPattern, ...]
    circulation: tuple[CirculationModel, ...] = ()
    ocean_mean_atmosphere: Series | None = None
    atmosphere_load: LoadPattern | None = None
    air_pressure: xr.DataArray | None = None
    reduced: tuple[ReducedSite, ...] = ()
    earth: EarthProfile | None = None
    models_elsewhere: tuple[str, ...] = ()
    source: str = ""
    inputs: Mapping[str, str] = field(default_factory=dict)
    warnings: tuple[str, ...] = ()

    @property
    def model_names(self) -> tuple[str, ...]:
        """Every model that some site may have subtracted."""
        return (*(model.name for model in self.circulation), *self.models_elsewhere)

    def describe(self) -> Description:
        """Say what the network holds."""
        frame = self.settings.frame
        left_out = sum(site.excluded_because is not None for site in self.sites)
        valid = [times for times in (each.time[~np.isnat(each.time)] for each in self.records) if times.size]
        ends = [str(day)[:10] for times in valid for day in (times.min(), times.max())]
        span = f", {min(ends)} to {max(ends)}" if ends else ""
        models, loads = (
            ", ".join(names) or "none" for names in (self.model_names, [pattern.name for pattern in self.loads])
        )
        return f"Network: {frame.name}", {
            "phases from": f"1 January {frame.reference_year} 00:00 UTC",
            "sites": f"{len(self.sites)}, {left_out} left out, {len(self.reduced)} reduced elsewhere",
            "records": f"{len(self.records)}{span}",
            "models": models,
            "load members": loads,
            "warnings": f"{len(self.warnings)}",
        }


def check_network(network: Network) -> None:
    """Refuse a network whose parts do not fit together.

    Parameters
    ----------
    network : Network

    Raises
    ------
    InputError
        Names that stand twice, a site on land, data of a site that is not there or has both records and a phasor,
        arrays that do not match, a phasor made elsewhere that is not well formed, nothing said about the ocean-mean
        air pressure, an Earth model that is named and not given, or a pole tide that is both taken off and fed
        back.

    Examples
    --------
    >>> from massfit.settings import make_settings
    >>> settings = make_settings(network={"name": "Invented", "reference_year": 2016}, corrections={})
    >>> check_network(Network(settings, sites=(), records=(), loads=()))
    Traceback (most recent call last):
        ...
    massfit.errors.InputError: network: corrections.ocean_mean_atmosphere: nothing is said about ...
    """
    source = network.source or "network"
    models = network.model_names
    names = {
        "sites": [site.id for site in network.sites],
        "records": [record.deployment for record in network.records],
        "circulation": list(models),
        "reduced": [each.site for each in network.reduced],
    }
    faults = [
        Fault(source, kind, f'"{name}" stands twice', "Must be unique", "Rename or remove one")
        for kind, own in names.items()
        for name in sorted({name for name in own if own.count(name) > 1})
    ]
    faults += [fault for record in network.records for fault in _record_faults(record, names["sites"], source)]
    faults += [fault for each in network.reduced for fault in _reduced_faults(each, network, source)]
    faults += [fault for each in network.reduced for fault in reduced_faults(each, models)]
    faults += _atmosphere_faults(network, source)
    faults += _earth_faults(network, source)
    places = [land_fault(source, site.id, site.latitude_deg, site.longitude_deg) for site in network.sites]
    faults += [fault for fault in places if fault is not None]
    if network.settings.fingerprint.rotational_feedback and (
        network.settings.corrections.pole_tide == "observed" or network.reduced
    ):
        problem = "the value is true, and the pole tide is taken off with observed polar motion"
        faults.append(Fault(source, "fingerprint.rotational_feedback", problem, *TWICE))
    if faults:
        raise InputError(faults)


def _record_faults(record: Record, sites: Collection[str], source: str) -> list[Fault]:
    faults = []
    if record.site not in sites:
        problem = f'its site "{record.site}" is not in the network'
        faults.append(Fault(source, record.deployment, problem, f"Must be one of {', '.join(sites)}"))
    if record.time.dtype.kind != "M" or record.time.ndim != 1 or record.time.shape != record.pressure.shape:
        problem = f"time is {record.time.dtype} {record.time.shape}, pressure {record.pressure.shape}"
        faults.append(Fault(source, record.deployment, problem, "Must be datetime64 and numbers, one a sample"))
    return faults


def _reduced_faults(reduced: ReducedSite, network: Network, source: str) -> list[Fault]:
    if reduced.site not in {site.id for site in network.sites}:
        problem = "the site was reduced elsewhere and is not in the network"
        return [Fault(source, reduced.site, problem, action="Add the site")]
    if reduced.site in {record.site for record in network.records}:
        problem = "the site has records and a phasor made elsewhere"
        return [Fault(source, reduced.site, problem, "Must be one of the two")]
    return []


def _atmosphere_faults(network: Network, source: str) -> list[Fault]:
    name, removed = "corrections.ocean_mean_atmosphere", "already-removed"
    given = network.ocean_mean_atmosphere is not None or network.air_pressure is not None
    if given == (network.settings.corrections.ocean_mean_atmosphere != removed):
        return []
    if given:
        return [Fault(source, name, f'the value is "{removed}", and a series is given', "Must be one of the two")]
    problem = "nothing is said about the ocean-mean air pressure"
    allowed = f'Must be a series (or air_pressure), or "{removed}" in the settings'
    return [Fault(source, name, problem, allowed, "State it: left in, it moves the peak by weeks")]


def _earth_faults(network: Network, source: str) -> list[Fault]:
    model = network.settings.fingerprint.earth_model
    if network.earth is None and model != PREM:
        problem = f"the value is {model!r}, and no Earth profile is given"
        return [Fault(source, "fingerprint.earth_model", problem, f'Must be "{PREM}", or give the profile')]
    return []
