"""Guesses are held against the files themselves: what the reader reads with them must be what was written."""

import tomllib
from pathlib import Path

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.io.guess.described import RecordGuess
from massfit.io.guess.guess_sites import guess_sites, site_names
from massfit.io.guess.guess_text import guess_layout
from massfit.io.guess.guess_text_record import guess_text_records
from massfit.io.guess.guess_time import guess_time
from massfit.io.guess.guess_words import meanings, place_of_prose, unit_of_prose
from massfit.io.guess.starter_file import begin_network
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.record_text import read_text_record
from massfit.io.records.samples import Samples

HOURS = np.arange("2015-12-20", "2016-03-05", dtype="datetime64[h]").astype("datetime64[ns]")
VALUES = 5500.0 + np.round(np.cos(np.arange(HOURS.size) / 2.0), 4)


def parts(instant: np.datetime64) -> tuple[int, ...]:
    stamp = instant.astype("datetime64[s]").item()
    return (stamp.year, stamp.month, stamp.day, stamp.hour, stamp.minute, stamp.timetuple().tm_yday)


def written(form: str) -> list[str]:
    """Rows of a file; `form` names the parts, also by strptime signs."""
    rows = []
    for instant, value in zip(HOURS, VALUES, strict=True):
        y, mo, d, h, mi, doy = parts(instant)
        stamp = instant.astype("datetime64[s]").item()
        clock = {"y": y, "mo": mo, "d": d, "h": h, "mi": mi, "doy": doy, "days": doy + h / 24.0}
        unix = int(instant.astype("datetime64[s]").astype(np.int64))
        # 40587 is 1 January 1970
        rows.append(stamp.strftime(form).format(v=f"{value:.4f}", unix=unix, mjd=40587 + unix / 86400, **clock))
    return rows


def read_as_guessed(folder: Path, lines: list[str], **filled: object) -> tuple[RecordGuess, Samples]:
    (folder / "a.txt").write_text("\n".join(lines) + "\n")
    (guess,) = guess_text_records(folder, "a.txt")
    keys = {key: tuple(g.value) if isinstance(g.value, list) else g.value for key, g in guess.keys.items()}
    entry = {key: value for key, value in {**keys, **filled}.items() if value is not None}
    return guess, read_text_record(folder / "a.txt", DeploymentFile(file="a.txt", **entry))


LAYOUTS = {
    "split date, commented": (["#YY MM DD hh mm P", "#yr mo dy hr mn dbar"], "{y} {mo:02d} {d:02d} {h:02d} {mi} {v}"),
    "odd names": (["YYYY,MO,DY,HR,MIN,press_dbar"], "{y},{mo},{d},{h},{mi},{v}"),
    "other order": (["day;month;yr;hh;pressure [dbar]"], "{d};{mo};{y};{h};{v}"),
    "units row": (["yr\tmon\tday\thour\tpres", "-\t-\t-\t-\tdbar"], "{y}\t{mo}\t{d}\t{h}\t{v}"),
    "day of the year": (["year jday hour press_dbar"], "{y} {doy} {h} {v}"),
    "day of the year with decimals": (["year,doy,press_dbar"], "{y},{days:.9f},{v}"),
    "no header": (["# bottom pressure in dbar"], "{y} {mo} {d} {h} {v}"),
    "iso": (["time,pressure_dbar"], "%Y-%m-%dT%H:%M:%SZ,{v}"),
    "two columns": (["date,time,temp_c,pressure_dbar"], "%Y-%m-%d,%H:%M,4.5,{v}"),
    "slashes": (["time,pressure_dbar"], "%d/%m/%Y %H:%M,{v}"),
    "compact": (["% pressure in dbar"], "%Y%m%d%H {v}"),
    "two digits": (["YY MM DD hh press_dbar"], "%y %m %d %H {v}"),
    "title": (["Mooring D4", "Date Time Pressure(dbar)"], "%m/%d/%Y %H:%M {v}"),
    "noon and midnight": (["time;pressure_dbar"], "%m/%d/%Y %I:%M %p;{v}"),
    "compact with T": (["time pressure_dbar"], "%Y%m%dT%H%M%S {v}"),
    "trailing delimiter": (["time,pressure_dbar,"], "%Y-%m-%d %H:%M,{v},"),
    "modified Julian days": (["mjd pressure_dbar"], "{mjd:.9f} {v}"),
    "seconds": (["timestamp,pressure_dbar"], "{unix},{v}"),
}


@pytest.mark.parametrize("layout", LAYOUTS)
def test_the_reader_gets_back_what_was_written(layout: str, tmp_path: Path) -> None:
    header, form = LAYOUTS[layout]
    rows = written(form)
    guess, samples = read_as_guessed(tmp_path, [*header, *rows])
    assert guess.notes == () or layout == "two columns"
    assert np.array_equal(samples.time, HOURS)
    assert np.allclose(samples.pressure, VALUES * 1e4, rtol=0, atol=1e-6)
    assert guess.keys["units"].value == "dbar"
    assert guess.sampling_s == 3600.0
    assert guess.span == (HOURS[0], HOURS[-1])
    assert all(key.evidence for key in guess.keys.values())


def test_missing_values_are_told_by_nines_far_away(tmp_path: Path) -> None:
    rows = written("{y} {mo} {d} {h} {v}")
    for k in (3, 40, 41):
        rows[k] = rows[k].rsplit(" ", 1)[0] + " -999.9"
    guess, samples = read_as_guessed(tmp_path, ["#year month day hour pressure_dbar", *rows])
    assert guess.keys["missing"].value == [-999.9]
    assert "stands 3 times" in guess.keys["missing"].evidence
    assert np.flatnonzero(np.isnan(samples.pressure)).tolist() == [3, 40, 41]
    # 99.9 among values near 100 is a value
    near = [row.rsplit(" ", 1)[0] + f" {99.9 + k % 3:.1f}" for k, row in enumerate(rows)]
    assert "missing" not in read_as_guessed(tmp_path, ["#year month day hour pressure_dbar", *near])[0].keys


def test_an_ambiguous_date_is_left_open(tmp_path: Path) -> None:
    days = [f"{d:02d}/{m:02d}/2016,5500.{d}" for m in range(1, 13) for d in range(1, 13)]
    lines = ["date,pressure_dbar", *days]
    (tmp_path / "a.txt").write_text("\n".join(lines))
    (guess,) = guess_text_records(tmp_path, "a.txt")
    assert guess.keys["time_format"].value is None
    assert "%d/%m/%Y or %m/%d/%Y" in guess.keys["time_format"].evidence
    assert guess.span is None
    # one day past the twelfth settles it
    (tmp_path / "a.txt").write_text("\n".join([*lines, "13/12/2016,5500.1"]))
    assert guess_text_records(tmp_path, "a.txt")[0].keys["time_format"].value == "%d/%m/%Y"


def test_units_are_not_guessed_from_values(tmp_path: Path) -> None:
    rows = written("{y} {mo} {d} {h} {v}")
    guess, _ = read_as_guessed(tmp_path, ["#year month day hour pressure", *rows], units="dbar")
    assert guess.keys["units"].value is None
    assert "the median of its values is 5500" in guess.keys["units"].evidence
    assert "dbar" in guess.keys["units"].evidence


def test_kinds_routine_rows_and_flags(tmp_path: Path) -> None:
    rows = written("{y} {mo} {d} {h} 1 {v}")
    events = [f"2016 1 3 {h} 3 5500.1" for h in range(6)]
    guess, samples = read_as_guessed(tmp_path, ["year month day hour T pressure_dbar", *rows, *events])
    assert guess.keys["keep_kinds"].value == ["1"]
    assert samples.time.size == HOURS.size
    flags = written("{y} {mo} {d} {h} 0 {v}")
    (tmp_path / "b.txt").write_text("\n".join(["year month day hour qc pressure_dbar", *flags, *events]))
    (guess,) = guess_text_records(tmp_path, "b.txt")
    # 0 is no number of QARTOD: which rows are good is asked
    assert guess.keys["flag_variable"].value == "qc"
    assert guess.keys["keep_flags"].value is None
    assert "qc is 0 on 76 days, 3 on 1 days" in guess.keys["keep_flags"].evidence
    (tmp_path / "b.txt").write_text("\n".join(["year month day hour qc pressure_dbar", *rows, *events]))
    (guess,) = guess_text_records(tmp_path, "b.txt")
    assert guess.keys["keep_flags"].value == [1, 2]
    # letters are kinds of rows
    letters = written("{y} {mo} {d} {h} G {v}")
    lines = ["year month day hour qc pressure_dbar", *letters, "2016 3 4 1 B 5500.0"]
    (tmp_path / "b.txt").write_text("\n".join(lines))
    (guess,) = guess_text_records(tmp_path, "b.txt")
    assert "keep_flags" not in guess.keys
    assert "qc is G on 76 days, B on 1 days" in guess.keys["keep_kinds"].evidence


def test_several_columns_of_pressure(tmp_path: Path) -> None:
    rows = [f"2016-01-{d:02d},55{d}.1,56{d}.2,-1.0" for d in range(1, 29)]
    (tmp_path / "a.csv").write_text("\n".join(["date,depth_q7_m,depth_q8_m,differential_m", *rows]))
    found = guess_text_records(tmp_path, "a.csv")
    assert [guess.name for guess in found] == ["q7", "q8"]
    assert [guess.keys["variable"].value for guess in found] == ["depth_q7_m", "depth_q8_m"]
    assert found[0].keys["density_kg_m3"].value is None
    assert found[0].notes == ("columns not used: differential_m",)
    assert found[0].keys["stamp"].value == "start"
    (tmp_path / "b.csv").write_text("\n".join(["date,pressure1,pressure2,x", *rows]))
    (guess,) = guess_text_records(tmp_path, "b.csv")
    assert guess.keys["variable"].value is None


@pytest.mark.parametrize("text", ["Dear reader,\nread this.\nYours\n", "1\n2\n3\n", "a b c\nd e f\ng h i\n", ""])
def test_prose_is_no_record(text: str, tmp_path: Path) -> None:
    (tmp_path / "a.txt").write_text(text)
    assert guess_text_records(tmp_path, "a.txt") == []


@pytest.mark.parametrize(
    ("header", "form", "problem"),
    [
        ("time;pressure_dbar", "%d.%m.%Y %H:%M;5500,{h}", "its numbers have decimal commas, '5500,0'"),
        ("station,time,pressure_dbar", "K{h},%Y-%m-%d %H:%M,{v}", "it mixes the rows of several stations, K0, K1"),
    ],
)
def test_tables_that_cannot_be_read_are_refused(header: str, form: str, problem: str, tmp_path: Path) -> None:
    (tmp_path / "a.csv").write_text("\n".join([header, *written(form)]))
    with pytest.raises(InputError, match=problem):
        guess_text_records(tmp_path, "a.csv")


def test_damaged_text_never_ends_in_a_traceback(tmp_path: Path) -> None:
    rng = np.random.default_rng(5)
    texts = ["\n".join([*header, *written(form)[:60]]) for header, form in LAYOUTS.values()]
    alphabet = list("0123456789.,;:-#% \t\"'TNaE\0\n\x1b\N{DEGREE SIGN}")
    for case in range(400):
        text = list(texts[case % len(texts)])
        for place in rng.integers(0, len(text), size=rng.integers(1, 40)):
            text[place] = str(rng.choice(alphabet))
        (tmp_path / "a.txt").write_text("".join(text))
        tomllib.loads(begin_network(tmp_path).text)


def test_a_fault_of_the_reader_is_told(tmp_path: Path) -> None:
    rows = written("{y} {mo} {d} {h} {v}")
    rows[700] = "2016 2 30 1 5500.0"
    (tmp_path / "a.txt").write_text("\n".join(["#year month day hour pressure_dbar", *rows]))
    (guess,) = guess_text_records(tmp_path, "a.txt")
    assert "a.txt:702: day: the value is 30. Must be a day of its month" in guess.notes[0]


def test_words() -> None:
    expected = ["year", "month", "day", "hour", "minute", "second", "pressure"]
    assert meanings(["YYYY", "MO", "dd", "hh", "min", "ss", "p"]) == expected
    assert meanings(["temperature", "differential_m", "station"]) == ["", "", ""]
    assert unit_of_prose(["nothing here", "Units: psia"]) == ("psia", "Units: psia")
    assert unit_of_prose(["in all 5 files"]) is None
    found = place_of_prose(["latitude = -11.25 deg", "longitude: 154.5 W", "Water depth: 4870 m"])
    place = {"latitude": -11.25, "longitude": -154.5, "depth_m": 4870.0}
    assert {key: value for key, (value, _) in found.items()} == place


def test_meanings_give_way_to_values() -> None:
    # "T" is a temperature here, and "min" a minimum
    rows = [f"2016-01-01T{h:02d}:00:00,{3 + h / 7:.3f},{-70.5 - h}" for h in range(20)]
    layout = guess_layout(["time,T,min", *rows])
    assert layout is not None
    assert layout.meanings == ("time", "", "")
    assert guess_time(layout).names == ("time", "T", "min")


# grouping


@pytest.mark.parametrize(
    ("stems", "names"),
    [
        (["K7_2014", "K7_2015", "K9_2014"], ["K7", "K7", "K9"]),
        (["bpr-north-d1", "bpr-north-d2", "bpr-south-d1"], ["north", "north", "south"]),
        (["aldessa_1", "eskarn_2", "eskarn_1"], ["aldessa", "eskarn", "eskarn"]),
        (["20140101_20151231_K7", "20160101_20171231_K7"], ["K7", "K7"]),
        (["site1", "site2"], ["site1", "site2"]),
        (["pressure"], ["pressure"]),
    ],
)
def test_site_names(stems: list[str], names: list[str]) -> None:
    assert site_names(stems) == names


def test_positions_that_differ_part_files_of_one_name() -> None:
    from massfit.io.guess.described import Guess

    records = [
        RecordGuess(f"K7_{k}.nc", f"K7_{k}", {}, {"latitude": Guess(lat, "stated"), "longitude": Guess(9.0, "stated")})
        for k, lat in enumerate((10.0, 10.01))
    ]
    assert len(guess_sites(records)) == 1
    far = RecordGuess("K7_3.nc", "K7_3", {}, {"latitude": Guess(-10.0, "stated")})
    sites = guess_sites([*records, far])
    assert [site.place["id"].value for site in sites] == ["K7_0", "K7_1", "K7_3"]
    assert sites[2].place["longitude"].value is None
