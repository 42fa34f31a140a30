"""Every outside check of the registry holds, and docs/validation.md shows what is computed today."""

import re
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from validation.page import compute, page, split_off
from validation.registry import OPEN_DATA, Group, Row, Section, sections, vanishing

PAGE = Path(__file__).parents[2] / "docs" / "validation.md"
NUMBER = re.compile(r"[-+]?\d+(?:\.\d+)?(?:e[-+]\d+)?")


def last_digit(text: str) -> float:
    """One unit in the last digit that is written."""
    mantissa, _, exponent = text.partition("e")
    return 10.0 ** (int(exponent or 0) - len(mantissa.partition(".")[2]))


def differing(written: Sequence[str], computed: Sequence[str]) -> list[tuple[str, str]]:
    """Lines that differ by more than one unit in the last digit of a number."""
    found = [] if len(written) == len(computed) else [(f"{len(written)} lines", f"{len(computed)} lines")]
    for old, new in zip(written, computed, strict=False):
        numbers = list(zip(NUMBER.findall(old), NUMBER.findall(new), strict=False))
        near = all(abs(float(a) - float(b)) <= 1.001 * max(last_digit(a), last_digit(b)) for a, b in numbers)
        if NUMBER.sub("#", old) != NUMBER.sub("#", new) or not near:
            found.append((old, new))
    return found


def test_every_number_is_within_what_is_allowed_and_the_page_shows_it() -> None:
    found = compute()
    failed = [row for _, groups in found for _, rows in groups for row in rows if not row.passed]
    assert failed == []
    written = PAGE.read_text("utf-8")
    written = written if OPEN_DATA else split_off(written)[0]
    assert differing(written.rstrip().splitlines(), page(found).rstrip().splitlines()) == []


def test_a_wrong_expected_value_is_marked_as_failed() -> None:
    group = Group("Invented", "published", "nobody", "nothing", list)
    section = Section("invented", "Invented", (group,))
    right, wrong = Row("a", 1.000, 1.001, 0.002), Row("b", 1.0, 1.01, 0.002)
    good = page([(section, [(group, [right])])])
    assert "1 numbers in 1 groups, all within" in good
    assert "**no**" not in good
    bad = page([(section, [(group, [right, wrong, vanishing("c", 2e-9, 1e-10)])])])
    assert "**2 beyond what is allowed**" in bad
    assert [line.split(" | ")[0] for line in bad.splitlines() if "**no**" in line] == ["| b", "| c"]
    assert not Row("not a number", 1.0, np.nan, 0.1).passed


def test_a_page_that_is_out_of_date_is_noticed() -> None:
    assert differing(["| k' | -0.303 | -0.306 |"], ["| k' | -0.303 | -0.305 |"]) == []
    assert differing(["| k' | -0.303 | -0.306 |"], ["| k' | -0.303 | -0.304 |"]) != []
    assert differing(["| k' | 1 | yes |"], ["| k' | 1 | **no** |"]) != []
    assert differing(["a"], ["a", "b"]) != []


def test_every_group_names_its_source_and_the_reason_of_its_tolerance() -> None:
    for section in sections():
        assert section.groups
        for group in section.groups:
            assert group.kind, group.title
            assert group.source, group.title
            assert len(group.reason) > 5, group.title
    titles = [group.title for section in sections() for group in section.groups]
    assert len(titles) == len(set(titles))
