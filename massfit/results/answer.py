"""The answer in words: one sentence, spoken dates."""

from collections.abc import Mapping, Sequence
from datetime import date
from typing import Any

from massfit.constants import TROPICAL_YEAR_DAYS
from massfit.phasor import peak_date


def answer_sentence(summary: Mapping[str, Any]) -> str:
    """Say the answer in one sentence.

    Parameters
    ----------
    summary : mapping
        The content of `estimate.json`.

    Returns
    -------
    str
    """
    amplitude, day = summary["amplitude_hpa"], summary["peak_day"]
    year = summary["reference_year"]
    return (
        f"The annual cycle of ocean mass has an amplitude of {amplitude['median']:.2f} hPa "
        f"(95 %: {spoken_range(amplitude['region95'], '.2f')}) and peaks on {spoken_date(day['median'], year)} "
        f"(95 %: {date_range(day['region95'], year)})."
    )


def spoken_date(day: float, year: int) -> str:
    """Day and month of a peak day, "3 October"."""
    stamp = date.fromisoformat(peak_date(day, year))
    return f"{stamp.day} {stamp:%B}"


def date_range(region: Sequence[float], year: int) -> str:
    """Spoken range of peak days; a region of a year or more is said to be open."""
    if region[1] - region[0] > 0.9 * TROPICAL_YEAR_DAYS:
        return "any day of the year"
    return f"{spoken_date(region[0], year)} to {spoken_date(region[1], year)}"


def spoken_range(region: Sequence[float], form: str) -> str:
    """Both ends of a region, "0.81 to 0.93"."""
    return f"{region[0]:{form}} to {region[1]:{form}}"
