"""What an outside check is, and the list of all of them.

A section of the page is a module of this folder that defines `AREA`, its title, and `GROUPS`; `SECTIONS` says in which
order they come. To add a check, write a function that returns rows and put it into a `Group`: page and tests follow.
"""

import csv
import os
from collections.abc import Callable
from dataclasses import dataclass
from importlib import import_module
from pathlib import Path

SECTIONS = ("earth", "sea_level", "daily_means", "tides", "annual", "gravity", "air_and_units", "real_gravity")
"""Modules of the sections, in the order of the page; one that defines `NEEDS_OPEN_DATA` is computed where those are."""

OPEN_DATA = os.environ.get("MASSFIT_OPEN_DATA")

REFERENCE = Path(__file__).parents[1] / "reference"


@dataclass(frozen=True)
class Row:
    """One number that was not made here, beside ours.

    `expected` 0 with `bound` means a difference that has to vanish: only whether it is below `tolerance` is shown.
    """

    quantity: str
    expected: float
    obtained: float
    tolerance: float
    form: str = ".4f"
    bound: bool = False

    @property
    def passed(self) -> bool:
        return bool(abs(self.obtained - self.expected) <= self.tolerance)


@dataclass(frozen=True)
class Group:
    """Checks of one source and one kind, with the reason of their tolerance."""

    title: str
    kind: str
    source: str
    reason: str
    rows: Callable[[], list[Row]]


@dataclass(frozen=True)
class Section:
    """Groups of one part of the science."""

    name: str
    title: str
    groups: tuple[Group, ...]
    needs_open_data: bool = False


def sections() -> list[Section]:
    """Every section of the page that can be computed."""
    modules = [(name, import_module(f"validation.{name}")) for name in SECTIONS]
    every = [
        Section(name, module.AREA, tuple(module.GROUPS), getattr(module, "NEEDS_OPEN_DATA", False))
        for name, module in modules
    ]
    return [section for section in every if OPEN_DATA or not section.needs_open_data]


def vanishing(quantity: str, difference: float, tolerance: float) -> Row:
    """A difference that has to vanish."""
    return Row(quantity, 0.0, difference, tolerance, bound=True)


def published(name: str) -> list[dict[str, str]]:
    """Rows of a table of published values."""
    lines = (REFERENCE / name).read_text("utf-8").splitlines()
    return list(csv.DictReader(line for line in lines if not line.startswith("#")))
