"""What passes between the stages: dimensions, units and attributes, declared once.

A stage calls :func:`require` on every Dataset it receives.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field

import xarray as xr

from massfit.errors import Fault, InputError


@dataclass(frozen=True)
class Variable:
    """Dimensions and unit of one variable of a Dataset.

    Parameters
    ----------
    dims : tuple of str
        In order.
    units : str
        CF unit; "1" for a pure number.
    """

    dims: tuple[str, ...]
    units: str


@dataclass(frozen=True)
class Contract:
    """A Dataset that is passed from one stage to another.

    Parameters
    ----------
    name : str
        What the Dataset is called in messages.
    variables : mapping of str to Variable
        Variables that must be there.
    attributes : tuple of str
        Attributes that must be there.
    optional : mapping of str to Variable
        Variables that may be there.
    """

    name: str
    variables: Mapping[str, Variable]
    attributes: tuple[str, ...] = ()
    optional: Mapping[str, Variable] = field(default_factory=dict)


FINGERPRINTS = Contract(
    "fingerprints",
    # admittance components are the real and imaginary part of F_s
    {"admittance": Variable(("member", "site", "component"), "1")},
    attributes=("earth_model", "max_degree", "ocean_area_m2", "sea_water_density_kg_m3"),
    optional={
        # G_s of the land air pressure, the same for every member
        "air_load_response": Variable(("site", "component"), "Pa"),
        # reference cases shown beside the members ("uniform over land", "uniform ocean")
        "reference_admittance": Variable(("case", "site", "component"), "1"),
    },
)

FOOTPRINTS = Contract(
    "footprints",
    {
        # sea level at the site (m) per load (kg m-2) integrated over area (m2): m kg-1
        "footprint": Variable(("site", "lat", "lon"), "m kg-1"),
        "constant": Variable(("site",), "m kg-1"),
    },
    attributes=("max_degree",),
)

FINGERPRINT_STUDY = Contract(
    "fingerprint study",
    # what `massfit fingerprint` writes: sites, maps on cells of one degree, footprints, and the way to convergence
    {
        "admittance": Variable(("member", "site", "component"), "1"),
        "reference_admittance": Variable(("case", "site", "component"), "1"),
        "amplitude_ratio": Variable(("site",), "1"),
        "delay": Variable(("site",), "d"),
        "admittance_by_degree": Variable(("degree", "site", "component"), "1"),
        "map_admittance": Variable(("member", "lat", "lon", "component"), "1"),
        "map_amplitude_ratio": Variable(("lat", "lon"), "1"),
        "map_delay": Variable(("lat", "lon"), "d"),
        "map_difference": Variable(("site",), "1"),
        "ocean_fraction": Variable(("lat", "lon"), "1"),
        "footprint": Variable(("site", "lat", "lon"), "m kg-1"),
        "footprint_ratio": Variable(("site", "lat", "lon"), "1"),
        "constant": Variable(("site",), "m kg-1"),
    },
    attributes=("earth_model", "max_degree", "ocean_area_m2", "sea_water_density_kg_m3"),
    optional={
        "air_load_response": Variable(("site", "component"), "Pa"),
        # standard deviations over the members; not there for a single one
        "amplitude_ratio_spread": Variable(("site",), "1"),
        "delay_spread": Variable(("site",), "d"),
        "map_spread": Variable(("lat", "lon"), "1"),
    },
)

EQUILIBRIUM_RESPONSES = Contract(
    "equilibrium responses",
    # pressure at the site per height of the degree-2 zonal tide and per wobble parameter
    {
        "zonal": Variable(("site",), "Pa m-1"),
        "wobble_m1": Variable(("site",), "Pa rad-1"),
        "wobble_m2": Variable(("site",), "Pa rad-1"),
    },
    attributes=("long_period_tides", "pole_tide"),
)

CORRECTIONS = Contract(
    "corrections of one site",
    # every series was subtracted from the record; time is the middle of the day, UTC
    {
        "long_period_tides": Variable(("time",), "Pa"),
        "pole_tide": Variable(("time",), "Pa"),
        "ocean_mean_atmosphere": Variable(("time",), "Pa"),
        # NaN on the days a model does not cover; M may be 0
        "circulation": Variable(("model", "time"), "Pa"),
    },
    optional={
        "present": Variable(("model",), "1"),
        # to the wet cell used where the site's own are dry, else 0; NaN where a table of sites lacks the site
        "distance": Variable(("model",), "m"),
        # parts of `circulation`, each with its sign; NaN where a model lacks one
        "own_ocean_mean": Variable(("model", "time"), "Pa"),
        "self_attraction": Variable(("model", "time"), "Pa"),
        "local_air_pressure": Variable(("model", "time"), "Pa"),
    },
)

SITE_PHASORS = Contract(
    "site phasors",
    {
        # NaN where a site-model pair is missing; unused parts have weight 0 and repeat part 0
        "phasor": Variable(("site", "part", "model", "component"), "Pa"),
        "weight": Variable(("site", "part"), "1"),
        "covariance": Variable(("site", "part", "component", "component2"), "Pa2"),
        # D_s: covariance of each model's own weather at the annual line
        "model_noise": Variable(("site", "component", "component2"), "Pa2"),
        # standard deviation of the reduced daily record, and its days; NaN where the site was reduced elsewhere
        "reduced_sd": Variable(("site",), "Pa"),
        "days": Variable(("site",), "d"),
    },
    attributes=("reference_year",),
    optional={
        # 1 where only the mean over the site's models is known: all its models then hold that mean
        "mean_only": Variable(("site",), "1"),
        # share of each calendar year in a site's phasor, and in the stated period; both sum to 1 over the years.
        # The coordinate `year` names them
        "year_share": Variable(("site", "year"), "1"),
        "period_share": Variable(("year",), "1"),
        # where the sites are; the coordinate `group` (site) holds their labels, empty where there is none
        "latitude": Variable(("site",), "degrees_north"),
        "longitude": Variable(("site",), "degrees_east"),
        # noise at the mode of the fit: sum of variance exp(-rate |t|), and white noise of a daily mean; NaN beyond the
        # terms of a site, and where it was reduced elsewhere
        "noise_rate": Variable(("site", "noise_term"), "d-1"),
        "noise_variance": Variable(("site", "noise_term"), "Pa2"),
        "noise_white": Variable(("site",), "Pa"),
        # what each series of a site holds at the annual line by the operator of its fit; NaN where it has none
        "correction_phasor": Variable(("site", "correction", "component"), "Pa"),
        "summand": Variable(("correction",), "1"),
    },
)


QUIETNESS_MAP = Contract(
    "quietness map",
    # what `massfit screen` makes of the bottom pressure of ocean models: how still the sea floor is in every cell.
    # `lat` and `lon` are centres of cells in degrees, both ascending, `lon` from [0, 360); NaN where no model has
    # water. The variables without a model axis are of the ensemble: root mean squares over the models
    {
        # less ocean mean, trend, annual and semi-annual cycle
        "sd": Variable(("lat", "lon"), "Pa"),
        "annual_mean_sd": Variable(("lat", "lon"), "Pa"),
        # of one component of the annual phasor that a record of so many years would show of the dynamics, as the
        # models have it; and times `inflation`, which is what to plan with. Coordinate `record_years`
        "annual_sd": Variable(("record_years", "lat", "lon"), "Pa"),
        "expected_annual_sd": Variable(("record_years", "lat", "lon"), "Pa"),
        "inflation": Variable(("lat", "lon"), "1"),
        # one-sided spectral density at the annual line, and the power by which it falls with frequency there
        "annual_density": Variable(("lat", "lon"), "Pa2 yr"),
        "slope": Variable(("lat", "lon"), "1"),
        # annual phasor of the dynamics, mean over the models
        "dynamic_phasor": Variable(("lat", "lon", "component"), "Pa"),
        "models": Variable(("lat", "lon"), "1"),
    },
    attributes=("reference_year", "inflation_factor", "quiet_sd_pa"),
    optional={
        # standard deviation over the models of one component of their annual phasors; not there for a single model
        "disagreement": Variable(("lat", "lon"), "Pa"),
        "model_sd": Variable(("model", "lat", "lon"), "Pa"),
        "model_annual_mean_sd": Variable(("model", "lat", "lon"), "Pa"),
        "model_annual_sd": Variable(("model", "record_years", "lat", "lon"), "Pa"),
        "model_phasor": Variable(("model", "lat", "lon", "component"), "Pa"),
        # share of the times at which the model has a value
        "model_coverage": Variable(("model", "lat", "lon"), "1"),
    },
)


def require(dataset: xr.Dataset, contract: Contract) -> None:
    """Check a Dataset against its contract.

    Parameters
    ----------
    dataset : xarray.Dataset
    contract : Contract

    Raises
    ------
    InputError
        One fault for every missing variable or attribute, wrong dimension or unit.
    """
    faults = [
        Fault(contract.name, name, "the attribute is missing", action="Add it")
        for name in contract.attributes
        if name not in dataset.attrs
    ]
    for name, variable in contract.variables.items():
        if name not in dataset:
            faults.append(Fault(contract.name, name, "the variable is missing", f"Dimensions {variable.dims}"))
    for name, variable in {**contract.variables, **contract.optional}.items():
        if name in dataset:
            faults += _variable_faults(contract.name, name, dataset[name], variable)
    if faults:
        raise InputError(faults)


def _variable_faults(source: str, name: str, data: xr.DataArray, variable: Variable) -> list[Fault]:
    faults = []
    if data.dims != variable.dims:
        faults.append(Fault(source, name, f"dimensions are {data.dims}", f"Must be {variable.dims}"))
    if data.attrs.get("units") != variable.units:
        found = data.attrs.get("units")
        faults.append(Fault(source, name, f"units are {found!r}", f"Must be {variable.units!r}"))
    return faults
