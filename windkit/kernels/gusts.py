"""Gusts and averaging times: one wind, averaged over seconds, minutes or an hour.

Extreme winds come from stations that average differently; before they are compared or held
against a design class they need one averaging time. The gust factor by turbulence is in
`turbulence`, return levels are in `extremes`.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import refuse, refuse_negative, refuse_not_positive
from windkit.kernels.turbulence import gust_factor

__all__ = ["AVERAGING_FACTORS", "AVERAGING_TIMES", "averaging_time_factor", "gust_speed"]

#: Averaging times of the factors below [s].
AVERAGING_TIMES: tuple[float, ...] = (3.0, 60.0, 120.0, 180.0, 600.0, 3600.0)
#: Highest mean over each averaging time within an hour, over the hourly mean [1], by exposure:
#: B. A. Harper, J. D. Kepert and J. D. Ginger 2010, WMO/TD-No. 1555, table 1.1. They were made
#: for strong tropical winds and are used for others too.
AVERAGING_FACTORS: Mapping[str, tuple[float, ...]] = MappingProxyType(
    {
        "in-land": (1.75, 1.28, 1.19, 1.15, 1.08, 1.0),
        "off-land": (1.60, 1.22, 1.15, 1.12, 1.06, 1.0),
        "off-sea": (1.45, 1.17, 1.11, 1.09, 1.05, 1.0),
        "at-sea": (1.30, 1.11, 1.07, 1.06, 1.03, 1.0),
    }
)


def gust_speed(
    wind_speed: ArrayLike,
    turbulence_intensity: ArrayLike,
    *,
    gust_duration: float = 3.0,
    averaging_time: float = 600.0,
) -> NDArray[np.float64]:
    """Gust that belongs to a mean wind, by the published gust factor.

    Parameters
    ----------
    wind_speed : array_like
        Highest mean over `averaging_time` within an hour [m/s].
    turbulence_intensity : array_like
        Turbulence intensity [1].
    gust_duration, averaging_time : float
        [s], the gust not longer than the averaging time, up to an hour.

    Returns
    -------
    float or ndarray
        Gust [m/s]: the ratio of the gust factors of both times, times the wind.

    Raises
    ------
    ValueError
        If a speed is negative, a time is out of range, or an intensity looks like percent.

    Notes
    -----
    The factor is stated for gusts of seconds; for ten minutes it is higher than the tables.

    References
    ----------
    .. [1] J. Wieringa 1973, Boundary-Layer Meteorology 3: 424.
    """
    V = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    if gust_duration > averaging_time:
        raise ValueError(
            f"gust_duration must not be above averaging_time [s], got {gust_duration:g} and "
            f"{averaging_time:g}; swap the two"
        )
    short = gust_factor(turbulence_intensity, gust_duration)
    return V * short / gust_factor(turbulence_intensity, averaging_time)


def averaging_time_factor(
    averaging_time: ArrayLike, target_averaging_time: ArrayLike, *, exposure: str
) -> NDArray[np.float64]:
    """Factor that brings an extreme wind from one averaging time to another.

    Parameters
    ----------
    averaging_time, target_averaging_time : array_like
        Averaging times [s] of the wind at hand and of the wind wanted, 3 s to an hour.
    exposure : str
        One of `AVERAGING_FACTORS`: in-land (roughly open terrain), off-land (wind from land at
        a coast), off-sea (wind from sea at a coast) or at-sea.

    Returns
    -------
    float or ndarray
        Factor on the extreme [1], above one towards shorter times.

    Raises
    ------
    ValueError
        If a time is out of range or the exposure is not in the table.

    Notes
    -----
    For highest means only. A mean picked at random does not change with its averaging time, so
    series must not be scaled with it. Between the printed times the logarithm is interpolated.

    References
    ----------
    .. [1] WMO/TD-No. 1555, 2010, table 1.1.
    """
    if exposure not in AVERAGING_FACTORS:
        raise ValueError(
            f"exposure {exposure!r} is not in the table; write one of: "
            f"{', '.join(AVERAGING_FACTORS)}"
        )
    log_times, factors = np.log(AVERAGING_TIMES), AVERAGING_FACTORS[exposure]
    here, wanted = (
        np.interp(np.log(_checked_time(name, time)), log_times, factors)
        for name, time in (
            ("averaging_time", averaging_time),
            ("target_averaging_time", target_averaging_time),
        )
    )
    return np.asarray(wanted / here, dtype=np.float64)[()]


def _checked_time(name: str, time: ArrayLike) -> NDArray[np.float64]:
    t = refuse_not_positive(name, time, "s", "an hour is 3600 s")
    refuse(
        (t < AVERAGING_TIMES[0]) | (t > AVERAGING_TIMES[-1]),
        t,
        f"{name} must be between {AVERAGING_TIMES[0]:g} and {AVERAGING_TIMES[-1]:g} s",
        "ten minutes are 600 s",
    )
    return t
