"""Air: the standard atmosphere, density of dry and moist air, and pressure at another height.

These turn temperature, pressure and humidity into the density that power is proportional to.
Wind is not here, nor is the choice of which sensor or data set to believe.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import floats, kelvin, refuse, refuse_not_positive
from windkit.kernels.constants import (
    GAS_CONSTANT_DRY_AIR,
    GAS_CONSTANT_WATER_VAPOUR,
    STANDARD_AIR_DENSITY,
    STANDARD_GRAVITY,
    STANDARD_PRESSURE,
    STANDARD_TEMPERATURE,
    ZERO_CELSIUS,
)

__all__ = [
    "STANDARD_LAPSE_RATE",
    "density_speed_factor",
    "dry_air_density",
    "moist_air_density",
    "pressure_at_height",
    "relative_humidity_from_dew_point",
    "standard_atmosphere",
    "temperature_at_height",
    "water_vapour_pressure",
]

#: Fall of temperature with height in the standard troposphere [K/m], ISO 2533:1975.
STANDARD_LAPSE_RATE = 0.0065

#: Specific gas constant of air in the standard atmosphere [J/(kg K)], ISO 2533:1975. The density
#: clause of IEC 61400-12-1 rounds it to 287.05, which is the one used for measured air.
_GAS_CONSTANT_STANDARD_ATMOSPHERE = 287.05287
#: Earth radius that turns geometric into geopotential height [m], ISO 2533:1975.
_EARTH_RADIUS = 6_356_766.0
#: Geopotential heights between which the lapse rate holds [m]: ISO 2533:1975 starts at -2000 m.
_LOWEST_ELEVATION, _HIGHEST_ELEVATION = -2000.0, 11_000.0

#: Fit of the saturation pressure of water vapour [Pa], [1/K]: IEC 61400-12-1, density clause.
_VAPOUR_PRESSURE_AT_ZERO, _VAPOUR_PRESSURE_GROWTH = 0.000_020_5, 0.063_184_6
#: Magnus formula over water, [1] and [degC]: WMO-No. 8, annex 4.B.
_MAGNUS_FACTOR, _MAGNUS_TEMPERATURE = 17.62, 243.12

#: Pressure at about 11 800 m: below it a unit is wrong [Pa].
_LOWEST_PLAUSIBLE_PRESSURE = 20_000.0
#: A humidity sensor in cloud may read a little above one; percent reads far above.
_HIGHEST_PLAUSIBLE_HUMIDITY = 1.2


def standard_atmosphere(
    elevation: ArrayLike, *, geopotential: bool = False
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Temperature, pressure and density of the standard troposphere.

    Parameters
    ----------
    elevation : array_like
        Height above sea level [m], any shape: geometric, or geopotential if so said.
    geopotential : bool
        True if `elevation` is geopotential; at 3000 m the two differ by 1.4 m.

    Returns
    -------
    temperature, pressure, air_density : float or ndarray
        [K], [Pa], [kg/m3], each in the shape of `elevation`.

    Raises
    ------
    ValueError
        If an elevation is outside -2000 to 11 000 m.

    References
    ----------
    .. [1] ISO 2533:1975, Standard Atmosphere; equal to the US Standard Atmosphere 1976 here.
    """
    elevation = floats(elevation)
    refuse(
        (elevation < _LOWEST_ELEVATION) | (elevation > _HIGHEST_ELEVATION),
        elevation,
        f"elevation must be between {_LOWEST_ELEVATION:g} and {_HIGHEST_ELEVATION:g} m",
        "the lapse rate of the standard troposphere holds there only",
    )
    H = elevation if geopotential else _EARTH_RADIUS * elevation / (_EARTH_RADIUS + elevation)
    temperature = STANDARD_TEMPERATURE - STANDARD_LAPSE_RATE * H
    exponent = STANDARD_GRAVITY / (_GAS_CONSTANT_STANDARD_ATMOSPHERE * STANDARD_LAPSE_RATE)
    pressure = STANDARD_PRESSURE * (temperature / STANDARD_TEMPERATURE) ** exponent
    return temperature, pressure, pressure / (_GAS_CONSTANT_STANDARD_ATMOSPHERE * temperature)


def temperature_at_height(
    temperature: ArrayLike,
    height_difference: ArrayLike,
    *,
    lapse_rate: float = STANDARD_LAPSE_RATE,
) -> NDArray[np.float64]:
    """Air temperature at another height from an assumed lapse rate.

    Parameters
    ----------
    temperature : array_like
        Air temperature where it is measured [K].
    height_difference : array_like
        Height of the result less height of the measurement [m], upward positive.
    lapse_rate : float
        Fall of temperature with height [K/m]. Real nights may have the opposite sign.

    Returns
    -------
    float or ndarray
        Temperature [K] in the broadcast shape.

    Raises
    ------
    ValueError
        If a temperature is below 173.15 K.

    References
    ----------
    .. [1] ISO 2533:1975, Standard Atmosphere: the lapse rate.
    """
    return kelvin("temperature", temperature) - lapse_rate * floats(height_difference)


def pressure_at_height(
    pressure: ArrayLike,
    temperature: ArrayLike,
    height_difference: ArrayLike,
) -> NDArray[np.float64]:
    """Air pressure at another height, hydrostatic, with the standard lapse rate in between.

    Parameters
    ----------
    pressure, temperature : array_like
        Air pressure [Pa] and temperature [K] at one and the same height.
    height_difference : array_like
        Height of the result less height of the measurement [m], upward positive.

    Returns
    -------
    float or ndarray
        Pressure [Pa] in the broadcast shape; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a pressure or temperature looks like another unit, or the column would end in space.

    Notes
    -----
    A lapse rate of zero instead of the standard one changes the pressure 100 m higher by 2e-5.

    References
    ----------
    .. [1] ISO 2533:1975, Standard Atmosphere: hydrostatic equation with linear temperature.
    """
    p, T = _checked_pressure(pressure), kelvin("temperature", temperature)
    height_difference = floats(height_difference)
    ratio = 1.0 - STANDARD_LAPSE_RATE * height_difference / T
    refuse(
        ratio <= 0.0,
        ratio,
        "height_difference [m] must leave air above absolute zero, its temperature ratio",
        "height_difference is the height of the result less that of the measurement",
    )
    return p * ratio ** (STANDARD_GRAVITY / (GAS_CONSTANT_DRY_AIR * STANDARD_LAPSE_RATE))


def water_vapour_pressure(temperature: ArrayLike) -> NDArray[np.float64]:
    """Saturation pressure of water vapour by the fit of the power-curve standard.

    Parameters
    ----------
    temperature : array_like
        Air temperature [K].

    Returns
    -------
    float or ndarray
        Saturation pressure [Pa]; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a temperature is below 173.15 K.

    Notes
    -----
    The fit is 3 % low at 288 to 293 K; the density of moist air moves by less than 2e-4.

    References
    ----------
    .. [1] IEC 61400-12-1, air density clause.
    """
    T = kelvin("temperature", temperature)
    return _VAPOUR_PRESSURE_AT_ZERO * np.exp(_VAPOUR_PRESSURE_GROWTH * T)


def relative_humidity_from_dew_point(
    temperature: ArrayLike, dew_point_temperature: ArrayLike
) -> NDArray[np.float64]:
    """Relative humidity over water from temperature and dew point.

    Parameters
    ----------
    temperature, dew_point_temperature : array_like
        Air temperature and dew point [K], shapes that broadcast.

    Returns
    -------
    float or ndarray
        Relative humidity [1]; values a little above one are kept. NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a temperature is below 173.15 K, or the humidity would be above 1.2.

    Notes
    -----
    Magnus formula, stated for 228 to 333 K. The ratio of two pressures of the IEC fit would be
    1 to 2 % off when the dew point is 10 K below the temperature.

    References
    ----------
    .. [1] WMO-No. 8, Guide to Instruments and Methods of Observation, annex 4.B.
    """
    T = kelvin("temperature", temperature)
    Td = kelvin("dew_point_temperature", dew_point_temperature)
    humidity = np.asarray(np.exp(_magnus_exponent(Td) - _magnus_exponent(T)))
    refuse(
        humidity > _HIGHEST_PLAUSIBLE_HUMIDITY,
        humidity,
        "dew_point_temperature must not be far above temperature, their relative humidity",
        "check the order of the two arguments and the units of both",
    )
    return humidity[()]


def dry_air_density(temperature: ArrayLike, pressure: ArrayLike) -> NDArray[np.float64]:
    """Density of dry air from the ideal gas law.

    Parameters
    ----------
    temperature : array_like
        Air temperature [K], any shape that broadcasts with `pressure`.
    pressure : array_like
        Air pressure at the same height [Pa].

    Returns
    -------
    float or ndarray
        Air density [kg/m3] in the broadcast shape; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a temperature is below 173.15 K or a pressure below 20 000 Pa.

    Notes
    -----
    Humidity is left out: saturated air at 298.15 K and 101 325 Pa is 1.2 % lighter.

    References
    ----------
    .. [1] IEC 61400-12-1, air density clause, dry air.
    """
    T, B = kelvin("temperature", temperature), _checked_pressure(pressure)
    return B / (GAS_CONSTANT_DRY_AIR * T)


def moist_air_density(
    temperature: ArrayLike, pressure: ArrayLike, relative_humidity: ArrayLike
) -> NDArray[np.float64]:
    """Density of moist air by the equation of the power-curve standard.

    Parameters
    ----------
    temperature, pressure : array_like
        Air temperature [K] and pressure [Pa] at the same height, shapes that broadcast.
    relative_humidity : array_like
        Relative humidity [1], 0 to 1; a sensor in cloud may read up to 1.2.

    Returns
    -------
    float or ndarray
        Air density [kg/m3] in the broadcast shape; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a value looks like another unit: temperature below 173.15 K, pressure below
        20 000 Pa, relative humidity outside 0 to 1.2.

    References
    ----------
    .. [1] IEC 61400-12-1, air density clause: equation with R0, Rw and the vapour pressure fit.
    """
    T, B = kelvin("temperature", temperature), _checked_pressure(pressure)
    phi = floats(relative_humidity)
    refuse(
        phi > _HIGHEST_PLAUSIBLE_HUMIDITY,
        phi,
        f"relative_humidity must be a fraction, at most {_HIGHEST_PLAUSIBLE_HUMIDITY:g}",
        "looks like percent: divide by 100",
    )
    refuse(phi < 0.0, phi, "relative_humidity must not be negative [1]", "mask such readings")
    R0, Rw = GAS_CONSTANT_DRY_AIR, GAS_CONSTANT_WATER_VAPOUR
    return (B / R0 - phi * water_vapour_pressure(T) * (1.0 / R0 - 1.0 / Rw)) / T


def density_speed_factor(
    air_density: ArrayLike, *, reference_air_density: float = STANDARD_AIR_DENSITY
) -> NDArray[np.float64]:
    """Factor that brings wind speed at one density to equal power at a reference density.

    Parameters
    ----------
    air_density : array_like
        Air density at hub height [kg/m3].
    reference_air_density : float
        Density that a power curve is stated for [kg/m3].

    Returns
    -------
    float or ndarray
        Factor on the wind speed [1]; for pitch-regulated machines.

    Raises
    ------
    ValueError
        If a density is not positive.

    References
    ----------
    .. [1] IEC 61400-12-1, data normalisation, turbines with active power control.
    """
    rho = refuse_not_positive("air_density", air_density, "kg/m3", "mask such values")
    rho0 = refuse_not_positive(
        "reference_air_density", reference_air_density, "kg/m3", "see the curve"
    )
    return (rho / rho0) ** (1.0 / 3.0)


def _magnus_exponent(temperature: NDArray[np.float64]) -> NDArray[np.float64]:
    t = temperature - ZERO_CELSIUS
    return _MAGNUS_FACTOR * t / (_MAGNUS_TEMPERATURE + t)


def _checked_pressure(pressure: ArrayLike) -> NDArray[np.float64]:
    array = floats(pressure)
    refuse(array <= 0.0, array, "pressure must be positive [Pa]", "mask such readings")
    rule = f"pressure must be in pascal, at least {_LOWEST_PLAUSIBLE_PRESSURE:g}"
    # Air near the ground is 50 to 110 kPa and 500 to 1100 hPa: the size tells which it is.
    refuse(array < 200.0, array, rule, "looks like kPa: multiply by 1000")
    refuse(array < _LOWEST_PLAUSIBLE_PRESSURE, array, rule, "looks like hPa: multiply by 100")
    return array
