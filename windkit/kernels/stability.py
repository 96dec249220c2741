"""Stability of the surface layer and its profile: Businger-Dyer functions, Richardson numbers.

A cooled ground holds the wind aloft apart from the ground, a heated one mixes it down; the same
roughness then has another profile. z/L is height over Obukhov length: negative when the ground
heats the air, zero in neutral air, positive when it cools it. Neutral profiles are in `profile`.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import floats, kelvin, refuse, refuse_negative, refuse_not_positive
from windkit.kernels.constants import STANDARD_GRAVITY, VON_KARMAN_CONSTANT

__all__ = [
    "CRITICAL_RICHARDSON_NUMBER",
    "bulk_richardson_number",
    "diabatic_friction_velocity",
    "diabatic_log_law",
    "gradient_richardson_number",
    "psi_heat",
    "psi_momentum",
    "stability_from_bulk_richardson",
    "stability_from_gradient_richardson",
]

#: Constants of the profile functions [1]: Dyer 1974, Boundary-Layer Meteorology 7: 363.
_GAMMA, _BETA = 16.0, 5.0
#: Richardson number at which the stable profile functions have no answer left [1]: 1 / beta.
CRITICAL_RICHARDSON_NUMBER = 1.0 / _BETA
#: Dry-adiabatic lapse rate [K/m]: gravity over the specific heat of air at constant pressure,
#: 1004.7 J/(kg K) (any meteorology text).
_ADIABATIC_LAPSE_RATE = STANDARD_GRAVITY / 1004.7
#: More unstable than this, the profile functions are not supported by measurements [1].
_MOST_UNSTABLE = -20.0


def psi_momentum(stability: ArrayLike) -> NDArray[np.float64]:
    """Departure of the wind profile from the logarithm.

    Parameters
    ----------
    stability : array_like
        z/L [1].

    Returns
    -------
    float or ndarray
        psi_m [1]: positive in unstable air, -5 z/L in stable air; NaN in gives NaN out.

    Notes
    -----
    The stable branch was measured up to z/L of about one; above it the line overstates shear.

    References
    ----------
    .. [1] C. A. Paulson 1970, Journal of Applied Meteorology 9: 857, unstable integral.
    .. [2] A. J. Dyer 1974, Boundary-Layer Meteorology 7: 363, gamma = 16 and beta = 5.
    """
    zeta = floats(stability)
    x = (1.0 - _GAMMA * np.minimum(zeta, 0.0)) ** 0.25
    unstable = (
        2.0 * np.log((1.0 + x) / 2.0)
        + np.log((1.0 + x**2) / 2.0)
        - 2.0 * np.arctan(x)
        + np.pi / 2.0
    )
    return np.where(zeta > 0.0, -_BETA * zeta, unstable)[()]


def psi_heat(stability: ArrayLike) -> NDArray[np.float64]:
    """Departure of the temperature profile from the logarithm; as `psi_momentum` otherwise."""
    zeta = floats(stability)
    y = np.sqrt(1.0 - _GAMMA * np.minimum(zeta, 0.0))
    return np.where(zeta > 0.0, -_BETA * zeta, 2.0 * np.log((1.0 + y) / 2.0))[()]


def diabatic_log_law(
    wind_speed: ArrayLike,
    height: ArrayLike,
    target_height: ArrayLike,
    roughness_length: ArrayLike,
    inverse_obukhov_length: ArrayLike,
    *,
    displacement_height: ArrayLike = 0.0,
) -> NDArray[np.float64]:
    """Wind speed at another height by the logarithmic law corrected for stability.

    Parameters
    ----------
    wind_speed : array_like
        Wind speed [m/s] at `height`.
    height, target_height, roughness_length : array_like
        [m]; all broadcast.
    inverse_obukhov_length : array_like
        1/L [1/m], zero in neutral air.
    displacement_height : array_like
        Height [m] the flow is lifted by a closed canopy.

    Returns
    -------
    float or ndarray
        Wind speed [m/s] at the target height; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a speed is negative, a roughness length not positive, or a height not above the
        displacement height plus the roughness length.

    Notes
    -----
    The surface layer is about a tenth of the boundary layer: on stable nights often below hub
    height, where this law then gives too much wind.

    References
    ----------
    .. [1] H. A. Panofsky and J. A. Dutton 1984, Atmospheric Turbulence, ch. 6.
    """
    v = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    shape = (roughness_length, inverse_obukhov_length, displacement_height)
    return v * _profile("target_height", target_height, *shape) / _profile("height", height, *shape)


def diabatic_friction_velocity(
    wind_speed: ArrayLike,
    height: ArrayLike,
    roughness_length: ArrayLike,
    inverse_obukhov_length: ArrayLike,
    *,
    displacement_height: ArrayLike = 0.0,
) -> NDArray[np.float64]:
    """Friction velocity [m/s] from one speed, the roughness and the stability.

    Parameters and errors as `diabatic_log_law`.
    """
    v = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    shape = (roughness_length, inverse_obukhov_length, displacement_height)
    return VON_KARMAN_CONSTANT * v / _profile("height", height, *shape)


def bulk_richardson_number(
    temperature: ArrayLike,
    surface_temperature: ArrayLike,
    wind_speed: ArrayLike,
    height: ArrayLike,
) -> NDArray[np.float64]:
    """Bulk Richardson number of the layer from the surface to one height.

    Parameters
    ----------
    temperature : array_like
        Air temperature [K] at `height`.
    surface_temperature : array_like
        Temperature of the surface [K], of the water or the ground itself.
    wind_speed : array_like
        Wind speed [m/s] at `height`.
    height : array_like
        Height [m]; all four broadcast.

    Returns
    -------
    float or ndarray
        Bulk Richardson number [1]; NaN in a calm.

    Raises
    ------
    ValueError
        If a temperature is not in kelvin, a speed negative, or a height not positive.

    References
    ----------
    .. [1] R. B. Stull 1988, An Introduction to Boundary Layer Meteorology, section 5.6.
    """
    T, Ts = kelvin("temperature", temperature), kelvin("surface_temperature", surface_temperature)
    v = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    z = refuse_not_positive("height", height, "m", "heights are above ground")
    potential_difference = T + _ADIABATIC_LAPSE_RATE * z - Ts
    v = np.where(v > 0.0, v, np.nan)
    return (STANDARD_GRAVITY / Ts * potential_difference * z / v**2)[()]


def gradient_richardson_number(
    temperature_lower: ArrayLike,
    temperature_upper: ArrayLike,
    wind_speed_lower: ArrayLike,
    wind_speed_upper: ArrayLike,
    height_lower: ArrayLike,
    height_upper: ArrayLike,
) -> NDArray[np.float64]:
    """Gradient Richardson number at the geometric mean of two heights.

    Parameters
    ----------
    temperature_lower, temperature_upper : array_like
        Air temperatures [K] at both heights, from sensors good to about 0.1 K in difference.
    wind_speed_lower, wind_speed_upper : array_like
        Wind speeds [m/s] at both heights.
    height_lower, height_upper : array_like
        Heights [m]; all broadcast.

    Returns
    -------
    float or ndarray
        Richardson number [1], valid at sqrt(height_lower height_upper); NaN where both speeds
        are alike.

    Raises
    ------
    ValueError
        If a temperature is not in kelvin, a speed negative, or heights are not in order.

    References
    ----------
    .. [1] S. P. Arya 2001, Introduction to Micrometeorology, ch. 11: gradients in ln z.
    """
    T1 = kelvin("temperature_lower", temperature_lower)
    T2 = kelvin("temperature_upper", temperature_upper)
    v1 = refuse_negative("wind_speed_lower", wind_speed_lower, "m/s", "mask such values")
    v2 = refuse_negative("wind_speed_upper", wind_speed_upper, "m/s", "mask such values")
    z1 = refuse_not_positive("height_lower", height_lower, "m", "heights are above ground")
    z2 = refuse_not_positive("height_upper", height_upper, "m", "heights are above ground")
    difference = np.asarray(z2 - z1)
    refuse(
        difference <= 0.0,
        difference,
        "height_upper must be above height_lower [m], their difference",
        "swap the two, with speeds and temperatures",
    )
    mean_height = np.sqrt(z1 * z2)
    potential_difference = T2 - T1 + _ADIABATIC_LAPSE_RATE * difference
    shear = v2 - v1
    shear = np.where(shear == 0.0, np.nan, shear)
    buoyancy = STANDARD_GRAVITY / (0.5 * (T1 + T2)) * potential_difference
    return (buoyancy * mean_height * np.log(z2 / z1) / shear**2)[()]


def stability_from_gradient_richardson(richardson_number: ArrayLike) -> NDArray[np.float64]:
    """z/L at the height of a gradient Richardson number.

    Parameters
    ----------
    richardson_number : array_like
        Gradient Richardson number [1].

    Returns
    -------
    float or ndarray
        z/L [1]: Ri itself in unstable air, Ri / (1 - 5 Ri) in stable air; NaN at the critical
        number of 0.2 and above, where the profile functions have no answer.

    References
    ----------
    .. [1] A. J. Dyer 1974, Boundary-Layer Meteorology 7: 363.
    """
    Ri = floats(richardson_number)
    answered = Ri < CRITICAL_RICHARDSON_NUMBER
    Ri = np.where(answered, Ri, np.nan)
    return np.where(Ri > 0.0, Ri / (1.0 - _BETA * Ri), Ri)[()]


def stability_from_bulk_richardson(
    richardson_number: ArrayLike, height: ArrayLike, roughness_length: ArrayLike
) -> NDArray[np.float64]:
    """z/L at the height of a bulk Richardson number from the surface, solved exactly.

    Parameters
    ----------
    richardson_number : array_like
        Bulk Richardson number [1] of the layer below `height`.
    height, roughness_length : array_like
        [m]; the roughness for heat is taken as the same; all broadcast.

    Returns
    -------
    float or ndarray
        z/L [1]; NaN at the critical number of 0.2 and above, and where z/L would be below -20.

    Raises
    ------
    ValueError
        If a height is not above the roughness length.

    Notes
    -----
    Solves Ri = z/L (ln(z/z0) - psi_h) / (ln(z/z0) - psi_m)^2, with psi at z0 left out. The
    stable branch is then Ri ln(z/z0) / (1 - 5 Ri).

    References
    ----------
    .. [1] R. B. Stull 1988, An Introduction to Boundary Layer Meteorology, section 9.7.
    """
    Ri = floats(richardson_number)
    z = refuse_not_positive("height", height, "m", "heights are above ground")
    z0 = refuse_not_positive("roughness_length", roughness_length, "m", "water has 0.0002 m")
    ratio = np.asarray(z / z0)
    refuse(ratio <= 1.0, ratio, "height must be above roughness_length, their ratio", "see units")
    Ri, log_ratio = np.broadcast_arrays(Ri, np.log(ratio))
    stable = np.where((Ri >= 0.0) & (Ri < CRITICAL_RICHARDSON_NUMBER), Ri, np.nan)
    stable = stable * log_ratio / (1.0 - _BETA * stable)
    return np.where(Ri < 0.0, _unstable_from_bulk(Ri, log_ratio), stable)[()]


def _unstable_from_bulk(
    Ri: NDArray[np.float64], log_ratio: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Bisection: Ri rises with z/L, so halving 60 times between the bounds finds it."""
    low, high = np.full(Ri.shape, _MOST_UNSTABLE), np.zeros(Ri.shape)

    def bulk(zeta: NDArray[np.float64]) -> NDArray[np.float64]:
        return zeta * (log_ratio - psi_heat(zeta)) / (log_ratio - psi_momentum(zeta)) ** 2

    answered = bulk(low) <= Ri
    for _ in range(60):
        middle = 0.5 * (low + high)
        above = bulk(middle) > Ri
        low, high = np.where(above, low, middle), np.where(above, middle, high)
    return np.where(answered, 0.5 * (low + high), np.nan)


def _profile(
    name: str,
    height: ArrayLike,
    roughness_length: ArrayLike,
    inverse_obukhov_length: ArrayLike,
    displacement_height: ArrayLike,
) -> NDArray[np.float64]:
    """ln(z/z0) - psi_m(z/L) + psi_m(z0/L), with z above the displacement height."""
    z = refuse_not_positive(name, height, "m", "heights are above ground")
    z0 = refuse_not_positive("roughness_length", roughness_length, "m", "water has 0.0002 m")
    d = refuse_negative("displacement_height", displacement_height, "m", "zero without a canopy")
    ratio = np.asarray((z - d) / z0)
    refuse(
        ratio <= 1.0,
        ratio,
        f"{name} must be above displacement height plus roughness length, their ratio",
        "the log law starts there; check that roughness_length is in metres",
    )
    inverse_L = floats(inverse_obukhov_length)
    return np.log(ratio) - psi_momentum((z - d) * inverse_L) + psi_momentum(z0 * inverse_L)
