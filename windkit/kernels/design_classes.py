"""Design classes of the turbine standards, and the lines a site's wind is held against.

Classes and wind models of IEC 61400-1 (large machines) and IEC 61400-2 (small ones): reference
speeds, normal and extreme turbulence, extreme wind and gust. What a site measures is in
`turbulence` and `extremes`. The paid text of a standard decides; whether a machine may stand
somewhere is for its maker and a licensed engineer to say.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import floats, refuse_negative, refuse_not_positive

__all__ = [
    "GUST_RATIO",
    "MEAN_SPEED_RATIO",
    "ONE_YEAR_RATIO",
    "REFERENCE_SPEED",
    "REFERENCE_TURBULENCE",
    "SMALL_MEAN_SPEED",
    "SMALL_REFERENCE_SPEED",
    "SMALL_SWEPT_AREA",
    "extreme_operating_gust",
    "extreme_turbulence",
    "extreme_wind_speed",
    "mildest_class",
    "normal_turbulence",
    "small_turbine_turbulence",
    "turbulence_weibull",
]

#: Reference speed Vref [m/s], highest 10 min mean in 50 years at hub height, by class: IEC
#: 61400-1, editions 2 to 4; "T" is the tropical one of edition 4.
REFERENCE_SPEED: Mapping[str, float] = MappingProxyType(
    {"I": 50.0, "II": 42.5, "III": 37.5, "T": 57.0}
)
#: Reference turbulence intensity Iref [1], mean at 15 m/s: IEC 61400-1:2019 (A, B, C as 2005).
REFERENCE_TURBULENCE: Mapping[str, float] = MappingProxyType(
    {"A+": 0.18, "A": 0.16, "B": 0.14, "C": 0.12}
)
#: Yearly mean over reference speed [1]: IEC 61400-1.
MEAN_SPEED_RATIO = 0.2
#: 3 s gust over 10 min mean in the extreme wind model [1]: IEC 61400-1.
GUST_RATIO = 1.4
#: One-year over 50-year extreme [1]: IEC 61400-1:2005 and 2019.
ONE_YEAR_RATIO = 0.8

#: Reference speed [m/s] of small-turbine classes: IEC 61400-2:2013, table 1.
SMALL_REFERENCE_SPEED: Mapping[str, float] = MappingProxyType(
    {"I": 50.0, "II": 42.5, "III": 37.5, "IV": 30.0}
)
#: Yearly mean speed [m/s] of small-turbine classes: IEC 61400-2:2013, table 1.
SMALL_MEAN_SPEED: Mapping[str, float] = MappingProxyType(
    {"I": 10.0, "II": 8.5, "III": 7.5, "IV": 6.0}
)
#: Largest swept area of a small turbine [m2]: IEC 61400-2, scope.
SMALL_SWEPT_AREA = 200.0

#: Exponent of the extreme wind profile [1]: IEC 61400-1, extreme wind speed model.
_EXTREME_SHEAR = 0.11
#: Shape constant of the extreme turbulence model [m/s]: IEC 61400-1.
_EXTREME_TURBULENCE_C = 2.0
#: Turbulence intensity at 15 m/s [1] and slope [1] of small turbines: IEC 61400-2.
_SMALL_TURBULENCE, _SMALL_SLOPE = 0.18, 2.0


def normal_turbulence(
    wind_speed: ArrayLike, reference_turbulence: ArrayLike
) -> NDArray[np.float64]:
    """Standard deviation of the normal turbulence model, the 90 % value.

    Parameters
    ----------
    wind_speed : array_like
        10 min mean at hub height [m/s].
    reference_turbulence : array_like
        Iref [1], one of `REFERENCE_TURBULENCE`.

    Returns
    -------
    float or ndarray
        Representative standard deviation sigma1 [m/s]; over `wind_speed` it is an intensity.

    Raises
    ------
    ValueError
        If a speed is negative or an intensity not positive.

    References
    ----------
    .. [1] IEC 61400-1:2005, normal turbulence model.
    """
    V = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    Iref = refuse_not_positive("reference_turbulence", reference_turbulence, "1", "see the class")
    return Iref * (0.75 * V + 5.6)


def turbulence_weibull(
    wind_speed: ArrayLike, reference_turbulence: ArrayLike
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Weibull distribution of the standard deviation in one speed bin, as edition 4 has it.

    Parameters
    ----------
    wind_speed, reference_turbulence : array_like
        As for `normal_turbulence`.

    Returns
    -------
    weibull_scale, weibull_shape : float or ndarray
        [m/s] and [1]. Its 90 % value is 0.3 to 2.1 % above the normal turbulence line.

    Raises
    ------
    ValueError
        As `normal_turbulence`.

    References
    ----------
    .. [1] IEC 61400-1:2019, normal turbulence model.
    """
    V = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    Iref = refuse_not_positive("reference_turbulence", reference_turbulence, "1", "see the class")
    return Iref * (0.75 * V + 3.3), 0.27 * V + 1.4


def extreme_turbulence(
    wind_speed: ArrayLike, reference_turbulence: ArrayLike, mean_speed: ArrayLike
) -> NDArray[np.float64]:
    """Standard deviation of the extreme turbulence model.

    Parameters
    ----------
    wind_speed : array_like
        10 min mean at hub height [m/s].
    reference_turbulence : array_like
        Iref [1].
    mean_speed : array_like
        Yearly mean at hub height of the class [m/s]; all three broadcast.

    Returns
    -------
    float or ndarray
        Standard deviation sigma1 [m/s].

    Raises
    ------
    ValueError
        If a speed is negative, or a mean or intensity not positive.

    References
    ----------
    .. [1] IEC 61400-1:2005, extreme turbulence model, c = 2 m/s.
    """
    V = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    Iref = refuse_not_positive("reference_turbulence", reference_turbulence, "1", "see the class")
    Vave = refuse_not_positive("mean_speed", mean_speed, "m/s", "see the class")
    c = _EXTREME_TURBULENCE_C
    return c * Iref * (0.072 * (Vave / c + 3.0) * (V / c - 4.0) + 10.0)


def extreme_wind_speed(
    reference_speed: ArrayLike, height: ArrayLike, hub_height: ArrayLike
) -> NDArray[np.float64]:
    """Highest 10 min mean in 50 years at a height, extreme wind model.

    Parameters
    ----------
    reference_speed : array_like
        Vref [m/s] at hub height.
    height, hub_height : array_like
        [m]; all three broadcast.

    Returns
    -------
    float or ndarray
        V50 [m/s]. The 3 s gust is `GUST_RATIO` times, the one-year value `ONE_YEAR_RATIO` times.

    Raises
    ------
    ValueError
        If a speed or height is not positive.

    References
    ----------
    .. [1] IEC 61400-1:2005, steady extreme wind model.
    """
    Vref = refuse_not_positive("reference_speed", reference_speed, "m/s", "see the class")
    z = refuse_not_positive("height", height, "m", "heights are above ground")
    z_hub = refuse_not_positive("hub_height", hub_height, "m", "heights are above ground")
    return Vref * (z / z_hub) ** _EXTREME_SHEAR


def extreme_operating_gust(
    wind_speed: ArrayLike,
    reference_speed: ArrayLike,
    reference_turbulence: ArrayLike,
    rotor_diameter: ArrayLike,
    hub_height: ArrayLike,
) -> NDArray[np.float64]:
    """Rise of the wind in the extreme operating gust.

    Parameters
    ----------
    wind_speed : array_like
        10 min mean at hub height [m/s].
    reference_speed, reference_turbulence : array_like
        Vref [m/s] and Iref [1].
    rotor_diameter, hub_height : array_like
        [m]; all broadcast.

    Returns
    -------
    float or ndarray
        Gust above the mean [m/s].

    Raises
    ------
    ValueError
        If a speed is negative, or another value not positive.

    References
    ----------
    .. [1] IEC 61400-1:2005, extreme operating gust and turbulence length scale.
    """
    V = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    D = refuse_not_positive("rotor_diameter", rotor_diameter, "m", "a rotor needs a diameter")
    z_hub = refuse_not_positive("hub_height", hub_height, "m", "heights are above ground")
    Vref = refuse_not_positive("reference_speed", reference_speed, "m/s", "see the class")
    sigma1 = normal_turbulence(V, reference_turbulence)
    Ve1 = ONE_YEAR_RATIO * GUST_RATIO * Vref
    length_scale = np.where(z_hub <= 60.0, 0.7 * z_hub, 42.0)
    return np.minimum(1.35 * (Ve1 - V), 3.3 * sigma1 / (1.0 + 0.1 * D / length_scale))


def small_turbine_turbulence(wind_speed: ArrayLike) -> NDArray[np.float64]:
    """Standard deviation of the normal turbulence model for small turbines.

    Parameters
    ----------
    wind_speed : array_like
        10 min mean at hub height [m/s].

    Returns
    -------
    float or ndarray
        Standard deviation sigma1 [m/s].

    Raises
    ------
    ValueError
        If a speed is negative.

    References
    ----------
    .. [1] IEC 61400-2:2013, normal turbulence model: I15 = 0.18, a = 2.
    """
    V = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    a = _SMALL_SLOPE
    return _SMALL_TURBULENCE * (15.0 + a * V) / (a + 1.0)


def mildest_class(wind_speed: ArrayLike, representative_turbulence: ArrayLike) -> str | None:
    """Mildest turbulence class whose normal turbulence line is nowhere below the site's.

    Parameters
    ----------
    wind_speed : array_like
        Bin centres [m/s] to compare at, usually 0.6 times rated speed up to cut-out.
    representative_turbulence : array_like
        Representative (90 %) turbulence intensity of the site in each bin [1]; NaN is skipped.

    Returns
    -------
    str or None
        Key of `REFERENCE_TURBULENCE`; None if the site is above the highest class. A class is
        no permit: effective turbulence with wakes, shear and inclined flow count too.

    Raises
    ------
    ValueError
        If a speed is not positive, an intensity negative, shapes differ, or all are missing.
    """
    V = refuse_not_positive("wind_speed", wind_speed, "m/s", "turbulence needs wind")
    site = refuse_negative("representative_turbulence", representative_turbulence, "1", "as is")
    if V.shape != site.shape or np.isnan(floats(site)).all():
        raise ValueError(
            f"representative_turbulence must be known for some of the wind_speed bins, got shapes "
            f"{site.shape} and {V.shape}; thin bins need more data"
        )
    for name, Iref in sorted(REFERENCE_TURBULENCE.items(), key=lambda item: item[1]):
        if np.nanmax(site - normal_turbulence(V, Iref) / V) <= 0.0:
            return name
    return None
