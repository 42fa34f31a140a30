"""Gravity fields in the ICGEM text format, 1.0 and 2.0, behind a strict check.

The format is that of Barthelmes & Foerste (2011), "The ICGEM-format", as the International Centre
for Global Earth Models publishes it.
"""

import re
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.gravity.field import TIDE_SYSTEMS, Conventions, GravityField, GravityModel
from massfit.io.gravity.icgem_span import span_of
from massfit.io.gravity.icgem_terms import Term, models_of

HIGHEST_DEGREE = 2190
"""A larger field is none of a month; reading one would need gigabytes."""
MOST_BYTES = 600_000_000
_MOST_FAULTS = 20
_LARGEST = 2e-3
"""C20, by far the largest coefficient above degree 0, is 4.8e-4; a number whose exponent was cut off is larger."""
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([EeDd][+-]?\d+)?\Z")
_INTEGER = re.compile(r"\d{1,6}\Z")
_SIGMAS = {"no": 0, "calibrated": 2, "formal": 2, "calibrated_and_formal": 4}
_TIMED = {"gfct": 1, "trnd": 0, "dot": 0, "acos": 1, "asin": 1}
"""Row keys of format 1.0 that change with time, and the numbers that follow the errors: an epoch or a period."""


@dataclass
class _Header:
    """What the header says, with the lines it says it on."""

    values: dict[str, str] = field(default_factory=dict)
    lines: dict[str, int] = field(default_factory=dict)
    text: str = ""
    body_line: int = 0

    def get(self, *names: str) -> str | None:
        return next((self.values[name] for name in names if name in self.values), None)

    def line(self, *names: str) -> int | None:
        return next((self.lines[name] for name in names if name in self.lines), None)


@dataclass(frozen=True)
class _Frame:
    """The numbers of a header that the rows must keep to."""

    max_degree: int
    sigmas: int
    second: bool

    def width(self, key: str) -> int:
        """Columns of a row of this key, the key itself included."""
        extra = _TIMED.get(key, 0)
        if self.second and key in _TIMED:
            extra = 2 + (key in ("acos", "asin"))
        return 5 + self.sigmas + extra


def parse_icgem(data: bytes, *, name: str, source: str) -> GravityField | tuple[GravityModel, ...]:
    """Read one ICGEM file.

    Parameters
    ----------
    data : bytes
        The file, unpacked.
    name : str
        File name; the span of a month is looked for in it when the header has none.
    source : str
        File as the analyst wrote it, for messages.

    Returns
    -------
    GravityField or tuple of GravityModel
        A field of constants; or, where rows change with time, one model for every stretch of time that has its
        own terms.

    Raises
    ------
    InputError
        Everything in the file that is not the format, with lines: rows of unknown keys, orders above the
        degree, coefficients missing, given twice or not finite, header keys missing or unknown.
    """
    if len(data) > MOST_BYTES:
        raise InputError(Fault(source, "", f"the file has {len(data)} bytes", f"Must be at most {MOST_BYTES}"))
    header, body = _split(data, source)
    frame, conventions = _check_header(header, source)
    # the field's own zero degree is only 1: absent ones are no gap
    values = _quick_rows(body, frame)
    if values is not None:
        coefficients, sd = values
        terms: list[Term] = []
    else:
        coefficients, sd, terms = _careful_rows(body, header, frame, source)
    found = GravityField(
        header.get("modelname") or name,
        coefficients,
        conventions,
        span_of(header.text, name),
        sd,
        header.get("product_type") or "gravity_field",
        source,
        filtered=re.search(r"smooth(ed|ing)|filter(ed|ing)", header.text, re.IGNORECASE) is not None,
    )
    return models_of(found, terms) if terms else found


def _split(data: bytes, source: str) -> tuple[_Header, bytes]:
    match = re.search(rb"^end_of_head[^\n]*\n?", data, re.MULTILINE)
    if match is None:
        problem = "there is no line that begins with end_of_head"
        allowed = "An ICGEM file ends its header so"
        raise InputError(Fault(source, "header", problem, allowed, "Check that the file is whole and of this format"))
    try:
        text = data[: match.start()].decode("utf-8")
    except UnicodeDecodeError:
        text = data[: match.start()].decode("latin-1")  # names of people in comments
    lines = text.splitlines()
    begins = [number for number, line in enumerate(lines) if line.startswith("begin_of_head")]
    first = begins[-1] + 1 if begins else 0
    header = _Header(text=text, body_line=data[: match.end()].count(b"\n") + 1)
    for number, line in enumerate(lines[first:], first + 1):
        words = line.split()
        # without begin_of_head comments stand among the keys: the first mention of a key counts
        if len(words) >= 2 and words[0] not in header.values:
            header.values[words[0]], header.lines[words[0]] = words[1], number
    return header, data[match.end() :]


def _check_header(header: _Header, source: str) -> tuple[_Frame, Conventions]:
    faults: list[Fault] = []

    def choice(names: tuple[str, ...], allowed: tuple[str, ...], default: str | None) -> str:
        value = header.get(*names)
        if value is None and default is None:
            faults.append(Fault(source, names[0], "the header key is missing", f"Must be one of {', '.join(allowed)}"))
        elif value is not None and value not in allowed:
            problem = f"the value is {value!r}"
            faults.append(
                Fault(source, names[0], problem, f"Must be one of {', '.join(allowed)}", "", header.line(*names))
            )
        return value if value in allowed else (default or allowed[0])

    def number(names: tuple[str, ...], low: float, high: float) -> float:
        value = header.get(*names)
        allowed = f"Must be a number from {low:.4g} to {high:.4g}"
        if value is None:
            faults.append(Fault(source, names[0], "the header key is missing", allowed))
            return low
        parsed = _parsed(value)
        if parsed is None or not low <= parsed <= high:
            faults.append(Fault(source, names[0], f"the value is {value!r}", allowed, "", header.line(*names)))
            return low
        return parsed

    version = choice(("format",), ("icgem1.0", "icgem2.0"), "icgem1.0")
    choice(("product_type",), ("gravity_field",), "gravity_field")
    choice(("norm",), ("fully_normalized",), "fully_normalized")
    tides = choice(("tide_system",), TIDE_SYSTEMS, "unknown")
    errors = choice(("errors",), tuple(_SIGMAS), None)
    degree = number(("max_degree",), 1, HIGHEST_DEGREE)
    gm = number(("earth_gravity_constant", "gravity_constant"), 3.98e14, 3.99e14)
    radius = number(("radius",), 6.3e6, 6.4e6)
    if faults:
        raise InputError(faults)
    if degree != int(degree):
        raise InputError(Fault(source, "max_degree", f"the value is {degree}", "Must be whole"))
    conventions = Conventions(gm, radius, tides)  # type: ignore[arg-type]
    return _Frame(int(degree), _SIGMAS[errors], version == "icgem2.0"), conventions


def _parsed(word: str) -> float | None:
    """Read a number as the format writes it, Fortran's D included; None for anything else."""
    if not _NUMBER.match(word):
        return None
    value = float(word.replace("D", "E").replace("d", "e"))
    return value if np.isfinite(value) else None


def _quick_rows(body: bytes, frame: _Frame) -> tuple[NDArray[np.float64], NDArray[np.float64] | None] | None:
    """Coefficients of a body that is plain rows without any fault; None for every other body."""
    words = body.split()
    width, top = frame.width("gfc"), frame.max_degree
    rows, left_over = divmod(len(words), width)
    if left_over or rows == 0 or words.count(b"gfc") != rows or words[::width].count(b"gfc") != rows or b"_" in body:
        return None
    if body.count(b"\n") < rows - 1 or max(map(len, words)) > 40:
        return None
    try:
        table = np.array([words[column::width] for column in range(1, width)], dtype="S40")
        if b"D" in body or b"d" in body:
            table = np.char.replace(np.char.replace(table, b"D", b"E"), b"d", b"e")
        numbers = table.astype(float)
    except ValueError:
        return None
    degree, order = numbers[0], numbers[1]
    whole = np.array_equal(numbers[:2], np.rint(numbers[:2]))
    if not (whole and np.isfinite(numbers).all() and degree.max() <= top):
        return None
    if np.any(order > degree) or order.min() < 0.0 or np.abs(numbers[2:4, degree > 0]).max(initial=0.0) > _LARGEST:
        return None
    at = degree.astype(np.int64), order.astype(np.int64)
    if np.bincount(at[0] * (top + 1) + at[1]).max() > 1 or not _complete(at[0], top):
        return None
    values = np.zeros((2 + frame.sigmas, top + 1, top + 1))
    values[:, at[0], at[1]] = numbers[2:]
    return values[:2], values[2:4] if frame.sigmas else None


def _complete(degree: NDArray[np.int64], top: int) -> bool:
    """Whether every degree from 2 has all its orders; degrees 0 and 1 may be left out."""
    count = np.bincount(degree, minlength=top + 1)
    return bool(np.array_equal(count[2 : top + 1], np.arange(3, top + 2)))


def _careful_rows(
    body: bytes, header: _Header, frame: _Frame, source: str
) -> tuple[NDArray[np.float64], NDArray[np.float64] | None, list[Term]]:
    """Rows one by one, with every fault on its line."""
    faults: list[Fault] = []
    size = frame.max_degree + 1
    values = np.zeros((2 + frame.sigmas, size, size))
    seen: Counter[tuple[object, ...]] = Counter()
    terms: list[Term] = []
    text = body.decode("latin-1")
    for number, line in enumerate(text.split("\n"), header.body_line):
        words = line.split()
        if not words:
            continue
        row = _row(words, frame)
        if isinstance(row, str):
            faults.append(
                Fault(
                    source,
                    words[0][:20],
                    row,
                    f"Must be {_pattern(words[0], frame)}",
                    "Mend the file or leave it out",
                    number,
                )
            )
            continue
        key, degree, order, numbers = row
        # format 2.0 repeats a coefficient for every stretch of time; 1.0 repeats periodic ones for every period
        place = (key, degree, order, tuple(numbers[2 + frame.sigmas :]))
        seen[place] += 1
        if seen[place] > 1:
            problem = f"degree {degree} order {order} is given twice"
            faults.append(Fault(source, key, problem, "Must be given once", "Remove one of the rows", number))
        elif key == "gfc":
            values[:, degree, order] = numbers[: 2 + frame.sigmas]
        else:
            sd, tail = numbers[2 : 2 + min(frame.sigmas, 2)], numbers[2 + frame.sigmas :]
            terms.append(Term(key, degree, order, tuple(numbers[:2]), tuple(sd), tuple(tail), number))
    faults += _gaps({(d, m) for key, d, m, *_ in seen if key in ("gfc", "gfct")}, frame, source)  # type: ignore[misc]
    if faults:
        raise InputError(_shortened(faults, source))
    return values[:2], values[2:4] if frame.sigmas else None, terms


def _row(words: list[str], frame: _Frame) -> tuple[str, int, int, list[float]] | str:
    """Take apart a row: key, degree, order and further numbers; or say what is wrong with it."""
    key = words[0]
    if key != "gfc" and key not in _TIMED:
        return "the row begins with no known key"
    if len(words) != frame.width(key):
        return f"the row has {len(words)} columns"
    if not (_INTEGER.match(words[1]) and _INTEGER.match(words[2])):
        return f"degree and order are {words[1]!r} and {words[2]!r}"
    degree, order = int(words[1]), int(words[2])
    if degree > frame.max_degree:
        return f"the degree is {degree}, above the header's max_degree {frame.max_degree}"
    if order > degree:
        return f"the order {order} is above the degree {degree}"
    numbers = [_parsed(word) for word in words[3:]]
    for word, value in zip(words[3:], numbers, strict=True):
        if value is None:
            return f"{word!r} is no finite number"
        if degree > 0 and word in words[3:5] and abs(value) > _LARGEST:
            return f"the coefficient is {word}, and no gravity field of the Earth has any above {_LARGEST:g}"
    return key, degree, order, [value for value in numbers if value is not None]


def _pattern(key: str, frame: _Frame) -> str:
    sigmas = {0: "", 2: " sigma_C sigma_S", 4: " sigma_C sigma_S (calibrated, then formal)"}[frame.sigmas]
    known = key if key in _TIMED else "gfc"
    tail = {0: "", 1: " epoch" if known == "gfct" else " period"}.get(_TIMED.get(known, 0), "")
    if frame.second and known in _TIMED:
        tail = " start end" + (" period" if known in ("acos", "asin") else "")
    columns = f"{known} degree order C S{sigmas}{tail}, {frame.width(known)} columns"
    return f"{columns}, order at most the degree, finite numbers"


def _gaps(present: set[tuple[int, int]], frame: _Frame, source: str) -> Iterator[Fault]:
    top = frame.max_degree
    missing = [(d, m) for d in range(2, top + 1) for m in range(d + 1) if (d, m) not in present]
    if missing:
        listed = ", ".join(f"({d}, {m})" for d, m in missing[:5]) + (", ..." if len(missing) > 5 else "")
        problem = f"{len(missing)} coefficients are missing: {listed}"
        allowed = f"Every degree from 2 to max_degree {top} with all its orders"
        yield Fault(source, "gfc", problem, allowed, "Check that the file is whole")


def _shortened(faults: list[Fault], source: str) -> list[Fault]:
    if len(faults) <= _MOST_FAULTS:
        return faults
    return [*faults[:_MOST_FAULTS], Fault(source, "", f"{len(faults) - _MOST_FAULTS} more faults of rows")]
