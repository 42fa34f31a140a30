"""The text of a network file, commented for a human reader."""

import json
from collections.abc import Mapping, Sequence
from dataclasses import fields
from datetime import date
from typing import Any

import numpy as np
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.network import CirculationModel, ReducedSite
from massfit.records.record import Record
from massfit.settings import Priors, Settings
from massfit.site import Interval, Site

_HEAD = """\
# Network file: everything massfit needs to turn these records into the annual cycle of ocean mass.
# Paths are relative to this file. Times are UTC. Units stand in the names.
"""

_COMMENTS: dict[str, dict[str, str]] = {
    "[network]": {
        "reference_year": "phases count from 1 January 00:00 UTC of this year",
        "start": "first day used",
        "end": "last day used",
    },
    "[corrections]": {
        "ocean_mean_atmosphere": 'mean air pressure over the ocean; or "already-removed"',
        "tides": 'short tides only: "remove" or "already-removed"',
        "long_period_tides": '"equilibrium" is self-consistent; "equilibrium-classical" or "none"',
        "pole_tide": '"observed" (from observed polar motion) or "none"',
        "ocean_mean_atmosphere_sd_hpa": "common error of its annual cycle, in phase and quadrature each",
        "atmosphere_load": "annual cycle of air pressure on land, for its self-attraction",
        "ocean_mean_phasor_hpa": "annual cycle of the ocean-mean air pressure that was removed",
        "air_pressure": "surface air pressure; gives ocean mean, self-attraction and site series",
    },
    "[[circulation]]": {
        "ocean_mean": '"removed", or the file of the model\'s own ocean mean, which is then subtracted',
        "air_pressure": '"not-forced", "forced-included" or "forced-excluded"',
    },
    "[fingerprint]": {
        "loads": "members of the load ensemble, equal weight",
        "sea_water_density": "kg m-3",
        "water_vapour_kg": "half the annual range of the water vapour in the air",
        "water_vapour_peak": "month-day of its maximum",
        "perturbed_amplitude_sd": 'of "perturbed:N" members: spread of the logarithm of each region\'s amplitude',
        "perturbed_delay_sd_days": "and of its timing",
        "earth_model": '"prem", or the CSV file of an Earth profile',
    },
    "[gravity]": {
        "fields": "monthly fields of one centre or more: folder, archive or file",
        "degree_one": "table of degree 1",
        "low_degree": "table of C20 and C30",
        "determinations": "other determinations, to be set beside",
        "buffer_km": "ocean nearer to land is left out",
        "smoothing_km": "a Gaussian falls to one half there; 0 for none",
        "c20": '"replaced" by low_degree, or the fields\' "own"',
        "degree_zero": '"atmosphere", "water-vapour" or "none"; "best" is the first at hand',
    },
    "[posterior]": {
        "site_scatter": '"student-t" or "normal"',
        "group_scatter": "true, false, or a correlation length in km",
        "model_truth": '"exchangeable" (r = 1) or "centred" (r = 0)',
    },
}


def network_text(
    settings: Settings,
    sites: Sequence[tuple[Site, Sequence[Mapping[str, Any]]]],
    circulation: Sequence[Mapping[str, Any]],
    reduced: Sequence[ReducedSite] = (),
    models_elsewhere: Sequence[str] = (),
) -> str:
    """Text of a network file.

    Parameters
    ----------
    settings : Settings
        With the files that hold the fields.
    sites : sequence of (Site, deployment tables)
        Deployment tables as :func:`deployment_table` makes them.
    circulation : sequence of mapping
        As :func:`circulation_table` makes them.
    reduced : sequence of ReducedSite
        Sites that were reduced elsewhere.
    models_elsewhere : sequence of str
        Models that only those have subtracted.

    Returns
    -------
    str
        TOML.
    """
    priors = {key: value for key, value in _values(settings.priors).items() if value != getattr(Priors(), key)}
    parts = [
        _HEAD,
        _table("[network]", _values(settings.frame)),
        _table("[corrections]", _values(settings.corrections)),
        *(_table("[[circulation]]", entry) for entry in circulation),
        *(_table("[[circulation]]", {"name": name, "subtracted_elsewhere": True}) for name in models_elsewhere),
        _table("[fingerprint]", _values(settings.fingerprint)),
        _table("[posterior]", _values(settings.posterior)),
        *([_table("[priors]", priors)] if priors else []),
        *([_table("[gravity]", _values(settings.gravity))] if settings.gravity is not None else []),
    ]
    elsewhere = {each.site: _reduced_table(each) for each in reduced}
    for site, deployments in sites:
        parts.append(_table("[[site]]", _site_table(site) | elsewhere.get(site.id, {})))
        parts += [_table("[[site.deployment]]", entry, indent="  ") for entry in deployments]
    return "\n".join(parts)


def deployment_table(record: Record, file: str, *, text: Mapping[str, Any]) -> Mapping[str, Any]:
    """Keys of one `[[site.deployment]]`.

    Parameters
    ----------
    record : Record
    file : str
        Its file, relative to the network file.
    text : mapping
        Further keys, for a text file.
    """
    steps: Any = [_Raw(_instant(step)) for step in record.steps]
    if not steps:
        steps = "find" if record.find_steps else "none"
    table = {"file": file, **text, "drift": record.drift, "steps": steps}
    if record.calibrations is not None:
        table["calibrations"] = calibration_file(file)
    if record.ramps:
        table["ramps"] = [_Raw(f"{{ from = {_instant(start)}, to = {_instant(end)} }}") for start, end in record.ramps]
    return table | ({"settling": record.settling} if record.settling != "model" else {})


def calibration_file(file: str) -> str:
    """Give the name of the file of calibrations that goes with the file of a record."""
    return f"{file.rpartition('.')[0]}_calibrations.csv"


def circulation_table(model: CirculationModel, file: str, ocean_mean: str) -> Mapping[str, Any]:
    """Keys of one `[[circulation]]`.

    Parameters
    ----------
    model : CirculationModel
    file, ocean_mean : str
        Files, relative to the network file; `ocean_mean` may be "removed".
    """
    partial = {"partial": model.partial} if model.partial != "missing" else {}
    reference = {"reference": model.reference} if model.reference else {}
    return {
        "name": model.name,
        "file": file,
        "ocean_mean": ocean_mean,
        "air_pressure": model.air_pressure,
        "assimilates_satellite_gravity": model.assimilates_satellite_gravity,
        **partial,
        **reference,
    }


class _Raw(str):
    """Text that is TOML already."""

    __slots__ = ()


def _values(section: Any) -> dict[str, Any]:
    values = {field.name: getattr(section, field.name) for field in fields(section)}
    return {key: value for key, value in values.items() if value not in (None, ())}


def _site_table(site: Site) -> dict[str, Any]:
    table: dict[str, Any] = {"id": site.id, "latitude": site.latitude_deg, "longitude": site.longitude_deg}
    table |= {key: getattr(site, key) for key in ("depth_m", "group") if getattr(site, key) is not None}
    table |= {"reference": site.reference} if site.reference else {}
    if site.excluded_because is not None:
        return table | {"exclude": site.excluded_because}
    return table | ({"exclude": [_Raw(_interval(each)) for each in site.exclude]} if site.exclude else {})


def _reduced_table(reduced: ReducedSite) -> dict[str, Any]:
    phasor, covariance = (reduced.phasor / PASCAL_PER_HPA).tolist(), _hpa2(reduced.covariance)
    table: dict[str, Any] = {"phasor_hpa": phasor, "phasor_covariance_hpa2": covariance, "years": reduced.years}
    if np.any(reduced.model_noise):
        table["model_noise_hpa2"] = _hpa2(reduced.model_noise)
    if reduced.phasor.ndim == 1:
        return table | {"subtracted": reduced.models}
    if not reduced.models:
        return table | {"phasor_hpa": phasor[0], "subtracted": ()}
    named = zip(reduced.models, phasor, strict=True)
    values = ", ".join(f"{toml_value(model)} = {toml_value(value)}" for model, value in named)
    return table | {"phasor_hpa": _Raw(f"{{ {values} }}")}


def _hpa2(covariance: NDArray[np.float64]) -> list[list[float]]:
    values: list[list[float]] = (covariance / PASCAL_PER_HPA**2).tolist()
    return values


def _interval(interval: Interval) -> str:
    after = interval.end + np.timedelta64(1, "ns")
    whole_day = after == after.astype("datetime64[D]")
    end = str(interval.end.astype("datetime64[D]")) if whole_day else _instant(interval.end)
    return f"{{ from = {_instant(interval.start)}, to = {end}, reason = {toml_value(interval.reason)} }}"


def _instant(instant: np.datetime64) -> str:
    unit = "s" if instant == instant.astype("datetime64[s]") else "us"
    return f"{instant.astype(f'datetime64[{unit}]')}Z"


def _table(header: str, values: Mapping[str, Any], *, indent: str = "") -> str:
    notes = _COMMENTS.get(header, {})
    lines = {key: f"{key} = {toml_value(value)}" for key, value in values.items()}
    width = max((len(line) for key, line in lines.items() if key in notes), default=0)
    noted = [f"{line:<{width}}  # {notes[key]}" if key in notes else line for key, line in lines.items()]
    return "\n".join(indent + line for line in [header, *noted]) + "\n"


def toml_value(value: Any) -> str:
    """Write a value as TOML; a JSON string is a TOML basic string but for the delete character."""
    if isinstance(value, _Raw):
        return str(value)
    if isinstance(value, list | tuple):
        return "[" + ", ".join(toml_value(item) for item in value) + "]"
    if isinstance(value, date):
        return value.isoformat()
    if isinstance(value, float):
        short = f"{value:g}"
        return short if float(short) == value else repr(value)
    return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
