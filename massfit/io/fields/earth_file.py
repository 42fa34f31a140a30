"""Earth profiles from CSV, and back."""

import re
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from massfit.earth.profile import EarthProfile, Layer
from massfit.earth.table import earth_faults, table_faults, tabulated_profile
from massfit.errors import Fault, InputError, collect, printable

_NOTE = re.compile(r"#\s*(name|reference)\s*:\s*(.*?)\s*$")
_MOST_BYTES = 2**20
_LONGEST_NOTE = 200
_LARGEST = 1e9  # of anything that an Earth profile holds, in any of its units

# quantity: its columns with the factor to SI, and what the Earth has of it
_COLUMNS = {
    "radius": ({"radius_m": 1.0, "radius_km": 1e3}, (0.0, 6.5e6)),
    "density": ({"density_kg_m3": 1.0, "density_g_cm3": 1e3}, (500.0, 2e4)),
    "compressional speed": ({"vp_m_s": 1.0, "vp_km_s": 1e3}, (500.0, 2e4)),
    "shear speed": ({"vs_m_s": 1.0, "vs_km_s": 1e3}, (0.0, 1e4)),
}
_POLYNOMIAL = re.compile(r"(rho|vp|vs)(\d)$")
_LIMITS = ("r_bottom_km", "r_top_km")
_HEADERS = "Must be radius_km,density_g_cm3,vp_km_s,vs_km_s (or _m, _kg_m3, _m_s), or r_bottom_km,r_top_km,rho0,...,vs3"


def read_earth_profile(path: Path, *, source: str) -> EarthProfile:
    """Read an Earth profile.

    Parameters
    ----------
    path : pathlib.Path
        CSV with comment lines ``# name: ...`` and ``# reference: ...``, and one of two headers. A table has
        `radius_km`, `density_g_cm3`, `vp_km_s`, `vs_km_s` (or `radius_m`, `density_kg_m3`, `vp_m_s`, `vs_m_s`) from the
        centre to the surface or back, linear between its rows, with a boundary given twice; other columns are
        not read. Polynomials have `r_bottom_km`, `r_top_km`, `rho0`, `rho1`, ..., `vp0`, ..., `vs0`, ...: coefficients
        of g cm-3 and km s-1 in the radius over that of the surface, one row a layer.
    source : str
        File as the analyst wrote it.

    Returns
    -------
    EarthProfile

    Raises
    ------
    InputError
        The file is no such CSV, its units look wrong, it has gaps, or it is not the Earth: radius, mass, fluid
        core, solid surface, rigidity and bulk modulus are checked.
    """
    lines = _lines(path, source)
    notes = {match[1]: printable(match[2])[:_LONGEST_NOTE] for match in map(_NOTE.match, lines) if match}
    rows = [(number, line) for number, line in enumerate(lines, 1) if line.strip() and not line.startswith("#")]
    header = [column.strip() for column in rows[0][1].split(",")] if rows else []
    name, reference = notes.get("name") or path.stem, notes.get("reference", "")
    faults: list[Fault] = []
    profile: EarthProfile | None = None
    with collect(faults):
        if set(_LIMITS) <= set(header):
            profile = EarthProfile(name, reference, _layers(header, rows, source))
        else:
            profile = _tabulated(header, rows, source, name, reference)
        faults += earth_faults(profile, source)
    if faults or profile is None:
        raise InputError([Fault(source, f.name, f.problem, f.allowed, f.action, f.line) for f in faults])
    return profile


def write_earth_profile(path: Path, profile: EarthProfile) -> None:
    """Write a profile as polynomials, as :func:`read_earth_profile` reads them.

    Parameters
    ----------
    path : pathlib.Path
    profile : EarthProfile
    """
    most = max(len(each) for layer in profile.layers for each in _properties(layer))
    header = [*_LIMITS, *(f"{name}{order}" for name in ("rho", "vp", "vs") for order in range(most))]
    lines = [f"# name: {profile.name}", f"# reference: {profile.reference}", ",".join(header)]
    for layer in profile.layers:
        cells = [layer.bottom, layer.top]
        for coefficients in _properties(layer):
            cells += [*coefficients, *([0.0] * (most - len(coefficients)))]
        lines.append(",".join(repr(cell / 1e3) for cell in cells))
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")


def _properties(layer: Layer) -> tuple[tuple[float, ...], ...]:
    return layer.density, layer.compressional_speed, layer.shear_speed


def _lines(path: Path, source: str) -> list[str]:
    size = path.stat().st_size
    if size > _MOST_BYTES:
        problem = f"the file has {size} bytes"
        raise InputError(Fault(source, "", problem, f"An Earth profile has at most {_MOST_BYTES}", "Check the path"))
    try:
        return path.read_text(encoding="utf-8-sig").splitlines()
    except UnicodeDecodeError as error:
        raise InputError(Fault(source, "", "the file is not UTF-8 text", "Must be CSV", "Check the path")) from error


def _numbers(
    header: list[str], rows: list[tuple[int, str]], wanted: list[str], source: str
) -> tuple[NDArray[np.float64], NDArray[np.intp]]:
    """Values of the wanted columns, and the line of each row."""
    place = [header.index(name) for name in wanted]
    values, faults = [], []
    for number, line in rows[1:]:
        cells = [cell.strip() for cell in line.split(",")]
        if len(cells) != len(header):
            problem = f"the row has {len(cells)} values"
            faults.append(Fault(source, "", problem, f"Must be {len(header)} as the header", "Correct it", number))
            continue
        try:
            values.append([float(cells[column]) for column in place])
        except ValueError:
            problem = f"the row holds {line[:60]!r}"
            faults.append(Fault(source, "", problem, "Must be numbers", "Correct it", number))
            continue
        if not (np.abs(values[-1]) <= _LARGEST).all():  # NaN is not
            problem = "a value is missing, infinite or too large"
            faults.append(Fault(source, "", problem, f"Must be numbers up to {_LARGEST:g}", "Fill the gap", number))
    if not values and not faults:
        faults.append(Fault(source, "", "there is no row", "At least two", "Check the file"))
    if faults:
        raise InputError(faults[:10])
    return np.array(values), np.array([number for number, _ in rows[1:]], dtype=np.intp)


def _tabulated(header: list[str], rows: list[tuple[int, str]], source: str, name: str, reference: str) -> EarthProfile:
    found = {quantity: [column for column in header if column in known] for quantity, (known, _) in _COLUMNS.items()}
    if any(len(columns) != 1 for columns in found.values()):
        line = rows[0][0] if rows else 1
        raise InputError(Fault(source, "", f"the header is {','.join(header)[:80]!r}", _HEADERS, "", line))
    chosen = [columns[0] for columns in found.values()]
    table, lines = _numbers(header, rows, chosen, source)
    if table[0, 0] > table[-1, 0]:
        table, lines = table[::-1], lines[::-1]
    faults = [
        fault
        for column, (quantity, (known, bounds)) in enumerate(_COLUMNS.items())
        for fault in _unit_faults(source, quantity, chosen[column], known[chosen[column]], table[:, column], bounds)
    ]
    table = table * [known[column] for column, (known, _) in zip(chosen, _COLUMNS.values(), strict=True)]
    if faults := faults or table_faults(source, table, lines):
        raise InputError(faults)
    return tabulated_profile(name, *table.T, reference=reference)


def _unit_faults(
    source: str, quantity: str, column: str, factor: float, values: NDArray[np.float64], bounds: tuple[float, float]
) -> list[Fault]:
    """Refuse values that the Earth does not have, and say so where another unit would cure them."""
    low, high = bounds
    largest = float(np.max(values)) * factor
    least_top = {"radius": 6e6, "density": 9e3, "compressional speed": 9e3, "shear speed": 5e3}[quantity]
    if least_top <= largest <= high and float(np.min(values)) * factor >= low:
        return []
    others = {name: other for name, other in _COLUMNS[quantity][0].items() if other != factor}
    cured = [name for name, other in others.items() if least_top <= np.max(values) * other <= high]
    action = f"The values look like {cured[0]}" if cured else "Check the values"
    problem = f"the values run from {np.min(values):g} to {np.max(values):g}"
    limits = f"Must lie within {low / factor:g} and {high / factor:g}, the largest above {least_top / factor:g}"
    return [Fault(source, column, problem, limits, action)]


def _layers(header: list[str], rows: list[tuple[int, str]], source: str) -> tuple[Layer, ...]:
    names = {
        kind: [f"{kind}{order}" for order in range(10) if f"{kind}{order}" in header] for kind in ("rho", "vp", "vs")
    }
    complete = all(own and own[-1] == f"{kind}{len(own) - 1}" for kind, own in names.items())
    stray = [column for column in header if column not in _LIMITS and not _POLYNOMIAL.match(column)]
    if not complete or stray or len(set(header)) != len(header):
        raise InputError(Fault(source, "", f"the header is {','.join(header)[:80]!r}", _HEADERS, "", rows[0][0]))
    wanted = [*_LIMITS, *names["rho"], *names["vp"], *names["vs"]]
    table = 1e3 * _numbers(header, rows, wanted, source)[0]
    first, second = 2 + len(names["rho"]), 2 + len(names["rho"]) + len(names["vp"])
    return tuple(
        Layer(
            float(row[0]),
            float(row[1]),
            *(tuple(part.tolist()) for part in (row[2:first], row[first:second], row[second:])),
        )
        for row in table
    )
