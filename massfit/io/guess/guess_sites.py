"""Group the records of a folder into sites: by what they say, and by the names of their files."""

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import PurePosixPath

from massfit.io.guess.described import Guess, RecordGuess, fill_in

_DATE = re.compile(r"(19|20)\d{2}((0[1-9]|1[0-2])([0-3]\d)?)?|\d{2}-\d{2}|to")
_NUMBER = re.compile(r"(d|dep|deployment|part|leg|v)?\d{1,2}[a-z]?", re.IGNORECASE)
_GENERIC = {
    "bpr", "obp", "bp", "pressure", "pressures", "recorder", "recorders", "record", "records", "deep", "data", "site",
    "station", "mooring", "hourly", "daily", "raw", "sea", "floor", "seafloor", "bottom", "sensor", "deployment",
    "deployments", "obs", "final", "clean", "qc",
}  # fmt: skip
_SAME_PLACE_DEG = 0.2


@dataclass(frozen=True)
class SiteGuess:
    """One `[[site]]` and its deployments.

    Parameters
    ----------
    place : mapping of str to Guess
        id, latitude, longitude and perhaps depth_m.
    records : tuple of RecordGuess
        In the order of their times.
    """

    place: Mapping[str, Guess]
    records: tuple[RecordGuess, ...]


def guess_sites(records: Sequence[RecordGuess]) -> list[SiteGuess]:
    """Group records into sites.

    Parameters
    ----------
    records : sequence of RecordGuess

    Returns
    -------
    list of SiteGuess
        In the order of their ids, which are unique.

    Examples
    --------
    >>> found = guess_sites([RecordGuess(f"{name}.txt", name, {}) for name in ("bpr_K7_2014", "bpr_K7_2015", "bpr_K9")])
    >>> [(site.place["id"].value, len(site.records)) for site in found]
    [('K7', 2), ('K9', 1)]
    """
    names = site_names([record.name for record in records])
    groups: dict[str, list[RecordGuess]] = {}
    spelling: dict[str, str] = {}
    for record, short in zip(records, names, strict=True):
        stated = record.place.get("id")
        name = short if stated is None else str(stated.value)
        groups.setdefault(name.casefold(), []).append(record)
        spelling.setdefault(name.casefold(), name)
    sites = [site for key, own in groups.items() for site in _sites(spelling[key], own)]
    return _numbered(sorted(sites, key=lambda site: str(site.place["id"].value)))


def site_names(stems: Sequence[str]) -> list[str]:
    """Leave of each name what tells its site: no dates, no numbers of deployments, no words that all share.

    Parameters
    ----------
    stems : sequence of str

    Examples
    --------
    >>> site_names(["deep_recorder_21401_201103", "deep_recorder_21418_201103"])
    ['21401', '21418']
    >>> site_names(["site_1", "site_2"])
    ['site_1', 'site_2']
    """
    tokens = [[token for token in re.split(r"[_\-. ]+", stem) if token] for stem in stems]
    kept = [[token for token in own if not _DATE.fullmatch(token)] for own in tokens]
    shared = set.intersection(*map(set, kept)) if len(kept) > 1 else set()
    names = []
    for stem, own in zip(stems, kept, strict=True):
        telling = [token for token in own if token.casefold() not in _GENERIC and not _NUMBER.fullmatch(token)]
        particular = [token for token in telling if token not in shared]
        names.append("_".join(particular or telling or own) or stem)
    return names


def _sites(name: str, records: Sequence[RecordGuess]) -> list[SiteGuess]:
    """One site, or one a record where the positions they state differ."""
    for key in ("latitude", "longitude"):
        known = [record.place[key].value for record in records if key in record.place]
        if known and max(known) - min(known) > _SAME_PLACE_DEG:
            return [_site(record.name, [record]) for record in records]
    return [_site(name, records)]


def _site(name: str, records: Sequence[RecordGuess]) -> SiteGuess:
    ordered = sorted(records, key=lambda record: (record.span is None, record.span and record.span[0], record.file))
    stated = next((record.place["id"] for record in ordered if "id" in record.place), None)
    files = ", ".join(dict.fromkeys(record.file for record in ordered))
    place = {"id": stated or Guess(name, f"from the name{'s' if len(records) > 1 else ''} {_shortened(files)}")}
    if stated is None and len(records) == 1 and records[0].name != PurePosixPath(records[0].file).stem:
        place["id"] = Guess(name, f"from the column {records[0].keys['variable'].value}")
    for key, wanted in (("latitude", "degrees north"), ("longitude", "degrees east, either convention")):
        found = next((record.place[key] for record in ordered if key in record.place), None)
        place[key] = found or fill_in(f"{wanted}; no file says where it is in a way that was understood")
    depth = next((record.place["depth_m"] for record in ordered if "depth_m" in record.place), None)
    return SiteGuess(place | ({"depth_m": depth} if depth else {}), tuple(ordered))


def _shortened(text: str) -> str:
    return text if len(text) <= 90 else text[:87] + "..."


def _numbered(sites: Sequence[SiteGuess]) -> list[SiteGuess]:
    """Make ids unique."""
    seen: dict[str, int] = {}
    unique = []
    for site in sites:
        name, evidence = str(site.place["id"].value), site.place["id"].evidence
        seen[name] = seen.get(name, 0) + 1
        again = Guess(f"{name}_{seen[name]}", f"{evidence}; another site has this name too")
        unique.append(site if seen[name] == 1 else SiteGuess({**site.place, "id": again}, site.records))
    return unique
