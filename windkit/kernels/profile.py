"""Wind speed with height: the power law, the neutral logarithmic law, and fits of both.

Exponents and roughness lengths are found from speeds at two or more heights, all heights at
once, one value for each record. A negative exponent (wind that falls with height, as on many
nights and over sea) is a finding: it is kept, never clipped. Stability, roughness classes and
grouping by sector, hour and month are not here.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import floats, refuse, refuse_negative, refuse_not_positive
from windkit.kernels.constants import VON_KARMAN_CONSTANT

__all__ = [
    "fit_roughness",
    "fit_shear",
    "friction_velocity",
    "log_law",
    "power_law",
    "shear_exponent",
]

_MASK = "mask such values"
_GROUND = "heights are above ground"


def shear_exponent(
    wind_speed_lower: ArrayLike,
    wind_speed_upper: ArrayLike,
    height_lower: ArrayLike,
    height_upper: ArrayLike,
) -> NDArray[np.float64]:
    """Exponent of the power law through speeds at two heights.

    Parameters
    ----------
    wind_speed_lower, wind_speed_upper : array_like
        Wind speeds [m/s] at the lower and the upper height.
    height_lower, height_upper : array_like
        Heights [m]; all four broadcast.

    Returns
    -------
    float or ndarray
        Shear exponent [1], negative where wind falls with height; NaN where a speed is missing
        or zero, since no power law passes through a calm.

    Raises
    ------
    ValueError
        If a speed is negative, a height not positive, or the upper height not the higher one.

    Notes
    -----
    The mean of exponents is not the exponent of mean speeds: slow hours weigh as much as fast
    ones. For energy, apply each hour's exponent to that hour, or use the mean speeds.

    References
    ----------
    .. [1] C. G. Justus and A. Mikhail 1976, Geophysical Research Letters 3: 261, the power law.
    """
    v1 = refuse_negative("wind_speed_lower", wind_speed_lower, "m/s", _MASK)
    v2 = refuse_negative("wind_speed_upper", wind_speed_upper, "m/s", _MASK)
    z1 = refuse_not_positive("height_lower", height_lower, "m", _GROUND)
    z2 = refuse_not_positive("height_upper", height_upper, "m", _GROUND)
    difference = np.asarray(z2 - z1)
    refuse(
        difference <= 0.0,
        difference,
        "height_upper must be above height_lower [m], their difference",
        "swap the two, with their speeds",
    )
    return (_log_or_nan(v2) - _log_or_nan(v1)) / np.log(z2 / z1)


def power_law(
    wind_speed: ArrayLike,
    height: ArrayLike,
    target_height: ArrayLike,
    shear_exponent: ArrayLike,
    *,
    displacement_height: ArrayLike = 0.0,
) -> NDArray[np.float64]:
    """Wind speed at another height by the power law.

    Parameters
    ----------
    wind_speed : array_like
        Wind speed [m/s] at `height`.
    height, target_height : array_like
        Heights [m] of the measurement and of the result.
    shear_exponent : array_like
        Exponent [1], of either sign; all four broadcast.
    displacement_height : array_like
        Height [m] the flow is lifted by a closed canopy; the exponent must have been found with
        the same one.

    Returns
    -------
    float or ndarray
        Wind speed [m/s] at the target height; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a speed is negative or a height not above the displacement height.

    References
    ----------
    .. [1] C. G. Justus and A. Mikhail 1976, Geophysical Research Letters 3: 261, the power law.
    """
    v = refuse_negative("wind_speed", wind_speed, "m/s", _MASK)
    z = _above_displacement("height", height, displacement_height)
    z_target = _above_displacement("target_height", target_height, displacement_height)
    return v * (z_target / z) ** floats(shear_exponent)


def log_law(
    wind_speed: ArrayLike,
    height: ArrayLike,
    target_height: ArrayLike,
    roughness_length: ArrayLike,
    *,
    displacement_height: ArrayLike = 0.0,
) -> NDArray[np.float64]:
    """Wind speed at another height by the logarithmic law of neutral air.

    Parameters
    ----------
    wind_speed : array_like
        Wind speed [m/s] at `height`.
    height, target_height : array_like
        Heights [m] of the measurement and of the result.
    roughness_length : array_like
        Roughness length [m]; all four broadcast.
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

    References
    ----------
    .. [1] H. A. Panofsky and J. A. Dutton 1984, Atmospheric Turbulence, ch. 6.
    """
    v = refuse_negative("wind_speed", wind_speed, "m/s", _MASK)
    log_z = _log_height("height", height, roughness_length, displacement_height)
    log_target = _log_height("target_height", target_height, roughness_length, displacement_height)
    return v * log_target / log_z


def friction_velocity(
    wind_speed: ArrayLike,
    height: ArrayLike,
    roughness_length: ArrayLike,
    *,
    displacement_height: ArrayLike = 0.0,
) -> NDArray[np.float64]:
    """Friction velocity of neutral air from one speed and the roughness.

    Parameters
    ----------
    wind_speed : array_like
        Wind speed [m/s] at `height`.
    height, roughness_length, displacement_height : array_like
        [m]; all broadcast.

    Returns
    -------
    float or ndarray
        Friction velocity [m/s]; NaN in gives NaN out.

    Raises
    ------
    ValueError
        As `log_law`.

    References
    ----------
    .. [1] H. A. Panofsky and J. A. Dutton 1984, Atmospheric Turbulence, ch. 6.
    """
    v = refuse_negative("wind_speed", wind_speed, "m/s", _MASK)
    log_z = _log_height("height", height, roughness_length, displacement_height)
    return VON_KARMAN_CONSTANT * v / log_z


def fit_shear(
    wind_speed: ArrayLike, height: ArrayLike, *, displacement_height: float = 0.0
) -> NDArray[np.float64]:
    """Shear exponent through all heights of each record, by least squares of logarithms.

    Parameters
    ----------
    wind_speed : array_like
        Wind speeds [m/s], shape (..., heights).
    height : array_like
        Heights [m], shape (heights,), all different.
    displacement_height : float
        Height [m] the flow is lifted by a closed canopy.

    Returns
    -------
    float or ndarray
        Shear exponent [1] for each record, shape (...), of either sign; NaN where fewer than
        two heights have a speed above zero.

    Raises
    ------
    ValueError
        If a speed is negative, heights are fewer than two, alike, or not above the displacement
        height, or shapes do not match.

    Notes
    -----
    A missing or zero speed drops out at its own height only. Where different heights are
    missing at different times, exponents belong to different layers: count them.
    """
    v, z = _speeds_by_height(wind_speed, height, displacement_height)
    slope, _ = _line(np.log(z), _log_or_nan(v))
    return slope


def fit_roughness(
    wind_speed: ArrayLike, height: ArrayLike, *, displacement_height: float = 0.0
) -> NDArray[np.float64]:
    """Roughness length through all heights of each record, by least squares of the log law.

    Parameters
    ----------
    wind_speed : array_like
        Wind speeds [m/s], shape (..., heights).
    height : array_like
        Heights [m], shape (heights,), all different.
    displacement_height : float
        Height [m] the flow is lifted by a closed canopy.

    Returns
    -------
    float or ndarray
        Roughness length [m] for each record, shape (...); NaN where fewer than two heights have
        a speed, or where wind does not rise with height, since no log law does that.

    Raises
    ------
    ValueError
        As `fit_shear`.

    Notes
    -----
    The value answers for stability too unless records are neutral, and spreads over powers of
    ten: fit mean profiles, or take the mean of logarithms.
    """
    v, z = _speeds_by_height(wind_speed, height, displacement_height)
    slope, intercept = _line(np.log(z), v)
    rising = slope > 0.0
    exponent = np.full(slope.shape, np.nan)
    np.divide(-intercept, slope, out=exponent, where=rising)
    with np.errstate(over="ignore"):
        return np.exp(exponent)[()]


def _line(
    x: NDArray[np.float64], y: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Slope and intercept of y on x along the last axis, missing y left out; NaN below two."""
    known = ~np.isnan(y)
    # One mask turned to floats, and matrix products with x, are faster than nan-functions.
    w = known.astype(np.float64)
    y = np.where(known, y, 0.0)
    n, sum_x, sum_xx = w.sum(axis=-1), w @ x, w @ (x * x)
    sum_y, sum_xy = y.sum(axis=-1), y @ x
    enough = n >= 2.0
    denominator = np.where(enough, n * sum_xx - sum_x**2, np.nan)
    slope = (n * sum_xy - sum_x * sum_y) / denominator
    intercept = (sum_y - slope * sum_x) / np.where(enough, n, np.nan)
    return slope, intercept


def _speeds_by_height(
    wind_speed: ArrayLike, height: ArrayLike, displacement_height: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    v = refuse_negative("wind_speed", wind_speed, "m/s", _MASK)
    z = _above_displacement("height", height, displacement_height)
    if z.ndim != 1 or z.size < 2 or np.unique(z).size != z.size:
        raise ValueError(
            f"height must name at least two different heights [m], got {floats(height).tolist()}; "
            f"average sensors that share a height first"
        )
    if v.ndim < 1 or v.shape[-1] != z.size:
        raise ValueError(
            f"wind_speed must have one column for each of the {z.size} heights, got shape "
            f"{v.shape}; put heights along the last axis"
        )
    return v, z


def _above_displacement(
    name: str, height: ArrayLike, displacement_height: ArrayLike
) -> NDArray[np.float64]:
    z = refuse_not_positive(name, height, "m", _GROUND)
    d = refuse_negative("displacement_height", displacement_height, "m", _GROUND)
    lifted = np.asarray(z - d)
    refuse(
        lifted <= 0.0,
        lifted,
        f"{name} must be above the displacement height [m], their difference",
        "profiles start above the canopy",
    )
    return lifted


def _log_height(
    name: str, height: ArrayLike, roughness_length: ArrayLike, displacement_height: ArrayLike
) -> NDArray[np.float64]:
    z0 = refuse_not_positive("roughness_length", roughness_length, "m", "water has 0.0002 m")
    ratio = np.asarray(_above_displacement(name, height, displacement_height) / z0)
    refuse(
        ratio <= 1.0,
        ratio,
        f"{name} must be above displacement height plus roughness length, their ratio",
        "the log law starts there; check that roughness_length is in metres",
    )
    return np.log(ratio)


def _log_or_nan(wind_speed: NDArray[np.float64]) -> NDArray[np.float64]:
    """Logarithm of a speed, NaN for a calm."""
    moving = wind_speed > 0.0
    return np.log(np.where(moving, wind_speed, np.nan))
