"""Physical constants used by more than one kernel, each with unit and source.

A number that only one module needs stands in that module.
"""

from __future__ import annotations

__all__ = [
    "GAS_CONSTANT_DRY_AIR",
    "GAS_CONSTANT_WATER_VAPOUR",
    "STANDARD_AIR_DENSITY",
    "STANDARD_GRAVITY",
    "STANDARD_PRESSURE",
    "STANDARD_TEMPERATURE",
    "VON_KARMAN_CONSTANT",
    "ZERO_CELSIUS",
]

#: Specific gas constant of dry air [J/(kg K)], IEC 61400-12-1, air density clause.
GAS_CONSTANT_DRY_AIR = 287.05
#: Specific gas constant of water vapour [J/(kg K)], IEC 61400-12-1, air density clause.
GAS_CONSTANT_WATER_VAPOUR = 461.5
#: Air density at sea level in the standard atmosphere [kg/m3], ISO 2533:1975.
STANDARD_AIR_DENSITY = 1.225
#: Standard acceleration of gravity [m/s2], ISO 2533:1975.
STANDARD_GRAVITY = 9.80665
#: Air pressure at sea level in the standard atmosphere [Pa], ISO 2533:1975.
STANDARD_PRESSURE = 101_325.0
#: Air temperature at sea level in the standard atmosphere [K], ISO 2533:1975.
STANDARD_TEMPERATURE = 288.15
#: Von Karman constant [1]; 0.40 as in IEC 61400-12-1 and most wind-engineering texts.
VON_KARMAN_CONSTANT = 0.40
#: 0 degrees Celsius [K], by definition of the scale.
ZERO_CELSIUS = 273.15
