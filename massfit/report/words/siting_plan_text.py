"""Where and how long to measure next, in words and tables of 80 columns."""

import textwrap
from collections.abc import Iterator, Mapping

import numpy as np
import xarray as xr

from massfit.report.words.names import fitted

SHOWN_SITES = 30
"""Sites of a service table; the rest matter less."""

CONTRAST = (0.8, 1.25)
"""Amplitude ratios outside of which a place is told to gain by contrast."""

GAIN_NOTE = (
    "Each place is what one recorder more would do, not all of them together. Errors are those of a component of the "
    "answer: root mean square of in phase and quadrature."
)

RATIO_NOTE = (
    "lies near the load: much of its gain is that it tells the errors the models share from the cycle, which trusts "
    "the network model in having them the same everywhere"
)


def siting_plan_text(datasets: Mapping[str, xr.Dataset]) -> str:
    """Lay out candidates, record length and service for a terminal.

    Parameters
    ----------
    datasets : mapping of str to xarray.Dataset
        Of a finished run, with the groups of siting.nc.

    Returns
    -------
    str
    """
    parts = []
    for name, lines in (
        ("best_places", _best),
        ("asked_places", _asked),
        ("record_length", _lengths),
        ("service", _service),
    ):
        data = datasets.get(f"siting.nc/{name}")
        if data is not None:
            parts.append("\n".join(wrapped for line in lines(data) for wrapped in _within_page(line)))
    return "\n\n".join(parts)


def siting_words(datasets: Mapping[str, xr.Dataset]) -> dict[str, str]:
    """Say on the page what was found; empty where nothing was looked for.

    Parameters
    ----------
    datasets : mapping of str to xarray.Dataset

    Returns
    -------
    dict of str to str
        `gain`, `note`, `contrast`, `length`, `service`.
    """
    found = {name: datasets.get(f"siting.nc/{name}") for name in ("best_places", "record_length", "service")}
    best, length, service = found.values()
    return {
        "gain": "" if best is None else f"{gain_sentence(best)} Noise of the record: {best.attrs['noise_source']}.",
        "note": GAIN_NOTE,
        "contrast": RATIO_NOTE.removeprefix("lies near the load: "),
        "length": "" if length is None else " ".join([length_sentence(length), *target_sentences(length)]),
        "service": "" if service is None else service_sentence(service),
    }


def length_sentence(data: xr.Dataset) -> str:
    """Say what the second year of a record is worth."""
    lengths = [float(length) for length in data["record_years"].values]
    one, two = (float(data["record_sd"].values[lengths.index(length)]) for length in (1.0, 2.0))
    return (
        f"The error of the planned record is {hpa(one)} hPa after one year, which goes to the drift, and "
        f"{hpa(two)} hPa after two."
    )


def _within_page(line: str) -> list[str]:
    """Break a sentence at 80 columns; tables fit."""
    return textwrap.wrap(line, 80, initial_indent="", subsequent_indent="  ") if len(line) > 80 else [line]


def hpa(pascal: float) -> str:
    """Spell a pressure in hPa, three decimals."""
    return f"{pascal / 100.0:.3f}"


def place_rows(places: xr.Dataset) -> list[dict[str, str]]:
    """Spell places as rows of a table.

    Parameters
    ----------
    places : xarray.Dataset
        Group `best_places` or `asked_places` of siting.nc.

    Returns
    -------
    list of dict
        `place`, `latitude`, `longitude`, `depth`, `nearest`, `distance`, `record`, `answer`, `change`, `day`.
    """
    rows = []
    for index, name in enumerate(places["place"].values):
        own = places.isel(place=index)
        depth = float(own["depth"])
        rows.append(
            {
                "place": str(name),
                "latitude": f"{float(own['latitude']):.1f}",
                "longitude": f"{float(own['longitude']):.1f}",
                "depth": "unknown" if np.isnan(depth) else f"{depth:.0f}",
                "nearest": str(own["nearest_site"].item()),
                "distance": f"{float(own['nearest_distance']) / 1000.0:.0f}",
                "record": hpa(float(own["record_sd"])),
                "answer": hpa(float(own["component_sd"])),
                "change": f"{100.0 * (float(own['error_ratio']) - 1.0):+.1f}",
                "day": f"{float(own['peak_day_sd']):.1f}",
            }
        )
    return rows


def gain_sentence(places: xr.Dataset) -> str:
    """Say what the best place would do."""
    now = places.attrs["component_sd_now_pa"]
    if not places.sizes["place"]:
        return "No place of the open sea qualifies."
    best = places.isel(place=0)
    return (
        f"One recorder more for {places.attrs['record_years']:g} years would bring the error of the answer from "
        f"{hpa(now)} to {hpa(float(best['component_sd']))} hPa at best, near {spoken_place(best)}."
    )


def spoken_place(place: xr.Dataset) -> str:
    """Spell a place, "11.0 S 205.0 E"."""
    north, east = float(place["latitude"]), float(place["longitude"]) % 360.0
    return f"{abs(north):.1f} {'N' if north >= 0 else 'S'} {east:.1f} E"


def _best(places: xr.Dataset) -> Iterator[str]:
    yield "Where one recorder more would help most"
    yield f"  {gain_sentence(places)}"
    yield f"  Noise of the record: {places.attrs['noise_source']}."
    yield ""
    yield from _place_table(places)


def _asked(places: xr.Dataset) -> Iterator[str]:
    yield "Places asked about"
    yield from _place_table(places)
    for index, name in enumerate(places["place"].values):
        ratio = float(places["amplitude_ratio"][index])
        if not CONTRAST[0] <= ratio <= CONTRAST[1]:
            yield f"  {name} {RATIO_NOTE}."


def _place_table(places: xr.Dataset) -> Iterator[str]:
    yield "  place         lat     lon  depth/m  nearest site     km  record  answer      %"
    for row in place_rows(places):
        yield (
            f"  {fitted(row['place'], 10):<10} {row['latitude']:>6} {row['longitude']:>7} {row['depth']:>8}  "
            f"{fitted(row['nearest'], 12):<12} {row['distance']:>6}  {row['record']:>6}  {row['answer']:>6} "
            f"{row['change']:>6}"
        )
    yield "  record, answer: error of a component / hPa; %: of the error of the answer"


def _lengths(data: xr.Dataset) -> Iterator[str]:
    yield "How long a recorder must stay"
    place = xr.Dataset({"latitude": data.attrs["place_latitude"], "longitude": data.attrs["place_longitude"]})
    yield f"  Errors of the planned record alone, and of the answer with it at {spoken_place(place)}:"
    yield "  years   " + " ".join(f"{float(length):>6g}" for length in data["record_years"].values[::2])
    for name, text in (("record_sd", "record"), ("answer_sd", "answer")):
        yield f"  {text:<7} " + " ".join(f"{hpa(float(sd)):>6}" for sd in data[name].values[::2])
    yield from (f"  {text}" for text in target_sentences(data))


def target_sentences(data: xr.Dataset) -> list[str]:
    """Say how many years of record a target takes; nothing without one."""
    if "answer_years_to_target" not in data:
        return []
    target, longest = data.attrs["target_sd_pa"], float(data["record_years"].values[-1])

    def spoken(years: float, what: str) -> str:
        if np.isinf(years):
            return f"{what} does not fall to {hpa(target)} hPa within {longest:g} years of record."
        if years <= float(data["record_years"].values[0]):
            return f"{what} is at {hpa(target)} hPa or below with {years:g} years of record already."
        return f"{what} falls to {hpa(target)} hPa with {years:.1f} years of record."

    return [
        spoken(float(data["answer_years_to_target"]), "The error of the answer"),
        spoken(float(data["years_to_target"]), "The error of the record alone"),
    ]


def service_rows(data: xr.Dataset) -> list[dict[str, str]]:
    """Spell the service plan, the sites that matter most first.

    Parameters
    ----------
    data : xarray.Dataset
        Group `service` of siting.nc.

    Returns
    -------
    list of dict
        `site`; record errors `now` and `on`, hPa; by how many per cent the error of the answer is larger than if all
        run on, if the recorder `ends` at once and in the middle month, is `redeployed` then, or is `lost`; empty where
        that cannot be.
    """
    middle = data.sizes["month"] // 2
    lost, on = data["answer_sd_lost"].values, data.attrs["answer_sd_on_pa"]
    order = np.argsort(-np.nan_to_num(lost, nan=0.0), kind="stable")
    return [
        {
            "site": str(data["site"].values[place]),
            "now": hpa(float(data["record_sd_now"][place])),
            "on": hpa(float(data["record_sd_on"][place])),
            "ends": _more(data["answer_sd_ended"].values[place, 0], on),
            "ends_middle": _more(data["answer_sd_ended"].values[place, middle], on),
            "redeployed": _more(data["answer_sd_redeployed"].values[place, 0], on),
            "redeployed_middle": _more(data["answer_sd_redeployed"].values[place, middle], on),
            "lost": _more(lost[place], on),
        }
        for place in order
    ]


def _more(sd: float, on: float) -> str:
    return "" if np.isnan(sd) else f"{100.0 * (sd / on - 1.0):+.1f}"


def service_sentence(data: xr.Dataset) -> str:
    """Say what the plan starts from and where it leads."""
    return (
        f"From {data.attrs['last_day']} on: the error of a component of the answer is "
        f"{hpa(data.attrs['answer_sd_now_pa'])} hPa now and {hpa(data.attrs['answer_sd_on_pa'])} hPa after "
        f"{int(data['month'].values[-1])} months if every recorder on the bottom runs on."
    )


def _service(data: xr.Dataset) -> Iterator[str]:
    middle = int(data["month"].values[data.sizes["month"] // 2])
    months = f"{middle} mo"
    yield "If a recorder fails, is recovered or is redeployed"
    yield f"  {service_sentence(data)}"
    yield "                   record          ends         redeployed"
    yield f"  site            now     on    now  {months:>6}    now  {months:>6}   lost"
    rows = service_rows(data)
    for row in rows[:SHOWN_SITES]:
        changes = (row[name] for name in ("ends", "ends_middle", "redeployed", "redeployed_middle", "lost"))
        spelled = "  ".join(f"{change:>{width}}" for change, width in zip(changes, (5, 6, 5, 6, 5), strict=True))
        yield f"  {fitted(row['site'], 13):<13} {row['now']:>5}  {row['on']:>5}  {spelled}".rstrip()
    if len(rows) > SHOWN_SITES:
        yield f"  and {len(rows) - SHOWN_SITES} sites that matter less: siting.nc has them all"
    yield "  record: error of a component / hPa; all else: % of the error of the answer,"
    yield "  more than if every recorder runs on"
