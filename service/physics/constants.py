"""Constants, each with its value, unit and source."""

from typing import Final

# Oxygen in dry air, by volume. [1]  The standard composition (ISO 2533) is 0.20946; 0.2095 is
# what oxygen meters are set to. Manuals that print 0.21 allow 3.2 % more gas before 19.5 %.
OXYGEN_IN_AIR: Final = 0.2095

# [Pa]  ISO 2533; exact by convention.
STANDARD_PRESSURE: Final = 101_325.0

# Molar gas constant. [J/(mol K)]  CODATA; exact since the SI of 2019.
GAS_CONSTANT: Final = 8.314_462_618

# Standard acceleration of free fall. [m/s2]  ISO 2533; exact by convention.
GRAVITY: Final = 9.806_65

# Density of mercury at 0 degrees Celsius. [kg/m3]  From memory; it defines the conventional column.
MERCURY_DENSITY: Final = 13_595.1

# [Pa]  A conventional column of mercury one millimetre high; 133.322387.
MILLIMETRE_OF_MERCURY: Final = MERCURY_DENSITY * GRAVITY / 1000.0

# [K]  0 degrees Celsius; exact by definition.
ZERO_CELSIUS: Final = 273.15

# Temperature of a room where none is recorded. [K]  20 degrees Celsius; common practice, no source.
ROOM_TEMPERATURE: Final = ZERO_CELSIUS + 20.0

# The standard atmosphere, troposphere: ISO 2533 and U.S. Standard Atmosphere 1976.
ATMOSPHERE_TEMPERATURE: Final = 288.15  # at sea level [K]
ATMOSPHERE_LAPSE: Final = 0.0065  # fall of temperature with height [K/m]
ATMOSPHERE_MOLAR_MASS: Final = 0.028_964_4  # [kg/mol]
# The atmosphere keeps the gas constant it was computed with, 8.31432e3 N m/(kmol K). [J/(mol K)]
ATMOSPHERE_GAS_CONSTANT: Final = 8.314_32
ATMOSPHERE_LOWEST: Final = -5000.0  # geopotential height [m]
ATMOSPHERE_HIGHEST: Final = 11_000.0  # geopotential height [m]
# 5.25588 in ISO 2533. [1]
ATMOSPHERE_EXPONENT: Final = (
    GRAVITY * ATMOSPHERE_MOLAR_MASS / (ATMOSPHERE_GAS_CONSTANT * ATMOSPHERE_LAPSE)
)

SECONDS_PER_HOUR: Final = 3600.0
SECONDS_PER_DAY: Final = 86_400.0

#: Radiation of a black body. [W/(m2 K4)]  SI (BIPM, 2019), CODATA 2018.
STEFAN_BOLTZMANN: Final = 5.670_374_419e-8
