"""Leave out the samples whose quality flags say so.

Flags are numbers whose meaning the file may state (CF Conventions 1.13, section 3.5). Where it does not they are
those of QARTOD (Integrated Ocean Observing System 2017, Manual for the Use of Real-Time Oceanographic Data Quality
Control Flags, version 1.1), which are the primary level of UNESCO/IOC 2013 (Manuals and Guides 54, volume 3).
"""

import re
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.samples import Flags, Samples
from massfit.records.record import Action
from massfit.records.stretches import stretches

NO_FLAGS = "none"
"""What `flag_variable` says where flags are not to be used."""
QARTOD = {1: "pass", 2: "not evaluated", 3: "suspect", 4: "fail", 9: "missing"}
_BAD = {
    "bad", "fail", "failed", "missing", "suspect", "questionable", "invalid", "doubtful", "erroneous", "rejected",
    "wrong", "incorrect", "spike", "outlier", "unusable", "unreliable", "saturated", "absent",
}  # fmt: skip
_GOOD = {"good", "pass", "passed", "ok", "valid", "nominal", "correct", "acceptable", "accepted", "reliable", "usable"}
_UNJUDGED = {"evaluated", "unevaluated", "unknown", "unchecked", "checked", "tested", "assessed", "qc"}
_STATE = 'State `keep_flags`, or flag_variable = "none" to use none'


def without_flagged(samples: Samples, entry: DeploymentFile) -> Samples:
    """Leave out the samples whose flag is not among those that are kept.

    Parameters
    ----------
    samples : Samples
    entry : DeploymentFile
        Its `keep_flags`; by default the flags that the file calls good or not evaluated, or else 1 and 2.

    Returns
    -------
    Samples
        Without flags, and with an action for each flag that was left out. A sample without a flag is kept: nobody
        has judged it.

    Raises
    ------
    InputError
        A flag that occurs has no meaning that is known, or every sample is left out.

    Examples
    --------
    >>> time = np.datetime64("2016-01-01", "ns") + np.arange(4) * np.timedelta64(1, "h")
    >>> samples = Samples(time, np.arange(4.0), flags=(Flags("qc", np.array([1.0, 4, 2, 9])),))
    >>> kept = without_flagged(samples, DeploymentFile("a.txt"))
    >>> kept.pressure.tolist(), [action.what for action in kept.actions]
    ([0.0, 2.0], ['samples with flag 4 (fail) left out', 'samples with flag 9 (missing) left out'])
    """
    if not samples.flags:
        return samples
    used = np.ones(samples.time.size, dtype=bool)
    actions: list[Action] = []
    for flags in samples.flags:
        numbers = _numbers(flags.values)
        kept = _kept(flags, numbers, entry)
        detail = f"{flags.name}; kept: {', '.join(map(str, kept)) or 'none'}"
        for number in numbers:
            if number not in kept:
                out = used & (flags.values == number)
                actions.append(Action(_what(number, flags), int(np.count_nonzero(out)), detail))
                used &= ~out
        actions += _unflagged(flags, used)
    if used.size and not used.any():
        names = ", ".join(flags.name for flags in samples.flags)
        problem = f"all {used.size} samples have flags that are left out"
        raise InputError(Fault(entry.file, names, problem, _allowed(samples.flags[0]), _STATE))
    return replace(
        samples,
        time=samples.time[used],
        pressure=samples.pressure[used],
        actions=(*samples.actions, *(action for action in actions if action.count)),
        flags=(),
    )


def _numbers(values: NDArray[np.float64]) -> list[int]:
    """List the flags that occur, in order."""
    found = [np.unique(values[part]) for part in stretches(values.size)]
    numbers = np.unique(np.concatenate([np.zeros(0), *found]))
    return [int(number) for number in numbers[np.isfinite(numbers)]]


def _kept(flags: Flags, numbers: list[int], entry: DeploymentFile) -> tuple[int, ...]:
    if entry.keep_flags is not None:
        return entry.keep_flags
    verdicts = {number: _is_good(word) for number, word in (flags.meanings or QARTOD).items()}
    strange = [number for number in numbers if verdicts.get(number) is None]
    if strange:
        word = f" ({flags.meanings[strange[0]]})" if strange[0] in flags.meanings else ""
        count = int(np.count_nonzero(flags.values == strange[0]))
        problem = f"the flag {strange[0]}{word} stands {count} times and nothing says whether such samples are good"
        raise InputError(Fault(entry.file, flags.name, problem, _allowed(flags), _STATE))
    return tuple(number for number, good in verdicts.items() if good)


def _is_good(meaning: str) -> bool | None:
    words = set(re.split(r"[^a-z]+", meaning.casefold()))
    if words & _UNJUDGED and words & {"not", "no", "unevaluated", "unknown", "unchecked"}:
        return True
    if words & _BAD or (words & _GOOD and "not" in words):
        return False
    return True if words & _GOOD else None


def _allowed(flags: Flags) -> str:
    known = ", ".join(f"{number} {word}" for number, word in (flags.meanings or QARTOD).items())
    return f"{'The file says' if flags.meanings else 'Must be a number of QARTOD:'} {known}"


def _what(number: int, flags: Flags) -> str:
    meaning = (flags.meanings or QARTOD).get(number)
    return f"samples with flag {number}{f' ({meaning})' if meaning else ''} left out"


def _unflagged(flags: Flags, used: NDArray[np.bool_]) -> list[Action]:
    count = int(np.count_nonzero(used & np.isnan(flags.values)))
    return [Action("samples without a flag kept", count, flags.name)] if count else []
