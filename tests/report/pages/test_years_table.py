"""The cycle of each year as a table."""

from massfit.report.pages.page_tables import years_table


def cycle(year, median, seen):
    scalar = {"median": median, "region95": [median - 0.2, median + 0.2]}
    day = {"median": 275.3, "region95": [260.0, 290.0]}
    return {"year": year, "period_share": 0.25, "seen": seen, "amplitude_hpa": scalar, "peak_day": day}


def test_every_year_has_a_row_and_a_single_year_no_table():
    table = years_table({"years": [cycle(2016, 0.85, 0.42), cycle(2017, 0.9, 0.0)], "reference_year": 2016})
    assert [row[0] for row in table.rows] == ["2016", "2017"]
    assert table.rows[0][1:3] == ["25 %", "0.850"]
    assert table.rows[0][-1] == "42 %"
    assert years_table({"years": [], "reference_year": 2016}) is None
    assert years_table({"reference_year": 2016}) is None
