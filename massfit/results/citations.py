"""What a result rests on: the published methods and data that it used, and no others, and the analyst's own data."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

from massfit.results.finished import FinishedRun
from massfit.settings import PREM, Priors
from massfit.tables.sources import Source, read_sources


@dataclass(frozen=True)
class Citation:
    """One thing to cite.

    Parameters
    ----------
    part : str
        Part of the work that rests on it.
    what : str
        What it was used for.
    source : Source, optional
        The published work; None where it is data of the analyst.
    text : str
        Of data: what the network file states of them.
    """

    part: str
    what: str
    source: Source | None = None
    text: str = ""


Used = Callable[["_Run"], bool]


class _Run:
    """The choices of a run by which it is told what was used."""

    def __init__(self, run: FinishedRun) -> None:
        self.settings: Mapping[str, Mapping[str, Any]] = run.provenance["settings"]
        self.summary = run.summary
        self.records = "reduced_records.nc" in run.datasets
        self.means = bool(run.provenance.get("series_of_means"))
        fingerprints = run.datasets["fingerprints.nc"]
        self.members = [str(name) for name in fingerprints["member"].values]

    def chosen(self, section: str, name: str) -> Any:
        """Value of a setting."""
        return self.settings[section][name]

    @property
    def builtin_loads(self) -> bool:
        """Whether a member of the ensemble is built in."""
        loads = self.chosen("fingerprint", "loads")
        return any(name.startswith(("builtin:", "perturbed:")) for name in loads)

    @property
    def tides(self) -> bool:
        """Whether short tides were taken off here."""
        return self.records and self.chosen("corrections", "tides") == "remove"

    @property
    def comparison(self) -> bool:
        """Whether satellites stand beside the answer."""
        return "comparison" in self.summary

    @property
    def rotation(self) -> bool:
        """Whether the wobble that loads cause is fed back."""
        return bool(self.chosen("fingerprint", "rotational_feedback"))

    @property
    def equilibrium(self) -> bool:
        """Whether long-period tides were taken off."""
        return self.records and self.chosen("corrections", "long_period_tides") != "none"

    @property
    def self_consistent(self) -> bool:
        """Whether they were solved over the real ocean."""
        return self.equilibrium and self.chosen("corrections", "long_period_tides") == "equilibrium"

    @property
    def pole(self) -> bool:
        """Whether the pole tide was taken off."""
        return self.records and self.chosen("corrections", "pole_tide") == "observed"

    @property
    def steps(self) -> bool:
        """Whether changes of level were found."""
        return any(site.get("level_changes") for site in self.summary["sites"])

    @property
    def flags(self) -> bool:
        """Whether quality flags decided on samples."""
        return any("flag" in action["what"] for actions in self.summary["actions"].values() for action in actions)

    @property
    def distance(self) -> bool:
        """Whether scatter is correlated over a distance."""
        return not isinstance(self.chosen("posterior", "group_scatter"), bool)


def _always(_: _Run) -> bool:
    return True


_EARTH, _SEA = "The Earth under a load", "The sea-level equation and the loads"
_TIDES, _RECORD = "Tides, rotation and air", "Records, drift and noise"
_ANSWER, _SITES = "The network posterior", "The ranking of the sites"
_SPACE, _CODE = "Satellite gravity", "Libraries"
_RANKED: Used = lambda run: "siting" in run.summary  # noqa: E731
_PREM_USED: Used = lambda run: run.chosen("fingerprint", "earth_model") == PREM  # noqa: E731
_RECORDS: Used = lambda run: run.records  # noqa: E731
_SHORT: Used = lambda run: run.tides  # noqa: E731
_TURNING: Used = lambda run: run.rotation  # noqa: E731
_SATELLITES: Used = lambda run: run.comparison  # noqa: E731
_BUILT_IN: Used = lambda run: run.builtin_loads  # noqa: E731

_RULES: tuple[tuple[str, str, str, Used], ...] = (
    (_EARTH, "the Earth profile PREM", "dziewonski1981", _PREM_USED),
    (_EARTH, "equations of a loaded sphere", "alterman1959", _always),
    (_EARTH, "load Love numbers", "farrell1972", _always),
    (_EARTH, "the fluid core", "saito1974", _always),
    (_EARTH, "numerical integration", "blanes2000", _always),
    (_EARTH, "frames of degree one", "blewitt2003", _always),
    (_SEA, "the sea-level equation", "farrell1976", _always),
    (_SEA, "what counts as ocean", "hastings1999", _always),
    (_SEA, "water vapour of the air", "trenberth2005", lambda run: bool(run.chosen("fingerprint", "water_vapour_kg"))),
    (_SEA, "built-in loads", "tapley2004", _BUILT_IN),
    (_SEA, "built-in loads", "schmidt2006", _BUILT_IN),
    (_SEA, "built-in loads", "syed2008", _BUILT_IN),
    (_SEA, "built-in loads, ice", "luthcke2013", _BUILT_IN),
    (_SEA, "rotational feedback", "munk1960", _TURNING),
    (_SEA, "rotational feedback", "wahr1985", _TURNING),
    (_SEA, "rotational feedback", "milne1998", _TURNING),
    (_SEA, "rotational feedback", "gross2015", _TURNING),
    (_SEA, "period of the wobble", "wilson1990", _TURNING),
    (_SEA, "tidal from load numbers", "saito1978", _TURNING),
    (_TIDES, "short tides: lines", "doodson1921", _SHORT),
    (_TIDES, "short tides: inference and amplitudes", "schureman1958", _SHORT),
    (_TIDES, "short tides: modulation by the node", "pugh1987", _SHORT),
    (_TIDES, "short tides: modulation by the node", "doodson1941", _SHORT),
    (_TIDES, "short tides: arguments", "meeus1998", _SHORT),
    (_TIDES, "short tides: harmonic analysis", "foreman1989", _SHORT),
    (_TIDES, "long-period tides: amplitudes", "cartwright1971", lambda run: run.equilibrium),
    (_TIDES, "long-period tides: amplitudes", "cartwright1973", lambda run: run.equilibrium),
    (_TIDES, "long-period tides: arguments", "simon1994", lambda run: run.equilibrium),
    (_TIDES, "tides in equilibrium over the real ocean", "agnew1978", lambda run: run.self_consistent),
    (_TIDES, "conventions and constants", "petit2010", lambda run: run.equilibrium or run.pole or run.comparison),
    (_TIDES, "the pole tide in equilibrium", "desai2002", lambda run: run.pole),
    (_TIDES, "observed polar motion", "iers", lambda run: run.pole),
    (_TIDES, "ocean-mean air pressure", "dorandeu1999", _always),
    (_TIDES, "values from series of means", "boneva1971", lambda run: run.means),
    (_RECORD, "outliers", "davies1993", _SHORT),
    (_RECORD, "the smooth background", "deboor1978", _SHORT),
    (_RECORD, "changes of level", "basseville1993", lambda run: run.steps),
    (_RECORD, "quality flags", "qartod2017", lambda run: run.flags),
    (_RECORD, "quality flags", "ioc2013", lambda run: run.flags),
    (_RECORD, "evidence of drift and noise", "rasmussen2006", _RECORDS),
    (_RECORD, "red noise in linear time", "foreman-mackey2017", _RECORDS),
    (_RECORD, "drift times drawn", "geman1984", _RECORDS),
    (_RECORD, "noise models weighted", "veach1995", _RECORDS),
    (_RECORD, "kernels over noise models", "silverman1986", _RECORDS),
    (_RECORD, "quasi-random points", "richtmyer1951", _RECORDS),
    (_RECORD, "their random shift", "cranley1976", _RECORDS),
    (_RECORD, "effective number of noise models", "kong1992", _RECORDS),
    (_ANSWER, "priors of scales", "gelman2006", _always),
    (_ANSWER, "hierarchical model", "gelman2013", _always),
    (_ANSWER, "year-to-year variation", "chandanpurkar2021",
     lambda run: run.chosen("priors", "year_sd_hpa") == Priors().year_sd_hpa),
    (_ANSWER, "load members are not weighted (cut)", "plummer2015", lambda run: len(run.members) > 1),
    (_ANSWER, "scatter over a distance", "gneiting2013", lambda run: run.distance),
    (_ANSWER, "the sampler", "foreman-mackey2013", _always),
    (_ANSWER, "ensembles of walkers", "goodman2010", _always),
    (_ANSWER, "acceptance of proposals", "hastings1970", _always),
    (_ANSWER, "proposals by differences", "terbraak2006", _always),
    (_ANSWER, "what is held fixed alternates", "yu2011", _always),
    (_ANSWER, "the second route", "cappe2004", _always),
    (_ANSWER, "the second route: no part out of reach", "hesterberg1995", _always),
    (_ANSWER, "the second route: points", "marohnic2012", _always),
    (_ANSWER, "the second route: kernels", "scott1992", _always),
    (_ANSWER, "convergence", "vehtari2021", _always),
    (_ANSWER, "regions that are drawn", "hyndman1996", _always),
    (_ANSWER, "what if, on the page", "trefethen2014", _always),
    (_ANSWER, "the predictive check", "gelman1996", _always),
    (_ANSWER, "coverage of surrogates", "clopper1934", lambda run: "calibration" in run.summary),
    (_SITES, "designs of subsets", "atkinson2007", _RANKED),
    (_SITES, "exchange of sites", "fedorov1972", _RANKED),
    (_SITES, "subsets under Student scatter", "minka2001", _RANKED),
    (_SITES, "subsets under Student scatter", "jylanki2011", _RANKED),
    (_SPACE, "water from gravity", "wahr1998", _SATELLITES),
    (_SPACE, "smoothing", "jekeli1981", _SATELLITES),
    (_SPACE, "degree one", "swenson2008", _SATELLITES),
    (_SPACE, "alias lines of tides", "ray2006", _SATELLITES),
    (_SPACE, "monthly fields: format", "barthelmes2011", _SATELLITES),
    (_SPACE, "annual motion of the geocentre", "altamimi2023", _SATELLITES),
    (_CODE, "numpy", "harris2020", _always),
    (_CODE, "scipy", "virtanen2020", _always),
    (_CODE, "xarray", "hoyer2017", _always),
    (_CODE, "matplotlib", "hunter2007", _always),
    (_CODE, "corner", "foreman-mackey2016", _always),
    (_CODE, "colours of the figures", "okabe2008", _always),
)  # fmt: skip
"""Part, what it is used for, key in the list of sources, and when."""


def citations(run: FinishedRun) -> list[Citation]:
    """Say what a result rests on.

    Parameters
    ----------
    run : FinishedRun

    Returns
    -------
    list of Citation
        The analyst's data first, as the network file states them; then published methods and data by part, only what
        this result used.
    """
    told, sources = _Run(run), read_sources()
    works = [Citation(part, what, sources[key]) for part, what, key, used in _RULES if used(told)]
    return [*_own_data(run), *works]


def _own_data(run: FinishedRun) -> list[Citation]:
    """Say of the analyst's data what the network file states of each."""
    entries = list(run.provenance.get("data", ()))
    solutions = run.summary["comparison"]["solutions"] if "comparison" in run.summary else ()
    entries += [{"what": "satellite gravity", "name": solution["name"], "reference": ""} for solution in solutions]
    whole = run.provenance["settings"]["frame"].get("references", ())
    other = "See the references of the network." if whole else NOT_STATED
    own = [Citation(_DATA, each["what"], text=f"{each['name']}. {each['reference'] or other}") for each in entries]
    return [*own, *(Citation(_DATA, "reference of the network", text=text) for text in whole)]


_DATA = "Your data"

NOT_STATED = "No reference is stated: add `reference` to it, or `references` to the network."
"""Said of data without a reference."""


def spoken(source: Source) -> str:
    """Write a work as a line of text.

    Parameters
    ----------
    source : Source

    Returns
    -------
    str

    Examples
    --------
    >>> spoken(read_sources()["farrell1976"])
    'Farrell, W. E. & Clark, J. A. (1976). On postglacial sea level. Geophysical Journal of the Royal ... 46, 647-667.'
    """
    fields = source.fields
    authors = fields["author"].split(" and ")
    if authors[-1] == "others":
        named = f"{authors[0]} et al."
    elif len(authors) > 4:
        named = f"{', '.join(authors[:3])} et al."
    else:
        named = " & ".join([", ".join(authors[:-1]), authors[-1]] if len(authors) > 1 else authors)
    year = f" ({fields['year']})" if "year" in fields else ""
    edition = f" ({fields['edition']} edition)" if "edition" in fields else ""
    return " ".join([f"{named}{year}.", f"{fields['title']}{edition}.", _where(fields)]).strip()


_PLACES = ("journal", "booktitle", "publisher", "institution", "number", "howpublished")


def _where(fields: Mapping[str, str]) -> str:
    places = [fields[name] for name in _PLACES if name in fields]
    volume = f" {fields['volume']}" if "volume" in fields else ""
    pages = f", {fields['pages']}" if "pages" in fields else ""
    text = f"{', '.join(places)}{volume}{pages}"
    return f"{text}." if text else ""
