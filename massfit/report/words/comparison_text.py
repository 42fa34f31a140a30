"""A comparison with satellite gravity in words, for a terminal and for the page."""

from collections.abc import Mapping
from typing import Any

NOTICED = 2.45
"""Standard deviations at which a difference along one direction has a probability of 0.05: sqrt(-2 ln 0.05)."""

LITTLE_LEARNED = 0.5
"""Below this part of the variance a likeness of years is called assumed."""


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
    least = NOTICED * apart["amplitude_sd_hpa"]
    unseen = f"At these errors a difference of amplitude below about {least:.2f} hPa would pass for none."
    return f"Network and satellites agree within their errors: {size}. {unseen} {together}"


def stated(each: Mapping[str, Any]) -> str:
    """Say what one determination found."""
    if each["amplitude_sd_hpa"] is None:
        return f"{each['amplitude_hpa']:.2f} hPa, {each['peak_date']}, no error stated"
    return (
        f"{each['amplitude_hpa']:.2f} ± {each['amplitude_sd_hpa']:.2f} hPa, {each['peak_date']} "
        f"± {each['peak_day_sd']:.0f} days"
    )


def bridge_sentences(comparison: Mapping[str, Any]) -> list[str]:
    """Say whether the network sees a change across the gap, and how much of that is the records' own."""
    step = comparison.get("bridge_step")
    if step is None:
        return []
    sds = [step["covariance_hpa2"][place][place] ** 0.5 for place in (0, 1)]
    size = (
        f"In the gap less before and after it: {step['in_phase_hpa']:+z.3f} ± {sds[0]:.3f} hPa in phase, "
        f"{step['quadrature_hpa']:+z.3f} ± {sds[1]:.3f} hPa in quadrature."
    )
    assumed = (
        f"Before it sees a record the model expects ± {step['assumed_sd_hpa']:.3f} hPa (year_sd_hpa); the records take "
        f"{100 * step['learned']:.0f} % of that variance away"
    )
    if step["learned"] < LITTLE_LEARNED:
        return [size, f"{assumed}: that the parts are alike is mostly assumed, not seen."]
    return [size, f"{assumed}."]


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
        lines += [f"  {text}" for text in bridge_sentences(comparison)]
    for solution in comparison["solutions"]:
        lines += ["", f"Solution {solution['name']}", *(f"  {action}" for action in solution["actions"])]
    width = max(len(row["name"]) for row in comparison["choices"])
    name = comparison["choices_of"]
    head = f"{'':<{width + 2}}  {'as the kernel sees it':<21}  whole ocean"
    lines += ["", f"What each choice does to {name}", head]
    lines += [f"  {row['name']:<{width}}  {_choice(row)}" for row in comparison["choices"]]
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
