import numpy as np
import pytest

from massfit.phasor import as_complex
from massfit.report.figures.draw import draw_figures
from massfit.results.figure_data import figure_tables, weekly_means
from massfit.results.finished import FinishedRun, finished_run
from massfit.results.record_rows import record_rows


@pytest.fixture(scope="module")
def finished(run) -> FinishedRun:
    return finished_run(run, command="massfit estimate here")


@pytest.fixture(scope="module")
def tables(finished):
    return figure_tables(finished, rows_of_a_page=2)


def column(table, name):
    return [row[table.head.index(name)] for row in table.rows]


def test_every_figure_of_the_run_has_its_table(finished, tables, monkeypatch):
    from massfit.fingerprint.ocean import OceanFunction

    monkeypatch.setattr("massfit.report.figures.draw.ROWS_OF_A_PAGE", 2)
    drawn = draw_figures(finished, OceanFunction.builtin())
    assert tables.keys() == {name for name in drawn if not name.endswith("_column")}
    for table in tables.values():
        assert table.rows
        assert {len(row) for row in table.rows} == {len(table.head)}


def test_the_map_holds_the_sites_as_they_are(finished, tables):
    sites = finished.summary["sites"]
    assert column(tables["network_map"], "latitude") == [site["latitude"] for site in sites]
    factors = as_complex(np.array([site["admittance"] for site in sites]))
    assert column(tables["network_map"], "amplitude_ratio") == pytest.approx(np.abs(factors))


def test_the_records_are_those_of_the_run_on_their_pages(finished, tables):
    rows = record_rows(finished)
    assert set(column(tables["records"], "site")) == {row.site for row in rows[:2]}
    assert set(column(tables["records_2"], "site")) == {rows[2].site}
    reduced = column(tables["records_2"], "reduced_hpa")
    assert reduced == pytest.approx(rows[2].reduced, abs=0.005)
    assert column(tables["records_2"], "day")[0] == str(rows[2].reduced_time[0])[:10]


def test_draws_of_the_corner_are_those_of_the_posterior(finished, tables):
    amplitude = np.array(column(tables["corner"], "amplitude_hpa"))
    expected = finished.summary["amplitude_hpa"]
    # two thousand of them
    assert abs(np.median(amplitude) - expected["median"]) < 5.0 * 1.25 * expected["sd"] / np.sqrt(amplitude.size)


def test_weeks_are_shared_by_the_sites_and_keep_the_mean(finished):
    count, means = weekly_means(finished)
    rows = {row.site: row for row in record_rows(finished)}
    assert means.keys() == rows.keys()
    first = min(row.reduced_time.min() for row in rows.values()).astype("datetime64[D]")
    for site, (weeks, values) in means.items():
        days = (rows[site].reduced_time.astype("datetime64[D]") - first).astype(int)
        assert 0 <= weeks.min() <= weeks.max() < count
        assert values[0] == pytest.approx(rows[site].reduced[days // 7 == weeks[0]].mean())
        share = np.array([(days // 7 == week).sum() for week in weeks])
        assert (share @ values) / share.sum() == pytest.approx(rows[site].reduced.mean(), abs=1e-9)
