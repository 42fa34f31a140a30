"""What `massfit screen` prints: how quiet the map is, the user's sites on it, and what to beware of, in 80 columns."""

from collections.abc import Mapping, Sequence
from typing import Any

from massfit.report.words.names import fitted, padded, wrapped
from massfit.report.words.run_text import WIDTH

_NAME = 22


def screening_text(summary: Mapping[str, Any]) -> str:
    """Write the models, the quantiles over the area of the map, the sites and the warnings.

    Parameters
    ----------
    summary : mapping
        The content of `screening.json`.

    Returns
    -------
    str
        Lines of at most 80 columns.
    """
    blocks = [
        [fitted(f"massfit: {summary['network']}", WIDTH), *_models(summary["models"])],
        _quantiles(summary),
        _sites(summary),
        [line for text in summary["warnings"] for line in wrapped(text, WIDTH, first="! ", rest="  ")],
    ]
    return "\n\n".join("\n".join(block) for block in blocks if block)


def _models(models: Sequence[Mapping[str, Any]]) -> list[str]:
    words = {"subtract": "ocean mean subtracted", "removed": "ocean mean removed before"}
    return [
        line
        for model in models
        for line in wrapped(
            f"{model['name']}: {model['first_day']} to {model['last_day']}, every {model['step_days']:g} days, "
            f"{model['cells']} cells, {words[model['ocean_mean']]}",
            WIDTH,
            rest="  ",
        )
    ]


def _quantiles(summary: Mapping[str, Any]) -> list[str]:
    quantiles = summary["quantiles"]
    rows = [("standard deviation", "sd"), ("of yearly means", "annual_mean_sd")]
    for years in summary["record_years"]:
        length = f"{years:g} year{'' if years == 1 else 's'}"
        rows.append((f"at the annual line, record of {length}", f"annual_sd_{years:g}_years"))
        rows.append(("  expected, with inflation", f"expected_annual_sd_{years:g}_years"))
    rows.append(("disagreement of the models there", "disagreement"))
    heads = [f"{100 * share:.0f} %" for share in quantiles["shares"]]
    lines = [f"{'hPa, 1 sd; so much of the area is quieter:':46}" + "".join(f"{head:>6}" for head in heads)]
    for name, key in rows:
        if f"{key}_hpa" in quantiles:
            lines.append(f"{name:46}" + "".join(f"{_number(value):>6}" for value in quantiles[f"{key}_hpa"]))
    return lines


def _sites(summary: Mapping[str, Any]) -> list[str]:
    if not summary["sites"]:
        return []
    years = f"{summary['record_years'][-1]:g}"
    lines = [
        f"{'':{_NAME}}{'sd':>9}{f'annual line, {years} years':>24}{'models':>9}{'quieter':>10}",
        f"{'site':{_NAME}}{'hPa':>9}{'models':>12}{'expected':>12}{'apart':>9}{'% of area':>10}",
    ]
    for row in summary["sites"]:
        numbers = (row["annual_sd_hpa"][years], row["expected_annual_sd_hpa"][years])
        lines.append(
            f"{padded(row['id'], _NAME)}{_number(row['sd_hpa']):>9}{_number(numbers[0]):>12}{_number(numbers[1]):>12}"
            f"{_number(row['disagreement_hpa']):>9}{_number(row['percentile'], 1):>10}"
        )
    return lines


def _number(value: float | None, digits: int = 2) -> str:
    return "-" if value is None else f"{value:.{digits}f}"
