"""The analyst's inputs in memory: everything that `estimate` needs, no files.

`io.read_network` makes a Network from a network file, `simulate` from a seed,
and a notebook from arrays.
"""

from collections.abc import Collection, Mapping
from dataclasses import dataclass, field

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.errors import Fault
from massfit.fingerprint.pattern import LoadPattern
from massfit.records.record import Record
from massfit.settings import Settings
from massfit.site import Site


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
    """

    name: str
    pressure: xr.DataArray
    ocean_mean: Series | None
    air_pressure: str
    assimilates_satellite_gravity: bool = False


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


@dataclass(frozen=True)
class Network:
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
    source : str
        Network file, as the analyst wrote it; empty when built in memory.
    inputs : mapping of str to str
        SHA-256 of every file read, by path relative to the network file.
    warnings : tuple of str
        What the reader noticed.
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
    source: str = ""
    inputs: Mapping[str, str] = field(default_factory=dict)
    warnings: tuple[str, ...] = ()
