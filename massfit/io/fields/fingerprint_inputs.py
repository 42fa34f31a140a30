"""What [fingerprint] of a network file names: the load ensemble and the Earth profile."""

from collections.abc import Callable, Sequence
from typing import Any, TypeVar

from massfit.earth.profile import EarthProfile
from massfit.errors import InputError
from massfit.fingerprint.admittance import water_vapour_phasor
from massfit.fingerprint.loads import builtin_loads
from massfit.fingerprint.pattern import LoadPattern
from massfit.fingerprint.regions import MOST_MEMBERS, perturbed_loads
from massfit.io.fields.earth_file import read_earth_profile
from massfit.io.fields.field_file import read_loads
from massfit.io.network.locate import KeyPath
from massfit.io.network.network_checks import check_unique
from massfit.io.network.reading import Reading, did_you_mean, nearest
from massfit.settings import PREM, Fingerprint, Frame

_T = TypeVar("_T")
_BUILTIN = "builtin:"
_PERTURBED = "perturbed:"


def read_network_loads(
    reading: Reading, frame: Frame | None, fingerprint: Fingerprint | None
) -> tuple[LoadPattern, ...]:
    """Read or make every load member.

    Parameters
    ----------
    reading : Reading
        Receives the faults.
    frame, fingerprint
        Sections of the network file; nothing can be read where one has a fault.

    Returns
    -------
    tuple of LoadPattern
        In the order of the file, the perturbed ones last.
    """
    if frame is None or fingerprint is None:
        return ()
    vapour = _at(
        reading,
        ("fingerprint", "water_vapour_peak"),
        water_vapour_phasor,
        fingerprint.water_vapour_kg,
        fingerprint.water_vapour_peak,
        frame.reference_year,
    )
    if vapour is None:
        return ()
    named: list[tuple[KeyPath, LoadPattern]] = []
    perturbed: list[tuple[KeyPath, str]] = []
    for text in dict.fromkeys(fingerprint.loads):
        path: KeyPath = ("fingerprint", "loads", fingerprint.loads.index(text))
        patterns: tuple[LoadPattern, ...] | None = None
        if text.startswith(_PERTURBED):
            perturbed.append((path, text))
        elif text.startswith(_BUILTIN):
            patterns = _at(reading, path, builtin_loads, (text.removeprefix(_BUILTIN),))
        elif not _misspelt(reading, path, text) and (file := reading.find(path, text)) is not None:
            patterns = reading.attempt(
                read_loads, file, reference_year=frame.reference_year, source=text, water_vapour=vapour
            )
        named += [(path, pattern) for pattern in patterns or ()]
    check_unique(reading, [(path, pattern.name) for path, pattern in named])
    loads = tuple(pattern for _, pattern in named)
    return (*loads, *_perturbed(reading, perturbed, loads, fingerprint))


def read_network_earth(reading: Reading, fingerprint: Fingerprint | None) -> EarthProfile | None:
    """Read the Earth profile, where one of the analyst's own is named.

    Parameters
    ----------
    reading : Reading
        Receives the faults.
    fingerprint : Fingerprint or None

    Returns
    -------
    EarthProfile or None
    """
    if fingerprint is None or fingerprint.earth_model == PREM:
        return None
    path, text = ("fingerprint", "earth_model"), fingerprint.earth_model
    if text.casefold() == PREM:
        reading.fault(path, f'the value is "{text}"', f'Must be "{PREM}", or a file', f'Write "{PREM}"')
        return None
    file = reading.find(path, text)
    return None if file is None else reading.attempt(read_earth_profile, file, source=text)


def _perturbed(
    reading: Reading,
    asked: Sequence[tuple[KeyPath, str]],
    others: Sequence[LoadPattern],
    fingerprint: Fingerprint,
) -> tuple[LoadPattern, ...]:
    """Make variants of all other members, or of the nominal one where there is no other."""
    made: tuple[LoadPattern, ...] | None = ()
    for position, (path, text) in enumerate(asked):
        count = text.removeprefix(_PERTURBED)
        if not (count.isascii() and count.isdigit() and 1 <= int(count[:9]) <= MOST_MEMBERS):
            allowed = f"Must be a number of members from 1 to {MOST_MEMBERS}"
            reading.fault(path, f'the value is "{text}"', allowed, f'Write "{_PERTURBED}16"')
        elif position:
            problem = f'"{text}" stands beside "{asked[0][1]}"'
            reading.fault(path, problem, "Perturbed members are asked for once", "Add up the two numbers")
        else:
            made = _at(
                reading,
                path,
                perturbed_loads,
                others or builtin_loads(("nominal",)),
                int(count),
                amplitude_sd=fingerprint.perturbed_amplitude_sd,
                delay_sd_days=fingerprint.perturbed_delay_sd_days,
                seed=fingerprint.perturbed_seed,
            )
    return made or ()


def _misspelt(reading: Reading, path: KeyPath, text: str) -> bool:
    """Note a kind of load that is nearly one of the two there are."""
    kind, colon, rest = text.partition(":")
    near = nearest(f"{kind}:", (_BUILTIN, _PERTURBED)) if colon else None
    if near is None:
        return False
    reading.fault(path, f'there is no kind of load "{kind}:"', "", did_you_mean(f"{near}{rest}", ""))
    return True


def _at(reading: Reading, path: KeyPath, function: Callable[..., _T], *arguments: Any, **options: Any) -> _T | None:
    """Call a function whose faults belong to the key at `path`."""
    try:
        return function(*arguments, **options)
    except InputError as error:
        for fault in error.faults:
            reading.fault(path, fault.problem, fault.allowed, fault.action)
        return None
