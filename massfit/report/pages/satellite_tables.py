"""Tables of the comparison with satellite gravity."""

from collections.abc import Mapping
from typing import Any

from massfit.report.pages.page_tables import Table
from massfit.report.words.comparison_text import stated


def satellite_tables(summary: Mapping[str, Any]) -> dict[str, Table | None]:
    """Tabulate a comparison, where there is one.

    Parameters
    ----------
    summary : mapping
        The content of `estimate.json`.

    Returns
    -------
    dict of str to Table or None
        None for each where there is no comparison.
    """
    names = ("determinations", "choices", "satellite_sites", "geocentre", "definitions", "bridge", "satellite_actions")
    comparison = summary.get("comparison")
    if comparison is None:
        return dict.fromkeys(names)
    made = (
        _determinations(comparison),
        _choices(comparison),
        _sites(comparison) if comparison["sites"] else None,
        _geocentre(comparison),
        _definitions(comparison),
        _bridge(comparison) if comparison["bridge"] else None,
        _actions(comparison),
    )
    return dict(zip(names, made, strict=True))


def _determinations(comparison: Mapping[str, Any]) -> Table:
    rows = [
        [each["label"], stated(each), "", each["method"]] for each in (comparison["network"], comparison["satellite"])
    ]
    rows[1][2] = _probability(comparison["difference"])
    if comparison["difference"]["joint"] is not None:
        joint = comparison["difference"]["joint"]
        rows.append([joint["label"], stated(joint), "", joint["method"]])
    rows += [
        [each["label"], stated(each), _probability(each["difference"]), each["method"]] for each in comparison["others"]
    ]
    return Table("Determinations", ("", "amplitude and peak", "p beside the network", "from"), rows, wordy=True)


def _choices(comparison: Mapping[str, Any]) -> Table:
    head = ("choice", "as the kernel sees it / mm", "day", "whole ocean / mm", "day")
    rows = []
    for row in comparison["choices"]:
        cells = [
            text
            for key in ("kernel", "whole_ocean")
            for text in ((f"{row[key]['water_mm']:.2f}", f"{row[key]['peak_day']:.1f}") if row[key] else ("", ""))
        ]
        rows.append([row["name"] + (f" (not possible: {row['problem']})" if row["problem"] else ""), *cells])
    return Table(f"What each choice does to the answer of {comparison['choices_of']}", head, rows)


def _sites(comparison: Mapping[str, Any]) -> Table:
    head = ("site", "recorder / hPa", "day", "satellites / hPa", "day", "p")
    rows = []
    for each in comparison["sites"]:
        own = each["recorder"]
        recorder = _with_error(own) if own else ("", "")
        rows.append([each["id"], *recorder, *_with_error(each["satellite"]), _probability(each)])
    return Table("Satellite pressure at each recorder", head, rows)


def _with_error(reading: Mapping[str, Any]) -> tuple[str, str]:
    amplitude, day = f"{reading['amplitude_hpa']:.2f}", f"{reading['peak_day']:.0f}"
    if reading.get("amplitude_sd_hpa") is None:
        return amplitude, day
    return f"{amplitude} ± {reading['amplitude_sd_hpa']:.2f}", f"{day} ± {reading['peak_day_sd']:.0f}"


def _geocentre(comparison: Mapping[str, Any]) -> Table:
    head = ("axis", "this water / mm", "day", "ITRF2020 / mm", "day")
    rows = [
        [
            axis, f"{each['amplitude']:.2f} ± {each['amplitude_sd']:.2f}",
            f"{each['peak_day']:.0f} ± {each['peak_day_sd']:.0f}",
            f"{each['itrf2020_amplitude']:.2f} ± {each['itrf2020_sd']:.2f}", f"{each['itrf2020_peak_day']:.0f}",
        ]
        for axis, each in comparison["geocentre_mm"].items()
    ]  # fmt: skip
    return Table("Annual motion of the geocentre", head, rows)


def _definitions(comparison: Mapping[str, Any]) -> Table:
    head = ("cycle", "hPa", "day", "mm fresh", "mm sea", "mm fresh, peak to trough", "Gt", "Gt, 3.6184e14 m2")
    rows = []
    for each in comparison["definitions"]:
        whose = each["determination"] if each["name"] == "as it is" else f"\N{NO-BREAK SPACE}… {each['name']}"
        sizes = (
            f"{each['amplitude_hpa']:.3f}", f"{each['peak_day']:.1f}", f"{each['water_mm']:.2f}",
            f"{each['sea_water_mm']:.2f}", f"{each['water_peak_to_trough_mm']:.2f}", f"{each['mass_gt']:.0f}",
            f"{each['mass_textbook_area_gt']:.0f}",
        )  # fmt: skip
        rows.append([whose, *sizes])
    return Table("Each cycle in other definitions", head, rows)


def definition_words(comparison: Mapping[str, Any]) -> str:
    """Say once what a cycle is of in each definition."""
    quantities = {each["name"]: each["quantity"] for each in comparison["definitions"]}
    return "; ".join(f"{name}: {quantity}" for name, quantity in quantities.items())


def _bridge(comparison: Mapping[str, Any]) -> Table:
    rows = [[each["label"], f"{each['start']} to {each['end']}", stated(each)] for each in comparison["bridge"]]
    return Table("The network across the satellites' gap", ("", "days", "amplitude and peak"), rows)


def _actions(comparison: Mapping[str, Any]) -> Table:
    rows = [[each["name"], text] for each in comparison["solutions"] for text in (*each["actions"], *_left_out(each))]
    return Table("What was done to the monthly fields", ("solution", "action"), rows, wordy=True)


def _probability(difference: Mapping[str, Any]) -> str:
    return "" if difference["probability"] is None else f"{difference['probability']:.2g}"


def _left_out(solution: Mapping[str, Any]) -> list[str]:
    return [f"left out: {text}" for text in solution["left_out"]]
