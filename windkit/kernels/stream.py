"""Power in the moving air, and what a rotor can take from it by momentum theory.

Energy over a year, real power curves and wakes are not here. The Betz limit is: a claim above
it is refused before it becomes energy.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import floats, refuse, refuse_negative, refuse_not_positive

__all__ = [
    "BETZ_LIMIT",
    "claim_against_betz",
    "induction_factor",
    "mean_power_density",
    "overall_efficiency",
    "power_coefficient",
    "stream_power",
    "swept_area",
    "thrust_coefficient",
    "wind_power_density",
]

#: Largest share of the stream's power an ideal rotor can take [1], A. Betz 1920.
BETZ_LIMIT = 16.0 / 27.0

_MASK = "mask such values before the call"


def wind_power_density(wind_speed: ArrayLike, air_density: ArrayLike) -> NDArray[np.float64]:
    """Power that crosses one square metre held against the wind.

    Parameters
    ----------
    wind_speed : array_like
        Wind speed [m/s], any shape that broadcasts with `air_density`.
    air_density : array_like
        Air density [kg/m3].

    Returns
    -------
    float or ndarray
        Power density [W/m2] in the broadcast shape; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a speed is negative or a density not positive.

    Notes
    -----
    The power density of a mean speed is far below the mean power density of the wind: about
    half of it for a Rayleigh distribution. Use `mean_power_density` on a series.

    References
    ----------
    .. [1] Definition: kinetic energy 1/2 rho v^2 in the volume flux v.
    """
    v = refuse_negative("wind_speed", wind_speed, "m/s", _MASK)
    rho = refuse_not_positive("air_density", air_density, "kg/m3", _MASK)
    return 0.5 * rho * v**3


def mean_power_density(wind_speed: ArrayLike, air_density: ArrayLike) -> float:
    """Mean of the power density of a series, which is a mean of cubes.

    Parameters
    ----------
    wind_speed : array_like
        Series of wind speeds [m/s].
    air_density : array_like
        One air density, or one for each speed [kg/m3].

    Returns
    -------
    float
        Mean power density [W/m2] over the values where both are known; NaN if there is none.

    Raises
    ------
    ValueError
        If a speed is negative or a density not positive.
    """
    power_density = np.asarray(wind_power_density(wind_speed, air_density))
    known = power_density[~np.isnan(power_density)]
    return float(np.mean(known)) if known.size else float("nan")


def swept_area(rotor_diameter: ArrayLike) -> NDArray[np.float64]:
    """Area of the disc a horizontal-axis rotor sweeps.

    Parameters
    ----------
    rotor_diameter : array_like
        Rotor diameter [m].

    Returns
    -------
    float or ndarray
        Area [m2].

    Raises
    ------
    ValueError
        If a diameter is not positive.
    """
    D = refuse_not_positive("rotor_diameter", rotor_diameter, "m", "a rotor needs a diameter")
    return np.pi / 4.0 * D**2


def stream_power(
    wind_speed: ArrayLike, air_density: ArrayLike, rotor_diameter: ArrayLike
) -> NDArray[np.float64]:
    """Power of the undisturbed stream through the area of a rotor.

    Parameters
    ----------
    wind_speed : array_like
        Wind speed [m/s].
    air_density : array_like
        Air density [kg/m3].
    rotor_diameter : array_like
        Rotor diameter [m].

    Returns
    -------
    float or ndarray
        Power [W] in the broadcast shape; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a speed is negative, or a density or diameter not positive.
    """
    return swept_area(rotor_diameter) * wind_power_density(wind_speed, air_density)


def induction_factor(thrust_coefficient: ArrayLike) -> NDArray[np.float64]:
    """Slowing of the wind at the rotor, as a fraction of the free speed.

    Parameters
    ----------
    thrust_coefficient : array_like
        Thrust over dynamic pressure times area [1], 0 to 1.

    Returns
    -------
    float or ndarray
        Axial induction factor a [1], 0 to 0.5.

    Raises
    ------
    ValueError
        If a coefficient is outside 0 to 1, where simple momentum theory has no answer.

    References
    ----------
    .. [1] Momentum theory of the actuator disc (Rankine, Froude, Betz): Ct = 4 a (1 - a).
    """
    Ct = floats(thrust_coefficient)
    refuse(
        (Ct < 0.0) | (Ct > 1.0),
        Ct,
        "thrust_coefficient must be between 0 and 1 [1] for momentum theory",
        "a heavily loaded rotor needs an empirical relation, a percentage needs dividing by 100",
    )
    return 0.5 * (1.0 - np.sqrt(1.0 - Ct))


def thrust_coefficient(induction_factor: ArrayLike) -> NDArray[np.float64]:
    """Thrust coefficient of an ideal rotor, 4 a (1 - a).

    Parameters
    ----------
    induction_factor : array_like
        Axial induction factor a [1], 0 to 0.5.

    Returns
    -------
    float or ndarray
        Thrust coefficient [1].

    Raises
    ------
    ValueError
        If a factor is outside 0 to 0.5, where the far wake would flow backwards.
    """
    a = _checked_induction(induction_factor)
    return 4.0 * a * (1.0 - a)


def power_coefficient(induction_factor: ArrayLike) -> NDArray[np.float64]:
    """Power coefficient of an ideal rotor, 4 a (1 - a)^2; largest at a = 1/3, the Betz limit.

    Parameters
    ----------
    induction_factor : array_like
        Axial induction factor a [1], 0 to 0.5.

    Returns
    -------
    float or ndarray
        Power over the power of the stream through the rotor's area [1].

    Raises
    ------
    ValueError
        If a factor is outside 0 to 0.5, where the far wake would flow backwards.
    """
    a = _checked_induction(induction_factor)
    return 4.0 * a * (1.0 - a) ** 2


def overall_efficiency(
    power: ArrayLike, wind_speed: ArrayLike, air_density: ArrayLike, rotor_diameter: ArrayLike
) -> NDArray[np.float64]:
    """Share of the stream's power that a machine delivers, rotor and drive together.

    Parameters
    ----------
    power : array_like
        Power delivered [W].
    wind_speed, air_density, rotor_diameter : array_like
        [m/s], [kg/m3], [m].

    Returns
    -------
    float or ndarray
        Efficiency [1] in the broadcast shape. It is not judged: see `claim_against_betz`.

    Raises
    ------
    ValueError
        If a speed, density or diameter is not positive, or a power negative.
    """
    P = refuse_negative("power", power, "W", "consumption is not a claim; leave it out")
    v = refuse_not_positive("wind_speed", wind_speed, "m/s", "no efficiency without wind")
    return P / stream_power(v, air_density, rotor_diameter)


def claim_against_betz(
    power: ArrayLike,
    wind_speed: ArrayLike,
    air_density: ArrayLike,
    rotor_diameter: ArrayLike,
    *,
    refuse_impossible: bool = True,
) -> NDArray[np.float64]:
    """A claimed power over the most that any rotor of that size could take from that wind.

    Parameters
    ----------
    power : array_like
        Claimed power [W].
    wind_speed, air_density, rotor_diameter : array_like
        [m/s], [kg/m3], [m].
    refuse_impossible : bool
        False to get ratios above one back instead of an error, for showing them.

    Returns
    -------
    float or ndarray
        Claim over Betz ceiling [1] in the broadcast shape.

    Raises
    ------
    ValueError
        If a claim is above the ceiling; the message says how large a rotor it would need.
        Also as `overall_efficiency`.

    Notes
    -----
    A ratio just below one is no proof of truth: with drive and generator, good large machines
    reach 0.75 to 0.85 of the ceiling, small ones seldom 0.6 (common practice).

    References
    ----------
    .. [1] A. Betz 1920, Zeitschrift fuer das gesamte Turbinenwesen 26: the limit 16/27.
    """
    efficiency = overall_efficiency(power, wind_speed, air_density, rotor_diameter)
    ratio = np.asarray(efficiency / BETZ_LIMIT)
    # The limit itself is allowed; rounding in the last digits is no claim.
    if refuse_impossible and np.any(ratio > 1.0 + 1e-9):
        worst = int(np.nanargmax(ratio))
        P, v, rho, D = (
            float(np.broadcast_to(floats(values), ratio.shape).reshape(-1)[worst])
            for values in (power, wind_speed, air_density, rotor_diameter)
        )
        worst_ratio = float(ratio.reshape(-1)[worst])
        raise ValueError(
            f"power must not be above the Betz limit, but {P:g} W at {v:g} m/s and {rho:g} kg/m3 "
            f"is {worst_ratio:.2f} times the {P / worst_ratio:.4g} W that 16/27 of the stream "
            f"through a {D:g} m rotor holds; even a perfect rotor would need "
            f"{D * np.sqrt(worst_ratio):.3g} m: check the units and the speed the claim is for"
        )
    return ratio[()]


def _checked_induction(induction_factor: ArrayLike) -> NDArray[np.float64]:
    a = floats(induction_factor)
    refuse(
        (a < 0.0) | (a > 0.5),
        a,
        "induction_factor must be between 0 and 0.5 [1] for momentum theory",
        "above it the far wake would flow backwards",
    )
    return a
