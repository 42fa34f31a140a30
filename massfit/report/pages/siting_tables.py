"""Tables of where and how long to measure next."""

from collections.abc import Mapping
from typing import Any

import xarray as xr

from massfit.report.pages.page_tables import Table
from massfit.report.words.siting_plan_text import place_rows, service_rows

_NAMES = ("best_places", "asked_places", "service")


def siting_tables(summary: Mapping[str, Any], datasets: Mapping[str, xr.Dataset]) -> dict[str, Table | None]:
    """Tabulate groups left out, candidates and service, where they are there.

    Parameters
    ----------
    summary : mapping
        `estimate.json` of a finished run.
    datasets : mapping of str to xarray.Dataset
        Of a finished run.

    Returns
    -------
    dict of str to Table or None
    """
    found = {name: datasets.get(f"siting.nc/{name}") for name in _NAMES}
    return {
        "without_groups": _groups(summary.get("siting")),
        "best_places": _places("Best places for one recorder more", found["best_places"]),
        "asked_places": _places("Places asked about", found["asked_places"]),
        "service": _service(found["service"]),
    }


def _groups(siting: Mapping[str, Any] | None) -> Table | None:
    if siting is None or not siting["without_groups"]:
        return None
    rows = sorted(siting["without_groups"], key=lambda row: -abs(row["shift_sd"]))
    head = ("without group", "sites left", "shift / sd", "width ratio")
    whole = siting["whole"]["width_hpa"]
    cells = [[r["name"], str(r["sites"]), f"{r['shift_sd']:.2f}", f"{r['width_hpa'] / whole:.3f}"] for r in rows]
    return Table("Without a group", head, cells)


def _places(title: str, data: xr.Dataset | None) -> Table | None:
    if data is None or not data.sizes["place"]:
        return None
    head = (
        "place", "latitude", "longitude", "depth / m", "nearest site", "distance / km", "error of its record / hPa",
        "error of the answer / hPa", "change / %", "error of the peak / days",
    )  # fmt: skip
    return Table(title, head, [list(row.values()) for row in place_rows(data)])


def _service(data: xr.Dataset | None) -> Table | None:
    if data is None:
        return None
    middle = int(data["month"].values[data.sizes["month"] // 2])
    head = (
        "site", "error of its record now / hPa", "run on / hPa", "ends now / %", f"ends in month {middle} / %",
        "redeployed now / %", f"redeployed in month {middle} / %", "lost / %",
    )  # fmt: skip
    return Table("Service", head, [list(row.values()) for row in service_rows(data)])
