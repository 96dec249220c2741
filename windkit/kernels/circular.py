"""Directions: means, differences and the way between components and speed with direction.

A direction is where the wind comes from, in degrees clockwise from true north, 0 up to but not
360. A calm has none: its direction is NaN. Two means exist and answer different questions: the
mean of unit vectors says where the wind comes from most of the time, the speed-weighted one
where the air comes from. Sectors and tables are in `frequency`.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import floats, refuse_negative

__all__ = [
    "components",
    "direction_difference",
    "mean_direction",
    "resultant_length",
    "speed_weighted_mean_direction",
    "wind_from_components",
]

#: Mean vectors shorter than this share of their parts are rounding, not a direction [1].
_LEAST_RESULTANT = 1e-9


def wind_from_components(
    eastward_wind: ArrayLike, northward_wind: ArrayLike
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Speed and direction from the components a weather model gives.

    Parameters
    ----------
    eastward_wind, northward_wind : array_like
        Components u and v [m/s], positive towards the east and the north.

    Returns
    -------
    wind_speed, wind_direction : float or ndarray
        [m/s] and [deg, from]. The direction of a calm is NaN. NaN in gives NaN out.

    Notes
    -----
    Compute this before any averaging: the speed of mean components is below the mean speed.
    """
    u, v = np.broadcast_arrays(floats(eastward_wind), floats(northward_wind))
    wind_speed = np.asarray(np.hypot(u, v))
    wind_direction = _wrapped(np.degrees(np.arctan2(-u, -v)))
    return wind_speed[()], np.where(wind_speed > 0.0, wind_direction, np.nan)[()]


def components(
    wind_speed: ArrayLike, wind_direction: ArrayLike
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Eastward and northward components of a wind.

    Parameters
    ----------
    wind_speed : array_like
        Wind speed [m/s].
    wind_direction : array_like
        Where it comes from [deg].

    Returns
    -------
    eastward_wind, northward_wind : float or ndarray
        Components [m/s] in the broadcast shape; both zero in a calm, though it has no direction.

    Raises
    ------
    ValueError
        If a speed is negative.
    """
    speed = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    angle = np.radians(floats(wind_direction))
    calm = speed == 0.0
    eastward = np.where(calm, 0.0, -speed * np.sin(angle))
    northward = np.where(calm, 0.0, -speed * np.cos(angle))
    return eastward[()], northward[()]


def direction_difference(
    wind_direction: ArrayLike, other_direction: ArrayLike
) -> NDArray[np.float64]:
    """First direction less the second, the short way round.

    Parameters
    ----------
    wind_direction, other_direction : array_like
        Directions [deg], any shapes that broadcast.

    Returns
    -------
    float or ndarray
        Difference [deg], from -180 up to but not 180; positive if the first is clockwise of
        the second. NaN in gives NaN out.
    """
    return (floats(wind_direction) - floats(other_direction) + 180.0) % 360.0 - 180.0


def mean_direction(wind_direction: ArrayLike, *, axis: int | None = None) -> NDArray[np.float64]:
    """Mean of directions as unit vectors: where the wind comes from most of the time.

    Parameters
    ----------
    wind_direction : array_like
        Directions [deg]; NaN is skipped.
    axis : int, optional
        Axis to average over; all values if left out.

    Returns
    -------
    float or ndarray
        Mean direction [deg]; NaN where the vectors cancel (north and south have no mean) or
        nothing is known.

    References
    ----------
    .. [1] K. V. Mardia and P. E. Jupp 2000, Directional Statistics, section 2.2.
    """
    directions = floats(wind_direction)
    return _mean_vector(np.ones_like(directions), directions, axis)[1]


def speed_weighted_mean_direction(
    wind_speed: ArrayLike, wind_direction: ArrayLike, *, axis: int | None = None
) -> NDArray[np.float64]:
    """Direction of the mean wind vector: where the air comes from.

    Parameters
    ----------
    wind_speed : array_like
        Wind speeds [m/s].
    wind_direction : array_like
        Directions [deg]; pairs with a missing part are skipped, and calms carry nothing.
    axis : int, optional
        Axis to average over; all values if left out.

    Returns
    -------
    float or ndarray
        Direction of the mean vector [deg]; NaN where the vectors cancel.

    Raises
    ------
    ValueError
        If a speed is negative.
    """
    speed = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    return _mean_vector(speed, floats(wind_direction), axis)[1]


def resultant_length(wind_direction: ArrayLike, *, axis: int | None = None) -> NDArray[np.float64]:
    """Length of the mean unit vector: one if all directions agree, near zero if they cancel.

    Parameters
    ----------
    wind_direction : array_like
        Directions [deg]; NaN is skipped.
    axis : int, optional
        Axis to average over; all values if left out.

    Returns
    -------
    float or ndarray
        Resultant length [1]; NaN where nothing is known.

    References
    ----------
    .. [1] K. V. Mardia and P. E. Jupp 2000, Directional Statistics, section 2.3.
    """
    directions = floats(wind_direction)
    return _mean_vector(np.ones_like(directions), directions, axis)[0]


def _mean_vector(
    weight: NDArray[np.float64], directions: NDArray[np.float64], axis: int | None
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Length (over the mean weight) and direction of a weighted mean of unit vectors."""
    weight, directions = np.broadcast_arrays(weight, directions)
    known = ~(np.isnan(weight) | np.isnan(directions))
    weight = np.where(known, weight, 0.0)
    angle = np.radians(np.where(known, directions, 0.0))
    total = np.asarray(weight.sum(axis=axis))
    east = np.asarray((weight * np.sin(angle)).sum(axis=axis))
    north = np.asarray((weight * np.cos(angle)).sum(axis=axis))
    length = np.full(total.shape, np.nan)
    np.divide(np.hypot(east, north), total, out=length, where=total > 0.0)
    defined = length > _LEAST_RESULTANT
    direction = np.where(defined, _wrapped(np.degrees(np.arctan2(east, north))), np.nan)
    return length[()], direction[()]


def _wrapped(degrees: NDArray[np.float64]) -> NDArray[np.float64]:
    """Degrees in 0 up to but not 360; a tiny negative angle would round up to 360."""
    wrapped = np.asarray(degrees) % 360.0
    return np.where(wrapped >= 360.0, 0.0, wrapped)
