import re

import numpy as np

from massfit.report.pages.page_tables import Table
from massfit.report.pages.sparklines import with_sparklines

TABLE = Table("Sites", ("site", "latitude"), [["A", "1"], ["B", "2"]])
SITES = [{"id": "A"}, {"id": "B"}]


def test_a_line_breaks_where_weeks_are_missing_and_stays_within_reach():
    means = {"A": (np.array([0, 1, 2, 5, 6]), np.array([0.0, 1.0, -99.0, 0.5, 99.0]))}
    table = with_sparklines(TABLE, SITES, 10, means)
    assert table.head == ("site", "reduced record, \u00b14 hPa", "latitude")
    drawn, empty = (row[1] for row in table.rows)
    (path,) = re.findall(r'<path d="([^"]*)"', drawn)
    assert (path.count("M"), path.count("L")) == (2, 3)
    heights = [int(number) for number in re.findall(r" (\d+)", path)]
    assert (min(heights), max(heights)) == (0, 260)
    assert "from -99.0 to 99.0 hPa" in drawn
    assert empty == ""


def test_without_any_record_the_table_is_as_it_was():
    assert with_sparklines(TABLE, SITES, 0, {}) is TABLE
