"""The tables of the report page: numbers of the run, spelled for reading."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import xarray as xr

from massfit.phasor import delay_days, peak_days
from massfit.report.words.run_text import SHARE_WORDS
from massfit.results.answer import spoken_date, spoken_range
from massfit.results.citations import Citation, spoken
from massfit.results.site_facts import member_table


@dataclass(frozen=True)
class Table:
    """Text in rows and columns.

    Parameters
    ----------
    title : str
        What a screen reader announces.
    head : sequence of str
    rows : sequence of sequence of str
        The first cell of each names the row.
    wordy : bool
        The last column holds sentences.
    """

    title: str
    head: Sequence[str]
    rows: Sequence[Sequence[str]]
    wordy: bool = False


_QUANTITIES = (
    ("amplitude / hPa", "amplitude_hpa", ".3f"),
    ("in phase / hPa", "in_phase_hpa", ".3f"),
    ("quadrature / hPa", "quadrature_hpa", ".3f"),
    ("mm of fresh water", "water_mm", ".2f"),
    ("mm of sea water", "sea_water_mm", ".2f"),
    ("Gt", "mass_gt", ".0f"),
    ("peak, days after 1 January", "peak_day", ".1f"),
)

_SERIES_WORDS = {
    "record": "daily record",
    "long_period_tides": "long-period tides",
    "pole_tide": "pole tide",
    "ocean_mean_atmosphere": "ocean-mean air pressure",
    "circulation": "circulation",
    "calibrations": "calibrations",
    "own_ocean_mean": "own ocean mean taken off",
    "self_attraction": "self-attraction added",
    "local_air_pressure": "local air pressure added",
}


def quantities_table(summary: Mapping[str, Any]) -> Table:
    """Tabulate the answer in every unit."""
    head = ("", "median", "mean", "sd", "50 % region", "95 % region")
    return Table("The answer", head, [_quantity(label, summary[key], form) for label, key, form in _QUANTITIES])


def _quantity(label: str, value: Mapping[str, Any], form: str) -> list[str]:
    centre = [f"{value[key]:{form}}" for key in ("median", "mean", "sd")]
    regions = [f"{value[key][0]:{form}} to {value[key][1]:{form}}" for key in ("region50", "region95")]
    return [label, *centre, *regions]


def shares_table(summary: Mapping[str, Any]) -> Table:
    """Tabulate the shares of the variance, the largest first."""
    shares = sorted(summary["variance_share"].items(), key=lambda item: -item[1])
    said = {name: f"{100 * share:.1f} %" if share else "not in the model" for name, share in shares}
    rows = [[SHARE_WORDS.get(name, name), text] for name, text in said.items()]
    return Table("Shares of the variance", ("source", "share of the variance"), rows)


def alternatives_table(summary: Mapping[str, Any]) -> Table | None:
    """Tabulate the answer under other choices."""
    if "what_if" in summary:
        return _what_if_table(summary)
    head = ("instead", "shift / sd", "width ratio", "amplitude / hPa", "peak")
    rows = [_alternative(row, summary["reference_year"]) for row in (_as_done(summary), *summary["alternatives"])]
    return Table("Other choices", head, rows) if len(rows) > 1 else None


def _as_done(summary: Mapping[str, Any]) -> dict[str, Any]:
    phasor = {name: summary[name]["mean"] for name in ("in_phase_hpa", "quadrature_hpa")}
    return {"name": "as it was done", "shift_sd": 0.0, "sd_ratio": 1.0, **phasor}


def _what_if_table(summary: Mapping[str, Any]) -> Table:
    """Tabulate every other choice, drawn anew."""
    rows = [
        [
            f"{row['kind']}: {row['name']}" + ("" if row["converged"] else " (did not converge)"),
            f"{row['shift_sd']:.2f}",
            f"{row['sd_ratio']:.2f}",
            f"{row['in_phase_hpa']:.3f}",
            f"{row['quadrature_hpa']:.3f}",
            f"{row['amplitude_hpa']:.3f}",
            spoken_date(row["peak_day"], summary["reference_year"]),
            str(row["sites"]),
        ]
        for row in summary["what_if"]
    ]
    head = (
        "instead", "shift / sd", "width ratio", "in phase / hPa", "quadrature / hPa", "amplitude / hPa",
        "peak", "sites",
    )  # fmt: skip
    return Table("Other choices", head, rows)


def _alternative(row: Mapping[str, Any], year: int) -> list[str]:
    phasor = complex(row["in_phase_hpa"], row["quadrature_hpa"])
    return [
        row["name"],
        f"{row['shift_sd']:.2f}",
        f"{row['sd_ratio']:.2f}",
        f"{abs(phasor):.3f}",
        spoken_date(float(peak_days(phasor)), year),
    ]


def years_table(summary: Mapping[str, Any]) -> Table | None:
    """Tabulate the cycle of every year."""
    rows = [
        [
            str(year["year"]),
            f"{100 * year['period_share']:.0f} %",
            f"{year['amplitude_hpa']['median']:.3f}",
            spoken_range(year["amplitude_hpa"]["region95"], ".3f"),
            spoken_date(year["peak_day"]["median"], summary["reference_year"]),
            f"{100 * year['seen']:.0f} %",
        ]
        for year in summary.get("years", [])  # results of before it was told have none
    ]
    head = ("year", "of the period", "amplitude / hPa", "95 % region", "peak", "known from the records")
    return Table("Cycle of each year", head, rows) if rows else None


def predictive_table(summary: Mapping[str, Any]) -> Table | None:
    """Tabulate the scatter observed beside what the fitted model expects."""
    rows = [
        [row["meaning"], f"{row['observed']:.2f}", spoken_range(row["expected"], ".2f"), f"{row['p']:.3f}"]
        for row in summary["predictive_check"]["checks"]
    ]
    head = ("scatter of the site phasors", "observed", "expected, 95 %", "p")
    return Table("Scatter observed and expected", head, rows) if rows else None


_CALIBRATED = {
    "region": "two-dimensional region", "in_phase": "in phase", "quadrature": "quadrature", "amplitude": "amplitude",
    "peak_day": "peak day",
}  # fmt: skip


def calibration_table(summary: Mapping[str, Any]) -> Table | None:
    """Tabulate how many known truths the regions of surrogates held."""
    if "calibration" not in summary:
        return None
    rows = [
        [
            f"{_CALIBRATED[row['quantity']]}, {100 * row['level']:.0f} %",
            str(row["inside"]),
            f"{row['expected'][0]} to {row['expected'][1]}",
            f"{row['share']:.2f}",
            spoken_range(row["limits"], ".2f"),
        ]
        for row in summary["calibration"]["coverage"]
    ]
    return Table("Truths held", ("region", "truths held", "expected", "share", "its 95 % limits"), rows)


def site_table(summary: Mapping[str, Any]) -> Table:
    """Tabulate place, coverage, phasor and standing of every site."""
    head = (
        "site", "latitude", "longitude", "first day", "last day", "days", "coverage", "amplitude / hPa", "peak",
        "record sd / hPa", "fingerprint ratio", "delay / d", "residual / sigma", "outlier probability",
    )  # fmt: skip
    return Table("The sites", head, [_site(entry, summary["reference_year"]) for entry in summary["sites"]])


def _site(entry: Mapping[str, Any], year: int) -> list[str]:
    admittance = complex(*entry["admittance"])
    return [
        entry["id"] + (" *" if entry["warnings"] else ""),
        f"{entry['latitude']:.2f}",
        f"{entry['longitude']:.2f}",
        entry.get("first_day") or "",
        entry.get("last_day") or "",
        _known(entry["days"], "d"),
        _known(entry.get("coverage"), ".0%").replace("%", " %"),
        *_amplitude_and_peak(entry["phasor_hpa"], year),
        _known(entry["reduced_sd_hpa"], ".2f"),
        f"{abs(admittance):.3f}",
        f"{float(delay_days(admittance)):.1f}",
        f"{entry['standardised_residual']:.2f}",
        f"{entry['outlier_probability']:.2f}",
    ]


def _known(value: float | None, form: str) -> str:
    """Spell a number that a site which was reduced elsewhere does not have."""
    return "unknown" if value is None else f"{value:{form}}"


def _amplitude_and_peak(phasor_hpa: Sequence[float], year: int) -> tuple[str, str]:
    phasor = complex(*phasor_hpa)
    day, month = spoken_date(float(peak_days(phasor)), year).split()
    return f"{abs(phasor):.2f}", f"{day} {month[:3]}"


def left_out_table(summary: Mapping[str, Any]) -> Table | None:
    """Tabulate the sites that were left out, and why."""
    rows = [[name, reason] for name, reason in summary["left_out"].items()]
    return Table("Sites left out", ("site left out", "because"), rows, wordy=True) if rows else None


def corrections_table(summary: Mapping[str, Any]) -> Table | None:
    """Tabulate the annual cycle of the record, of every series that was subtracted and of what is left, by site."""
    own = {site["id"]: _own_corrections(site) for site in summary["sites"]}
    series = list(dict.fromkeys(name for cells in own.values() for name in cells))
    if not series:
        return None
    # the tides first and the models last, in the order they have where none is missing
    series.sort(key=lambda name: max(list(cells).index(name) for cells in own.values() if name in cells))
    left = {site["id"]: _components(site["phasor_hpa"]) for site in summary["sites"]}
    rows = [[name, left[name], *(cells.get(label, "") for label in series)] for name, cells in own.items() if cells]
    head = ("site", "phasor of the site", *series)
    return Table("Annual cycle of record and subtracted series, in phase and quadrature, hPa", head, rows)


def _own_corrections(site: Mapping[str, Any]) -> dict[str, str]:
    cells = {}
    for row in site.get("corrections", []):
        model = {None: "", "mean": " (mean of models)"}.get(row["model"], f": {row['model']}")
        cells[_SERIES_WORDS[row["series"]] + model] = _components(row["phasor_hpa"])
    return cells


def _components(phasor_hpa: Sequence[float]) -> str:
    return " ".join(f"{value:+.3f}" for value in phasor_hpa).replace("-", "\N{MINUS SIGN}")


def fingerprint_table(summary: Mapping[str, Any], fingerprints: xr.Dataset) -> Table:
    """Tabulate ratio, delay and their ranges over the load members, by site."""
    head = ("site", "ratio", "least to largest", "delay / d", "least to largest", "spread / %")
    rows = [
        [
            row["id"],
            f"{row['ratio']:.3f}",
            f"{row['ratio_range'][0]:.3f} to {row['ratio_range'][1]:.3f}",
            f"{row['delay_days']:.1f}",
            f"{row['delay_range_days'][0]:.1f} to {row['delay_range_days'][1]:.1f}",
            _known(None if row["spread"] is None else 100.0 * row["spread"], ".1f"),
        ]
        for row in member_table(fingerprints, [site["id"] for site in summary["sites"]])
    ]
    return Table("Fingerprint of each site over the load members", head, rows)


def actions_table(summary: Mapping[str, Any], records: xr.Dataset | None) -> Table | None:
    """Tabulate every deployment, its number of daily means and what was done to it."""
    if records is None:
        return None
    days = dict(zip(records["deployment"].values.tolist(), records["row_size"].values.tolist(), strict=True))
    rows = []
    for deployment, actions in summary["actions"].items():
        said = [(action, f" ({action['detail']})" if action["detail"] else "") for action in actions]
        done = "; ".join(f"{action['what']}: {action['count']}{detail}" for action, detail in said)
        rows.append([deployment, str(days[deployment]), done])
    return Table("What was done to each record", ("deployment", "daily means", "what was done"), rows, wordy=True)


def citations_table(cited: Sequence[Citation]) -> Table:
    """Tabulate what a result rests on."""
    rows = [[each.what, each.text if each.source is None else spoken(each.source)] for each in cited]
    return Table("Methods and data to cite", ("used for", "cite"), rows, wordy=True)


def input_table(provenance: Mapping[str, Any]) -> Table | None:
    """Tabulate every file that was read, with its digest."""
    rows = [list(item) for item in sorted(provenance["inputs"].items())]
    return Table("Files that were read", ("input", "SHA-256"), rows, wordy=True) if rows else None
