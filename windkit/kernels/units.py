"""Units at the door: what a file or a person uses, turned into SI once, and back for reading.

One table says which units are accepted for which quantity and what they are worth. Quantities
carry CF standard names where CF has one. Nothing here guesses a unit from the size of values,
reads a file, or judges whether a value is plausible; the kernels do the last.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import floats
from windkit.kernels.constants import STANDARD_GRAVITY, ZERO_CELSIUS

__all__ = ["SI_UNITS", "UNITS", "from_si", "to_si"]

#: International foot [m], exact since 1959 (NIST SP 811, appendix B).
_FOOT = 0.3048
#: Statute mile [m]: 5280 ft (NIST SP 811).
_MILE = 5280.0 * _FOOT
#: Nautical mile [m], exact (SI brochure, 9th edition, table of other units).
_NAUTICAL_MILE = 1852.0
_HOUR = 3600.0
#: Avoirdupois pound [kg], exact since 1959 (NIST SP 811).
_POUND = 0.453_592_37
#: Slug [kg]: the mass that one pound-force moves at 1 ft/s2.
_SLUG = _POUND * STANDARD_GRAVITY / _FOOT
#: Conventional millimetre of mercury [Pa]: 13 595.1 kg/m3 under standard gravity (NIST SP 811).
_MILLIMETRE_OF_MERCURY = 13.5951 * STANDARD_GRAVITY
#: Foot pound-force [J].
_FOOT_POUND_FORCE = _FOOT * _POUND * STANDARD_GRAVITY

_SPEED: dict[str, tuple[float, float]] = {
    "m/s": (1.0, 0.0),
    "m s-1": (1.0, 0.0),
    "km/h": (1000.0 / _HOUR, 0.0),
    "km h-1": (1000.0 / _HOUR, 0.0),
    "mph": (_MILE / _HOUR, 0.0),
    "kn": (_NAUTICAL_MILE / _HOUR, 0.0),
    "knot": (_NAUTICAL_MILE / _HOUR, 0.0),
    "ft/s": (_FOOT, 0.0),
}
_TEMPERATURE: dict[str, tuple[float, float]] = {
    "K": (1.0, 0.0),
    "degC": (1.0, ZERO_CELSIUS),
    "Celsius": (1.0, ZERO_CELSIUS),
    "°C": (1.0, ZERO_CELSIUS),
    "degF": (5.0 / 9.0, ZERO_CELSIUS - 32.0 * 5.0 / 9.0),
    "Fahrenheit": (5.0 / 9.0, ZERO_CELSIUS - 32.0 * 5.0 / 9.0),
    "°F": (5.0 / 9.0, ZERO_CELSIUS - 32.0 * 5.0 / 9.0),
}
_PRESSURE: dict[str, tuple[float, float]] = {
    "Pa": (1.0, 0.0),
    "hPa": (100.0, 0.0),
    "mbar": (100.0, 0.0),
    "kPa": (1000.0, 0.0),
    "bar": (100_000.0, 0.0),
    "mmHg": (_MILLIMETRE_OF_MERCURY, 0.0),
    "inHg": (25.4 * _MILLIMETRE_OF_MERCURY, 0.0),
}
_TABLE: dict[str, dict[str, tuple[float, float]]] = {
    "wind_speed": _SPEED,
    "wind_speed_of_gust": _SPEED,
    "eastward_wind": _SPEED,
    "northward_wind": _SPEED,
    "wind_from_direction": {
        "degree": (1.0, 0.0),
        "degrees": (1.0, 0.0),
        "deg": (1.0, 0.0),
        "°": (1.0, 0.0),
        "rad": (180.0 / math.pi, 0.0),
        "radian": (180.0 / math.pi, 0.0),
    },
    "air_temperature": _TEMPERATURE,
    "dew_point_temperature": _TEMPERATURE,
    "air_pressure": _PRESSURE,
    "surface_air_pressure": _PRESSURE,
    "air_pressure_at_mean_sea_level": _PRESSURE,
    "relative_humidity": {"1": (1.0, 0.0), "%": (0.01, 0.0), "percent": (0.01, 0.0)},
    "air_density": {
        "kg/m3": (1.0, 0.0),
        "kg m-3": (1.0, 0.0),
        "g/m3": (0.001, 0.0),
        "lb/ft3": (_POUND / _FOOT**3, 0.0),
        "slug/ft3": (_SLUG / _FOOT**3, 0.0),
    },
    "height": {
        "m": (1.0, 0.0),
        "km": (1000.0, 0.0),
        "ft": (_FOOT, 0.0),
        "in": (_FOOT / 12.0, 0.0),
    },
    "area": {
        "m2": (1.0, 0.0),
        "km2": (1e6, 0.0),
        "ha": (10_000.0, 0.0),
        "ft2": (_FOOT**2, 0.0),
        "acre": (43_560.0 * _FOOT**2, 0.0),
    },
    "power": {
        "W": (1.0, 0.0),
        "kW": (1e3, 0.0),
        "MW": (1e6, 0.0),
        "ft lbf/s": (_FOOT_POUND_FORCE, 0.0),
        "hp": (550.0 * _FOOT_POUND_FORCE, 0.0),
    },
    "energy": {
        "Wh": (1.0, 0.0),
        "kWh": (1e3, 0.0),
        "MWh": (1e6, 0.0),
        "GWh": (1e9, 0.0),
        "J": (1.0 / _HOUR, 0.0),
    },
}

#: ``UNITS[quantity][unit]`` is ``(factor, offset)``: value inside = value * factor + offset.
UNITS: Mapping[str, Mapping[str, tuple[float, float]]] = MappingProxyType(
    {quantity: MappingProxyType(units) for quantity, units in _TABLE.items()}
)
#: The unit each quantity has inside the library (energy: watt hours).
SI_UNITS: Mapping[str, str] = MappingProxyType(
    {quantity: next(iter(units)) for quantity, units in _TABLE.items()}
)


def to_si(values: ArrayLike, unit: str, quantity: str) -> NDArray[np.float64]:
    """Convert values from a file's unit to the unit used inside the library.

    Parameters
    ----------
    values : array_like
        Values in `unit`, any shape. They are not changed in place.
    unit : str
        One of ``UNITS[quantity]``, spelled exactly.
    quantity : str
        CF standard name of the quantity, or ``height``, ``area``, ``power``, ``energy``.

    Returns
    -------
    float or ndarray
        Values in ``SI_UNITS[quantity]``, same shape; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If the quantity or the unit is not in the table; the message lists the accepted ones.

    Notes
    -----
    The offset belongs to readings. A difference or a standard deviation of temperatures must
    be multiplied by the factor alone.

    References
    ----------
    .. [1] NIST Special Publication 811 (2008), appendix B: factors for units.
    """
    factor, offset = _factor_and_offset(unit, quantity)
    return floats(values) * factor + offset


def from_si(values: ArrayLike, unit: str, quantity: str) -> NDArray[np.float64]:
    """Convert values of the library to the unit a reader works in; undoes `to_si`.

    Parameters
    ----------
    values : array_like
        Values in ``SI_UNITS[quantity]``, any shape.
    unit, quantity : str
        As in `to_si`.

    Returns
    -------
    float or ndarray
        Values in `unit`, same shape.

    Raises
    ------
    ValueError
        As in `to_si`.
    """
    factor, offset = _factor_and_offset(unit, quantity)
    return (floats(values) - offset) / factor


def _factor_and_offset(unit: str, quantity: str) -> tuple[float, float]:
    if quantity not in UNITS:
        raise ValueError(
            f"no unit table for the quantity {quantity!r}; write one of: {', '.join(UNITS)}"
        )
    if unit not in UNITS[quantity]:
        accepted = ", ".join(repr(known) for known in UNITS[quantity])
        raise ValueError(f"unit {unit!r} is not accepted for {quantity}; write one of: {accepted}")
    return UNITS[quantity][unit]
