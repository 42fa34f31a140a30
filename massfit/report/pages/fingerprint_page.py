"""The page of a fingerprint study: self-contained, no network."""

from collections.abc import Mapping

import numpy as np
import xarray as xr

from massfit.constants import PASCAL_PER_HPA
from massfit.display import counted
from massfit.phasor import as_complex
from massfit.report.pages.frame import filled
from massfit.report.pages.page_parts import as_data, made_with
from massfit.report.pages.page_tables import Table, input_table
from massfit.results.fingerprint import FingerprintStudy, degree_rows, map_agreement, site_rows

PICTURES = {
    "ratio_map": "Amplitude of the annual cycle at each place over that of the ocean mean, mean over the load members. "
    "Every site has the colour of its own number. Near a load the sea is drawn up when the water lies on land, so that "
    "it moves less, or against the ocean.",
    "delay_map": "Days by which each place peaks later (positive) or earlier (negative) than the ocean mean.",
    "spread_map": "Standard deviation over the load members of the complex ratio: where a site would see the "
    "disagreement of the loads.",
    "members": "Each site under each load member, beside the same water on all land.",
    "footprints": "Which lands each site hears: its amplitude over that of the ocean mean if all the water came from "
    "that place alone, smoothed. The number of a site is the mean of its map, weighted by the load. Dark: water from "
    "there moves the site less than the ocean mean, because its own attraction holds the sea back.",
    "degrees": "How far the mean over the members moves from each degree of the solve to the finest, in amplitude "
    "ratio and in delay. The sites that move most are named.",
}
"""Name of each figure and what it shows. Further pages end in ``_2`` and so on."""


def fingerprint_page(study: FingerprintStudy, pictures: Mapping[str, bytes]) -> str:
    """Fill the page.

    Parameters
    ----------
    study : FingerprintStudy
    pictures : mapping of str to bytes
        PNG images under the names of `PICTURES`; one that ends in ``_column`` is shown on narrow screens instead.

    Returns
    -------
    str
        HTML with everything inside it.
    """
    wide = [name for name in pictures if not name.endswith("_column")]
    return filled(
        "fingerprint.html",
        network=study.network,
        version=study.provenance["massfit"],
        sentence=fingerprint_sentence(study.dataset),
        warnings=study.warnings,
        assumptions=study.assumptions,
        images=as_data(pictures),
        captions={name: PICTURES[_stem(name)] + _besides(name, study.dataset) for name in wide},
        alternatives_text={name: f"{PICTURES[_stem(name)].split(':')[0]}; numbers are in the tables." for name in wide},
        pages={stem: [name for name in wide if name.startswith(stem)] for stem in ("members", "footprints")},
        map_note=map_note(study.dataset),
        tables={
            "sites": _site_table(study.dataset),
            "left_out": _left_out_table(study.left_out),
            "degrees": _degree_table(study.dataset),
            "inputs": input_table(study.provenance),
        },
        made_with=made_with(study.provenance),
    )


def fingerprint_sentence(dataset: xr.Dataset) -> str:
    """Say in one sentence what the sites see.

    Parameters
    ----------
    dataset : xarray.Dataset
        contracts.FINGERPRINT_STUDY.

    Returns
    -------
    str
    """
    ratio, delay = np.sort(dataset["amplitude_ratio"].values), np.sort(dataset["delay"].values)
    one = len(ratio) == 1
    seen = f"{dataset['site'].item()} sees" if one else f"The {len(ratio)} sites see"
    times = list(dict.fromkeys(f"{value:.3f}" for value in ratio[[0, -1]]))
    days = list(dict.fromkeys(_days(value) for value in delay[[0, -1]]))
    peaks = f"from {days[0]} to {days[1]}" if len(days) > 1 else days[0]
    members = counted(dataset.sizes["member"], "load member")
    return (
        f"{seen} {' to '.join(times)} times the amplitude of the ocean mean and peak{'s' * one} {peaks} it: "
        f"the mean over {members}."
    )


def map_note(dataset: xr.Dataset) -> str:
    """Say how far the maps agree with the sites, and why not further.

    Parameters
    ----------
    dataset : xarray.Dataset
        contracts.FINGERPRINT_STUDY.

    Returns
    -------
    str
    """
    middle, largest, worst = map_agreement(dataset)
    return (
        f"Maps hold values at the centres of cells of one degree. Interpolated to the sites they miss the sites' own "
        f"numbers by {middle:.5f} in the median and {largest:.5f} at most ({worst}): near coasts and loads the sea "
        "level bends within a cell. Numbers are those of the table. Over land nothing is drawn."
    )


def _days(delay: float) -> str:
    return f"{abs(delay):.1f} days {'before' if delay < -0.05 else 'after'}"


def _besides(name: str, dataset: xr.Dataset) -> str:
    if _stem(name) != "footprints" or dataset.attrs.get("rotational_feedback", "none") == "none":
        return ""
    return " Without the rotational feedback, which the numbers of the site hold."


def _stem(name: str) -> str:
    return next(stem for stem in PICTURES if name.startswith(stem))


def _site_table(dataset: xr.Dataset) -> Table:
    rows, air = site_rows(dataset), _air_response(dataset)
    head = ("site", "latitude", "longitude", "ratio", "spread", "delay / d", "spread / d", "ratio, same on all land",
            *(["air over land / hPa"] if air else []))  # fmt: skip
    uniform = {row.site: row for row in rows if row.kind == "reference" and row.member == "uniform over land"}
    cells = [
        [
            row.site,
            f"{row.latitude_deg:.2f}",
            f"{row.longitude_deg:.2f}",
            f"{row.amplitude_ratio:.3f}",
            _known(row.amplitude_ratio_spread, ".3f"),
            f"{round(row.delay_days, 1) + 0.0:.1f}",
            _known(row.delay_spread_days, ".1f"),
            f"{uniform[row.site].amplitude_ratio:.3f}",
            *([air[row.site]] if air else []),
        ]
        for row in rows
        if row.kind == "mean"
    ]
    return Table("The sites", head, cells)


def _air_response(dataset: xr.Dataset) -> dict[str, str]:
    """Amplitude of the response to the air over land by site; empty where the air is not known."""
    if "air_load_response" not in dataset:
        return {}
    amplitude = np.abs(as_complex(dataset["air_load_response"].values)) / PASCAL_PER_HPA
    return {str(site): f"{size:.3f}" for site, size in zip(dataset["site"].values, amplitude, strict=True)}


def _signed(value: float, digits: int) -> str:
    rounded = round(value, digits)
    return f"{rounded:+.{digits}f}" if rounded else f"{0.0:.{digits}f}"


def _known(value: float | None, form: str) -> str:
    return "unknown" if value is None else f"{value:{form}}"


def _left_out_table(left_out: Mapping[str, str]) -> Table | None:
    rows = [[name, reason] for name, reason in left_out.items()]
    return Table("Sites left out", ("site left out", "because"), rows, wordy=True) if rows else None


def _degree_table(dataset: xr.Dataset) -> Table:
    rows, degrees = degree_rows(dataset), [int(degree) for degree in dataset["degree"].values]
    finest, others = degrees[-1], degrees[:-1]
    head = ["site", f"ratio at {finest}", *(f"change at {degree}" for degree in others)]
    head += [f"delay at {finest} / d", *(f"change at {degree} / d" for degree in others)]
    cells = []
    for first in range(0, len(rows), len(degrees)):
        own = rows[first : first + len(degrees)]
        ratios = [f"{own[-1].amplitude_ratio:.4f}", *(_signed(row.ratio_change, 4) for row in own[:-1])]
        delays = [f"{own[-1].delay_days:.3f}", *(_signed(row.delay_change_days, 3) for row in own[:-1])]
        cells.append([own[0].site, *ratios, *delays])
    return Table("Convergence with the degree", head, cells)
