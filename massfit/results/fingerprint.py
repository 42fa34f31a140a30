"""The fingerprint of a network: one Dataset, and the rows that every output shows of it."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.display import Described, Description, counted
from massfit.fingerprint.maps import value_on_map
from massfit.phasor import as_complex, delay_days
from massfit.results.datasets import CONVENTIONS
from massfit.site import Site

MEAN = "mean over the members"
"""What the rows of the ensemble mean are called."""

UNSETTLED = 0.002
"""Change of the complex admittance from the degree of the settings to the finest, above which a site is unsettled."""

_LONG_NAMES = {
    "admittance": "complex admittance of the site: sea level there over the mean of the ocean",
    "reference_admittance": "admittance of cases that are no members",
    "ocean_mean": "annual phasor of the mean sea level that the member causes",
    "air_load_response": "pressure at the site from attraction and load of the air over land",
    "amplitude_ratio": "amplitude at the site over that of the ocean mean, mean admittance of the members",
    "delay": "days by which the site peaks later than the ocean mean, mean admittance of the members",
    "amplitude_ratio_spread": "standard deviation of the amplitude ratio over the members",
    "delay_spread": "standard deviation of the delay over the members",
    "admittance_by_degree": "mean admittance of the members, solved to the degree",
    "map_admittance": "complex admittance of the place, also over land, where nothing measures it",
    "map_amplitude_ratio": "amplitude at the place over that of the ocean mean, mean admittance of the members",
    "map_delay": "days by which the place peaks later than the ocean mean, mean admittance of the members",
    "map_spread": "standard deviation of the complex admittance over the members",
    "map_difference": "size of the map interpolated linearly to the site less the admittance of the site",
    "ocean_fraction": "area fraction of ocean",
    "footprint": "sea level at the site for a mass of 1 kg at the place, without rotational feedback",
    "footprint_ratio": "amplitude at the site over the ocean mean if all the water came from the place, smoothed",
    "constant": "sea level at the site for 1 kg of water vapour in the air",
}


_POINT, _CELL = "lat: lon: point", "lat: lon: mean"

_CELL_METHODS = {
    "map_admittance": _POINT,
    "map_amplitude_ratio": _POINT,
    "map_delay": _POINT,
    "map_spread": _POINT,
    "ocean_fraction": _CELL,
    "footprint": _CELL,
    "footprint_ratio": _POINT,
}


@dataclass(frozen=True, repr=False)
class FingerprintStudy(Described):
    """How every site, and every place, sees the annual cycle of ocean mass.

    Parameters
    ----------
    dataset : xarray.Dataset
        contracts.FINGERPRINT_STUDY, described for strangers.
    network : str
        Name of the network.
    assumptions, warnings : tuple of str
    left_out : mapping of str to str
        Reason by site.
    provenance : mapping
        Settings, versions, inputs, command.
    """

    dataset: xr.Dataset
    network: str
    assumptions: tuple[str, ...]
    warnings: tuple[str, ...]
    left_out: Mapping[str, str]
    provenance: Mapping[str, Any]

    def describe(self) -> Description:
        """Say what it holds."""
        ratio, delay = self.dataset["amplitude_ratio"].values, self.dataset["delay"].values
        return f"Fingerprint of {self.network}", {
            "sites": f"{len(ratio)}, {len(self.left_out)} left out",
            "members": ", ".join(map(str, self.dataset["member"].values)),
            "ratio": f"{ratio.min():.3f} to {ratio.max():.3f}",
            "delay": f"{delay.min():.1f} to {delay.max():.1f} days",
            "warnings": counted(len(self.warnings), "warning"),
        }


@dataclass(frozen=True)
class Row:
    """What one site sees under one member, under all of them, or in a reference case.

    Parameters
    ----------
    site : str
    latitude_deg, longitude_deg : float
    kind : str
        ``"mean"``, ``"member"`` or ``"reference"``.
    member : str
    amplitude_ratio, delay_days : float
    amplitude_ratio_spread, delay_spread_days : float or None
        Standard deviations over the members, in the row of the mean; None for a single member.
    """

    site: str
    latitude_deg: float
    longitude_deg: float
    kind: str
    member: str
    amplitude_ratio: float
    delay_days: float
    amplitude_ratio_spread: float | None = None
    delay_spread_days: float | None = None


@dataclass(frozen=True)
class DegreeRow:
    """How far the ensemble mean at one site, solved to one degree, is from the finest.

    Parameters
    ----------
    site : str
    degree : int
    amplitude_ratio, delay_days : float
    ratio_change, delay_change_days : float
        This degree less the finest.
    """

    site: str
    degree: int
    amplitude_ratio: float
    delay_days: float
    ratio_change: float
    delay_change_days: float


def fingerprint_dataset(
    sites: Sequence[Site],
    fingerprints: xr.Dataset,
    maps: xr.Dataset,
    footprints: xr.Dataset,
    by_degree: xr.DataArray,
    *,
    network: str,
    reference_year: int,
) -> xr.Dataset:
    """Join everything into one Dataset, with what a table and a map show of it.

    Parameters
    ----------
    sites : sequence of Site
    fingerprints : xarray.Dataset
        contracts.FINGERPRINTS.
    maps, footprints : xarray.Dataset
        From `fingerprint.maps`.
    by_degree : xarray.DataArray
    network : str
    reference_year : int

    Returns
    -------
    xarray.Dataset
        contracts.FINGERPRINT_STUDY; maps and footprints as float32.
    """
    everywhere = as_complex(maps["map_admittance"].values)
    members = as_complex(fingerprints["admittance"].values)
    latitude = np.array([site.latitude_deg for site in sites], dtype=float)
    longitude = np.array([site.longitude_deg for site in sites], dtype=float)
    on_map = value_on_map(everywhere.mean(axis=0), list(latitude), list(longitude))
    field = ("lat", "lon")
    variables: dict[str, Any] = {
        **{str(name): variable for name, variable in fingerprints.data_vars.items()},
        **_mean_and_spread(members),
        "admittance_by_degree": by_degree,
        "map_admittance": maps["map_admittance"].astype(np.float32),
        "map_amplitude_ratio": (field, _small(np.abs(everywhere.mean(axis=0))), {"units": "1"}),
        "map_delay": (field, _small(delay_days(everywhere.mean(axis=0))), {"units": "d"}),
        **({"map_spread": (field, _small(_complex_spread(everywhere)), {"units": "1"})} if len(members) > 1 else {}),
        "map_difference": ("site", np.abs(on_map - members.mean(axis=0)), {"units": "1"}),
        "ocean_fraction": maps["ocean_fraction"].astype(np.float32),
        "footprint": footprints["footprint"].astype(np.float32),
        "footprint_ratio": footprints["footprint_ratio"].astype(np.float32),
        "constant": footprints["constant"],
    }
    joined = xr.Dataset(variables, attrs=dict(fingerprints.attrs)).assign_coords(
        latitude=("site", latitude, {"units": "degrees_north", "standard_name": "latitude"}),
        longitude=("site", longitude, {"units": "degrees_east", "standard_name": "longitude"}),
    )
    for name in joined.data_vars:
        joined[name].attrs["long_name"] = _LONG_NAMES[str(name)]
    return _described(joined, network, reference_year)


def map_agreement(dataset: xr.Dataset) -> tuple[float, float, str]:
    """Say how far the map, interpolated to the sites, is from the sites' own admittances.

    Parameters
    ----------
    dataset : xarray.Dataset
        contracts.FINGERPRINT_STUDY.

    Returns
    -------
    middle, largest : float
        Median and largest distance.
    worst : str
        Site of the largest.
    """
    distance = dataset["map_difference"].values
    farthest = int(np.argmax(distance))
    return float(np.median(distance)), float(distance[farthest]), str(dataset["site"].values[farthest])


def site_rows(dataset: xr.Dataset) -> list[Row]:
    """Every number of the table, site by site: the mean, the members, the reference cases.

    Parameters
    ----------
    dataset : xarray.Dataset
        contracts.FINGERPRINT_STUDY.

    Returns
    -------
    list of Row
    """
    members, cases = (as_complex(dataset[name].values) for name in ("admittance", "reference_admittance"))
    rows = []
    for index, site in enumerate(dataset["site"].values):
        place = (str(site), float(dataset["latitude"][index]), float(dataset["longitude"][index]))
        of_spread = ("amplitude_ratio_spread", "delay_spread")
        spread = [float(dataset[name][index]) if name in dataset else None for name in of_spread]
        ratio, delay = float(dataset["amplitude_ratio"][index]), float(dataset["delay"][index])
        rows.append(Row(*place, "mean", MEAN, ratio, delay, *spread))
        for kind, names, values in (("member", "member", members), ("reference", "case", cases)):
            rows += [
                Row(*place, kind, str(name), float(np.abs(value)), float(delay_days(value)))
                for name, value in zip(dataset[names].values, values[:, index], strict=True)
            ]
    return rows


def degree_rows(dataset: xr.Dataset) -> list[DegreeRow]:
    """How the ensemble mean settles with the degree, site by site.

    Parameters
    ----------
    dataset : xarray.Dataset
        contracts.FINGERPRINT_STUDY.

    Returns
    -------
    list of DegreeRow
        The finest degree included, with changes of zero.
    """
    values = as_complex(dataset["admittance_by_degree"].values)
    finest = values[-1]
    ratio, delay = np.abs(values), delay_days(values)
    ratio_change, delay_change = ratio - np.abs(finest), delay_days(values / finest)
    return [
        DegreeRow(
            str(site), int(degree), *(float(each[row, column]) for each in (ratio, delay, ratio_change, delay_change))
        )
        for column, site in enumerate(dataset["site"].values)
        for row, degree in enumerate(dataset["degree"].values)
    ]


def compared_degrees(dataset: xr.Dataset) -> tuple[int, int]:
    """Degrees between which it is judged whether the admittance is settled.

    Parameters
    ----------
    dataset : xarray.Dataset
        contracts.FINGERPRINT_STUDY.

    Returns
    -------
    lower, upper : int
        That of the settings and the finest; where these are one, the last two.
    """
    degrees = [int(degree) for degree in dataset["degree"].values]
    own = int(dataset.attrs["max_degree"])
    return (own, degrees[-1]) if own < degrees[-1] else (degrees[-2], degrees[-1])


def unsettled_sites(dataset: xr.Dataset) -> list[tuple[str, float]]:
    """Sites whose admittance is not settled at the degree of the settings, and by how much it still moves.

    Parameters
    ----------
    dataset : xarray.Dataset
        contracts.FINGERPRINT_STUDY.

    Returns
    -------
    list of (str, float)
    """
    values = as_complex(dataset["admittance_by_degree"].values)
    lower, _ = compared_degrees(dataset)
    change = np.abs(values[list(dataset["degree"].values).index(lower)] - values[-1])
    sites = zip(dataset["site"].values, change, strict=True)
    return [(str(site), float(size)) for site, size in sites if size > UNSETTLED]


def _mean_and_spread(members: NDArray[np.complex128]) -> dict[str, tuple[str, NDArray[np.float64], dict[str, str]]]:
    mean = members.mean(axis=0)
    found = {
        "amplitude_ratio": ("site", np.abs(mean), {"units": "1"}),
        "delay": ("site", delay_days(mean), {"units": "d"}),
    }
    if len(members) > 1:
        about = delay_days(members / mean)  # about the mean, so that nothing wraps
        found["amplitude_ratio_spread"] = ("site", np.abs(members).std(axis=0, ddof=1), {"units": "1"})
        found["delay_spread"] = ("site", about.std(axis=0, ddof=1), {"units": "d"})
    return found


def _complex_spread(values: NDArray[np.complex128]) -> NDArray[np.float64]:
    return np.asarray(np.sqrt(values.real.var(axis=0, ddof=1) + values.imag.var(axis=0, ddof=1)))


def _small(values: NDArray[np.float64]) -> NDArray[np.float32]:
    return np.asarray(values, dtype=np.float32)


def _described(dataset: xr.Dataset, network: str, reference_year: int) -> xr.Dataset:
    """Add bounds of the cells and the attributes by which a stranger finds out what the file is."""
    latitude, longitude = dataset["lat"], dataset["lon"]
    half = np.array([-0.5, 0.5])
    described = dataset.assign_coords(
        lat=latitude.assign_attrs(standard_name="latitude", axis="Y", bounds="lat_bounds"),
        lon=longitude.assign_attrs(standard_name="longitude", axis="X", bounds="lon_bounds"),
        degree=dataset["degree"].assign_attrs(long_name="highest spherical-harmonic degree of the solve", units="1"),
    )
    for name, method in _CELL_METHODS.items():
        if name in described:
            described[name].attrs["cell_methods"] = method
    return described.assign(
        lat_bounds=(("lat", "edge"), latitude.values[:, None] + half),
        lon_bounds=(("lon", "edge"), longitude.values[:, None] + half),
    ).assign_attrs(
        Conventions=CONVENTIONS,
        title=f"{network}: fingerprints, maps and footprints of the annual cycle of ocean mass",
        summary="Complex site admittance under each load member, the same for every place, and the footprint of every "
        "site. Maps hold values at the centres of cells of one degree, footprints means over these cells.",
        date_created=datetime.now(UTC).isoformat(timespec="seconds"),
        phase_reference=f"1 January {reference_year} 00:00 UTC",
        geospatial_lat_min=-90.0, geospatial_lat_max=90.0, geospatial_lon_min=0.0, geospatial_lon_max=360.0,
    )  # fmt: skip
