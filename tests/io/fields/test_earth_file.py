"""Earth profiles from CSV: what is read, what is refused, and that both forms agree."""

from collections.abc import Callable
from importlib.resources import files
from pathlib import Path

import numpy as np
import pytest

from massfit.earth.love import love_numbers
from massfit.earth.profile import EarthProfile, Layer, prem
from massfit.errors import InputError
from massfit.io.fields.earth_file import read_earth_profile, write_earth_profile
from massfit.io.network.network_file import read_network
from massfit.io.network.write_network import write_network

TABLE = """\
# name: Invented Earth
# reference: made up
radius_km,density_g_cm3,vp_km_s,vs_km_s,q
0,13.0,11.2,3.6,85
600,12.95,11.1,3.6,85
1200,12.8,11.0,3.5,85
1200,12.2,10.3,0,57822
1700,12.0,10.1,0,57822
2300,11.4,9.5,0,57822
2900,10.75,8.9,0,57822
3480,9.9,8.0,0,57822
3480,5.57,13.7,7.27,312
4000,5.3,13.2,7.1,312
4500,5.07,12.6,6.8,312
5000,4.81,12.0,6.6,312
5600,4.44,11.1,6.24,312
5701,4.38,10.75,5.95,312
5701,3.99,10.3,5.6,143
6000,3.54,9.0,4.8,143
6340,3.38,8.1,4.5,600
6340,2.75,6.3,3.6,600
6371,2.7,6.2,3.5,600
"""


def written(path: Path, text: str) -> Path:
    path.write_text(text, encoding="utf-8")
    return path


def test_table(tmp_path: Path) -> None:
    profile = read_earth_profile(written(tmp_path / "earth.csv", TABLE), source="earth.csv")
    assert (profile.name, profile.reference, len(profile.layers)) == ("Invented Earth", "made up", 14)
    assert float(profile.density(1450e3)) == pytest.approx(12100.0)
    # between its rows vp is linear, so that the modulus is not
    longitudinal = float(profile.lame_first(1450e3))
    assert longitudinal == pytest.approx(12100.0 * 10200.0**2)


def test_order_units_and_columns_do_not_matter(tmp_path: Path) -> None:
    profile = read_earth_profile(written(tmp_path / "a.csv", TABLE), source="a.csv")
    head, *rows = TABLE.splitlines()[2:]
    cells = [[float(cell) for cell in row.split(",")] for row in reversed(rows)]
    text = "vs_m_s,vp_m_s,radius_m,density_kg_m3\n" + "\n".join(
        f"{1e3 * vs!r},{1e3 * vp!r},{1e3 * r!r},{1e3 * rho!r}" for r, rho, vp, vs, _ in cells
    )
    other = read_earth_profile(written(tmp_path / "b.csv", text), source="b.csv")
    assert head.startswith("radius_km")
    assert other.name == "b"
    for one, two in zip(profile.layers, other.layers, strict=True):
        assert (one.bottom, one.top) == (two.bottom, two.top)
        np.testing.assert_allclose(one.density, two.density, rtol=1e-12)
        np.testing.assert_allclose(one.shear_speed, two.shear_speed, rtol=1e-12, atol=1e-9)


def test_the_shipped_polynomials_are_read_and_refused_for_their_ocean(tmp_path: Path) -> None:
    text = files("massfit.tables").joinpath("prem_polynomials.csv").read_text(encoding="utf-8")
    with pytest.raises(InputError, match=r"p\.csv: surface: the surface is fluid.*let the layer beneath reach"):
        read_earth_profile(written(tmp_path / "p.csv", text), source="p.csv")
    solid = "\n".join(text.splitlines()[:-1]).replace("6356,6368,", "6356,6371,")
    profile = read_earth_profile(written(tmp_path / "solid.csv", solid), source="solid.csv")
    np.testing.assert_array_equal(love_numbers(profile, max_degree=5).h, love_numbers(max_degree=5).h)


def test_a_written_profile_is_read_back(tmp_path: Path) -> None:
    write_earth_profile(tmp_path / "p.csv", prem())
    again = read_earth_profile(tmp_path / "p.csv", source="p.csv")
    assert (again.name, again.reference) == (prem().name, prem().reference)
    np.testing.assert_allclose(love_numbers(again, max_degree=9).h, love_numbers(max_degree=9).h, rtol=1e-12)


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("radius_km", "radius_m", "e.csv: radius_m: the values run from 0 to 6371. Must lie within 0 and 6.5e+06, "
         "the largest above 6e+06. The values look like radius_km."),
        ("density_g_cm3", "density_kg_m3", "e.csv: density_kg_m3: the values run from 2.7 to 13. Must lie within "
         "500 and 20000, the largest above 9000. The values look like density_g_cm3."),
        ("vp_km_s", "vp_m_s", "The values look like vp_km_s."),
        ("vs_km_s", "vs_m_s", "The values look like vs_km_s."),
        ("3480,9.9,8.0,0,57822\n3480,5.57,", "3480,5.57,", "e.csv:11: shear speed: the shear speed begins or ends "
         "between 2900 and 3480 km. At a boundary only. Give the radius of the boundary twice, with the values on "
         "either side."),
        ("1700,", "1100,", "e.csv:8: radius: radius 1100 km follows 1200 km. Must rise (or fall) from row to "
         "row. Sort."),
        ("4000,5.3,13.2,7.1,312\n", "", "e.csv:13: radius: no row between 3480 and 4500 km. "
         "Rows at most 600 km apart. Fill the gap."),
        ("0,13.0,11.2,3.6,85\n", "", "e.csv:4: radius: the lowest radius is 600 km. Must be 0, the centre. "
         "Add the rows beneath."),
        ("2300,11.4,", "2300,,", "e.csv:9: the row holds '2300,,9.5,0,57822'. Must be numbers. Correct it."),
        ("2300,11.4,", "2300,nan,", "e.csv:9: a value is missing, infinite or too large. Must be numbers up to 1e+09. "
         "Fill the gap."),
        ("2300,11.4,", "2300,1e308,", "e.csv:9: a value is missing, infinite or too large."),
        ("2300,11.4,", "2300,", "e.csv:9: the row has 4 values. Must be 5 as the header. Correct it."),
        ("6371,2.7,6.2,3.5", "6371,2.7,6.2,-3.5", "e.csv: vs_km_s: the values run from -3.5 to 7.27."),
        ("6371,2.7,6.2,3.5", "6371,2.7,4.0,3.5", "e.csv: bulk modulus: from 6340 to 6371 km the bulk modulus falls to"),
        ("vs_km_s", "shear", "e.csv:3: the header is 'radius_km,density_g_cm3,vp_km_s,shear,q'. Must be radius_km,"),
        (",0,57822", ",1,57822", "e.csv: fluid core: rock between 1500 and 3300 km carries shear. "
         "The outer core must be fluid. Set its shear speed to zero."),
        ("13.0,11.2", "19.0,11.2", None),
        ("5.57,13.7", "8.57,13.7", "e.csv: density: the mass is 6."),
    ],
)  # fmt: skip
def test_each_fault_has_its_message(tmp_path: Path, old: str, new: str, message: str | None) -> None:
    path = written(tmp_path / "e.csv", TABLE.replace(old, new))
    assert path.read_text() != TABLE
    if message is None:  # what the inner core weighs is no fault: its mass is small
        read_earth_profile(path, source="e.csv")
        return
    with pytest.raises(InputError) as caught:
        read_earth_profile(path, source="e.csv")
    assert message in str(caught.value)
    assert "\n" not in str(caught.value)


def test_what_is_no_csv_is_refused(tmp_path: Path) -> None:
    (tmp_path / "b.csv").write_bytes(b"\xff\xfe\x00" * 9)
    with pytest.raises(InputError, match="not UTF-8 text"):
        read_earth_profile(tmp_path / "b.csv", source="b.csv")
    with pytest.raises(InputError, match="the header is ''"):
        read_earth_profile(written(tmp_path / "n.csv", ""), source="n.csv")
    with pytest.raises(InputError, match="there is no row"):
        read_earth_profile(written(tmp_path / "h.csv", TABLE.split("0,13.0")[0]), source="h.csv")
    with pytest.raises(InputError, match=r"4194304 bytes"):
        read_earth_profile(written(tmp_path / "big.csv", "#" * 2**22), source="big.csv")


def test_the_network_file_names_it(network_folder: Path, change: Callable[[str, str], None], tmp_path: Path) -> None:
    written(network_folder / "fields" / "earth.csv", TABLE)
    change("[fingerprint]", '[fingerprint]\nearth_model = "fields/earth.csv"')
    network = read_network(network_folder)
    assert network.earth is not None
    assert network.earth.name == "Invented Earth"
    assert "fields/earth.csv" in network.inputs
    write_network(network, tmp_path / "again")
    again = read_network(tmp_path / "again")
    assert isinstance(again.earth, EarthProfile)
    assert isinstance(again.earth.layers[0], Layer)
    assert again.earth.name == network.earth.name
