"""Tables of where and how long to measure next."""

from collections.abc import Mapping

import xarray as xr

from massfit.report.pages.page_tables import Table
from massfit.report.words.siting_plan_text import place_rows, service_rows

_NAMES = ("best_places", "asked_places", "service")


def siting_tables(datasets: Mapping[str, xr.Dataset]) -> dict[str, Table | None]:
    """Tabulate candidates and service, where they are there.

    Parameters
    ----------
    datasets : mapping of str to xarray.Dataset
        Of a finished run.

    Returns
    -------
    dict of str to Table or None
    """
    found = {name: datasets.get(f"siting.nc/{name}") for name in _NAMES}
    return {
        "best_places": _places("Best places for one recorder more", found["best_places"]),
        "asked_places": _places("Places asked about", found["asked_places"]),
        "service": _service(found["service"]),
    }


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
