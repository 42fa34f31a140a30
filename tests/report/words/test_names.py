"""Text that has to fit: never wider than asked, and nothing lost that had room."""

import pytest

from massfit.report.words.names import columns, fitted, padded, wrapped

NAMES = (
    "A",
    "Kermadec",
    "Sørlige-dyphavsrenna-stasjon-nummer-tre",
    "深海観測点第三号機",
    "Re\u0301union-Sud-Ouest-Profond",
)


@pytest.mark.parametrize("name", NAMES)
@pytest.mark.parametrize("width", [3, 5, 13, 22, 60])
def test_a_fitted_name_takes_no_more_and_keeps_both_ends(name: str, width: int) -> None:
    shown = fitted(name, width)
    assert columns(shown) <= width
    if columns(name) <= width:
        assert shown == name
    else:
        head, mark, tail = shown.partition("…")
        assert mark
        assert name.startswith(head)
        assert name.endswith(tail)
        # two columns more would have shown more: at most a wide letter and its fellow are given away
        assert columns(shown) >= width - 3
    assert columns(padded(name, width)) == width


def test_combining_marks_take_no_column() -> None:
    # Unicode Standard Annex 11 and the table of combining classes
    assert columns("e\u0301") == 1
    assert columns("深") == 2


@pytest.mark.parametrize("width", [20, 40, 80])
def test_wrapped_lines_fit_and_hold_every_word(width: int) -> None:
    text = "one two " + "W" * 130 + " three 深海の圧力計 four " * 6
    lines = wrapped(text, width, first="  - ", rest="    ")
    assert max(map(columns, lines)) <= width
    assert lines[0].startswith("  - ")
    assert all(line.startswith("    ") for line in lines[1:])
    assert "".join("".join(lines).split()) == "-" + "".join(text.split())


def test_nothing_to_wrap_is_no_line() -> None:
    assert wrapped("", 80, first="  - ") == []
