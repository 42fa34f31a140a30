"""Physical constants and unit factors, each with its source.

Inside the code everything is SI and radians; the factors below are used only
at the edges, where a unit stands in the name.
"""

EARTH_RADIUS = 6_371_000.0
"""Mean radius of the Earth, m (Dziewonski & Anderson 1981)."""

STANDARD_GRAVITY = 9.80665
"""Standard gravity, m s-2 (CGPM 1901, exact)."""

GRAVITATIONAL_CONSTANT = 6.67430e-11
"""Newtonian constant of gravitation, m3 kg-1 s-2 (CODATA 2018)."""

EARTH_MASS = 3.986004418e14 / GRAVITATIONAL_CONSTANT
"""Mass of the Earth, kg, from the geocentric gravitational constant (IERS Conventions 2010, table 1.1)."""

EARTH_ROTATION_RATE = 7.292115e-5
"""Nominal rotation rate of the Earth, rad s-1 (IERS Conventions 2010, table 1.1)."""

EARTH_DENSITY = 5514.0
"""Mean density of the Earth, kg m-3, the value of the sea-level kernel."""

SEA_WATER_DENSITY = 1025.0
"""Default density of sea water, kg m-3."""

FRESH_WATER_DENSITY = 1000.0
"""Density of fresh water used for water-equivalent heights, kg m-3."""

TROPICAL_YEAR_DAYS = 365.2422
"""Period of the annual cycle, days."""

ANNUAL_RATE = 2.0 * 3.141592653589793 / TROPICAL_YEAR_DAYS
"""Angular rate of the annual cycle, rad per day."""

JULIAN_YEAR_DAYS = 365.25
"""Length of the year in rates such as hPa per year, days."""

PASCAL_PER_HPA = 100.0
"""Pascals in one hectopascal."""

KG_PER_GT = 1.0e12
"""Kilograms in one gigatonne."""
