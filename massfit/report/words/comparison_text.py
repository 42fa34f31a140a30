"""A comparison with satellite gravity in words, for a terminal and for the page."""

from collections.abc import Mapping
from typing import Any


def verdict(comparison: Mapping[str, Any]) -> str:
    """Say in one sentence whether network and satellites agree.

    Parameters
    ----------
    comparison : mapping
        `comparison` of `estimate.json`.

    Returns
    -------
    str
    """
    apart = comparison["difference"]
    if apart["probability"] is None:
        return (
            f"Network less satellites: {apart['amplitude_hpa']:+.2f} hPa in amplitude and {apart['days']:+.0f} days. "
            f"The files of {comparison['satellite']['method']} state no errors: nothing says whether that is much; "
            "model_sd_hpa of [gravity] may state one."
        )
    size = (
        f"they differ by {apart['amplitude_hpa']:+.2f} ± {apart['amplitude_sd_hpa']:.2f} hPa in amplitude and "
        f"{apart['days']:+.0f} ± {apart['days_sd']:.0f} days (network less satellites); chi-square "
        f"{apart['chi_square']:.1f} with 2 degrees of freedom, probability {apart['probability']:.2g}"
    )
    if not apart["compatible"]:
        return f"Network and satellites do not agree: {size}."
    joint = apart["joint"]
    together = (
        f"Together: {joint['amplitude_hpa']:.2f} ± {joint['amplitude_sd_hpa']:.2f} hPa, peak {joint['peak_date']} "
        f"± {joint['peak_day_sd']:.0f} days."
    )
    return f"Network and satellites agree within their errors: {size}. {together}"


def stated(each: Mapping[str, Any]) -> str:
    """Say what one determination found."""
    if each["amplitude_sd_hpa"] is None:
        return f"{each['amplitude_hpa']:.2f} hPa, {each['peak_date']}, no error stated"
    return (
        f"{each['amplitude_hpa']:.2f} ± {each['amplitude_sd_hpa']:.2f} hPa, {each['peak_date']} "
        f"± {each['peak_day_sd']:.0f} days"
    )


def comparison_text(comparison: Mapping[str, Any]) -> str:
    """Lay a comparison out for a terminal.

    Parameters
    ----------
    comparison : mapping
        `comparison` of `estimate.json`.

    Returns
    -------
    str
    """
    both = [f"  {comparison[name]['label']:<20} {stated(comparison[name])}" for name in ("network", "satellite")]
    others = [f"  {each['label']:<20} {stated(each)}{_probability(each)}" for each in comparison["others"]]
    lines = [verdict(comparison), "", "Water of the whole ocean", *both, *others]
    if comparison["bridge"]:
        lines += ["", "The network across the satellites' gap"]
        lines += [
            f"  {each['label']:<14} {each['start']} to {each['end']}: {stated(each)}" for each in comparison["bridge"]
        ]
    for solution in comparison["solutions"]:
        lines += ["", f"Solution {solution['name']}", *(f"  {action}" for action in solution["actions"])]
    width = max(len(row["name"]) for row in comparison["choices"])
    head = f"{'What each choice does':<{width + 2}}  {'as the kernel sees it':<21}  whole ocean"
    lines += ["", head, *(f"  {row['name']:<{width}}  {_choice(row)}" for row in comparison["choices"])]
    lines += ["", *(f"warning: {text}" for text in comparison["warnings"])]
    return "\n".join(lines).rstrip()


def _probability(other: Mapping[str, Any]) -> str:
    value = other["difference"]["probability"]
    return "" if value is None else f"; network less this: probability {value:.2g}"


def _choice(row: Mapping[str, Any]) -> str:
    if row["kernel"] is None:
        return f"not possible: {row['problem']}"
    return "  ".join(
        f"{row[key]['water_mm']:6.2f} mm, day {row[key]['peak_day']:5.1f}" for key in ("kernel", "whole_ocean")
    )
