import pytest

from massfit.errors import InputError
from massfit.io.records.units import PRESSURE_UNITS, pascal_per_unit

# NIST Special Publication 811 (2008), appendix B.8: factors to pascal as printed there
NIST_SP_811 = [("psi", 6.894757e3), ("psia", 6.894757e3), ("mbar", 1.0e2), ("bar", 1.0e5)]
# SI prefixes
SI = [("Pa", 1.0), ("hPa", 1.0e2), ("kPa", 1.0e3), ("dbar", 1.0e4), ("decibar", 1.0e4)]


@pytest.mark.parametrize(("units", "expected"), NIST_SP_811 + SI)
def test_factor_is_the_published_one(units: str, expected: float) -> None:
    # seven printed digits
    assert pascal_per_unit(units) == pytest.approx(expected, rel=5e-7)


def test_conventional_metre_of_water_of_nist() -> None:
    # NIST SP 811: conventional centimetre of water 98.0665 Pa, that is 1000 kg m-3 at standard gravity
    assert pascal_per_unit("cm", density_kg_m3=1000.0) == pytest.approx(98.0665, rel=1e-12)
    assert pascal_per_unit("m", density_kg_m3=1000.0) == pytest.approx(9806.65, rel=1e-12)
    assert pascal_per_unit("mm", density_kg_m3=1000.0) == pytest.approx(9.80665, rel=1e-12)


@pytest.mark.parametrize("units", ["m", "cm", "mm"])
def test_height_of_water_needs_its_density(units: str) -> None:
    with pytest.raises(InputError) as caught:
        pascal_per_unit(units, source="a.txt", name="height")
    (fault,) = caught.value.faults
    assert fault.source == "a.txt"
    assert fault.name == "height"
    assert "density_kg_m3" in fault.action


@pytest.mark.parametrize(
    ("given", "meant"),
    [
        ("db", "dbar"),
        ("DBAR", "dbar"),
        ("hpa", "hPa"),
        ("millibar", "mbar"),
        ("PSI", "psi"),
        ("Pascal", "Pa"),
        ("pascals", "Pa"),
        ("Decibars", "dbar"),
        ("kilopascal", "kPa"),
        ("m  H2O", "m"),
        ("Meters", "m"),
        ("hectopascal", "hPa"),
        ("N/m2", "Pa"),
        ("decibarr", "decibar"),
    ],
)
def test_near_spelling_is_suggested_and_not_guessed(given: str, meant: str) -> None:
    with pytest.raises(InputError) as caught:
        pascal_per_unit(given)
    (fault,) = caught.value.faults
    assert repr(given) in fault.problem
    assert repr(meant) in fault.action
    assert all(unit in fault.allowed for unit in PRESSURE_UNITS)


@pytest.mark.parametrize("given", ["furlong", "degC", "counts", "atm", "1", "kelvin"])
def test_foreign_unit_gets_no_suggestion(given: str) -> None:
    with pytest.raises(InputError, match="Convert the data"):
        pascal_per_unit(given)
