"""From mean power to a year's energy: hours, capacity factor, and what a speed error costs.

Here: the hours of a year, energy and capacity factor from a mean power, and the local sensitivity
of energy to wind speed. Not here: the mean power itself (`curve`), losses (`losses`).
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = [
    "HOURS_PER_MEAN_YEAR",
    "HOURS_PER_YEAR",
    "annual_energy",
    "capacity_factor",
    "speed_to_energy_sensitivity",
]

#: Hours of the year that annual energy is stated for [h]: 365 days, IEC 61400-12-1.
HOURS_PER_YEAR = 8760.0
#: Hours of a year averaged over leap years [h]: 365.25 days; 0.07 % above `HOURS_PER_YEAR`.
HOURS_PER_MEAN_YEAR = 8766.0


def annual_energy(
    mean_power: ArrayLike, *, hours_per_year: float = HOURS_PER_YEAR
) -> NDArray[np.float64]:
    """Energy of one year at a mean power.

    Parameters
    ----------
    mean_power : array_like
        Mean power over all hours, standstill included [W].
    hours_per_year : float
        Hours of the year [h]; `HOURS_PER_MEAN_YEAR` counts leap days too.

    Returns
    -------
    float or ndarray
        Energy [Wh]; NaN in gives NaN out.
    """
    return (np.asarray(mean_power, dtype=float) * hours_per_year)[()]


def capacity_factor(mean_power: ArrayLike, rated_power: ArrayLike) -> NDArray[np.float64]:
    """Mean power as a share of rated power.

    Parameters
    ----------
    mean_power : array_like
        Mean power over all hours [W].
    rated_power : array_like
        Rated power [W]; broadcasts with `mean_power`.

    Returns
    -------
    float or ndarray
        Capacity factor [1]; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a rated power is not positive, or a mean power is negative or above its rated power.
    """
    mean = np.asarray(mean_power, dtype=float)
    rated = np.asarray(rated_power, dtype=float)
    if np.any(rated <= 0):
        raise ValueError(f"rated_power must be positive [W], got {np.nanmin(rated):g}")
    factor = mean / rated
    if np.any(factor < 0) or np.any(factor > 1):
        worst = np.nanmin(factor) if np.any(factor < 0) else np.nanmax(factor)
        raise ValueError(
            f"mean_power must lie between 0 and rated_power, but their ratio reaches {worst:g}; "
            f"give both in W and both for one turbine or both for the site"
        )
    return factor[()]


def speed_to_energy_sensitivity(
    mean_power_of_scale: Callable[[float], ArrayLike], *, step: float = 0.005
) -> NDArray[np.float64]:
    """Relative change of energy for a relative change of all wind speeds, (dE/E)/(dv/v).

    Parameters
    ----------
    mean_power_of_scale : callable
        Gives the mean power [any unit] when every wind speed of the study is multiplied by its
        argument [1]: over the study's own series, table or distribution.
    step : float
        Half width of the central difference [1].

    Returns
    -------
    float or ndarray
        Sensitivity [1], in the shape the callable returns.

    Raises
    ------
    ValueError
        If `step` is not between 0 and 0.2, or the mean power is not positive.

    Notes
    -----
    Derived from the study each time: it falls from about 3 at a mean of 5 m/s to 1.4 at 9 m/s, so
    no fixed factor serves.
    """
    if not 0 < step < 0.2:
        raise ValueError(f"step must lie between 0 and 0.2, got {step:g}; 0.005 is half a percent")
    power = np.asarray(mean_power_of_scale(1.0), dtype=float)
    if np.any(power <= 0):
        raise ValueError(
            f"the mean power must be positive to have a relative change, got {np.nanmin(power):g}; "
            f"check that the wind reaches cut-in"
        )
    higher = np.asarray(mean_power_of_scale(1.0 + step), dtype=float)
    lower = np.asarray(mean_power_of_scale(1.0 - step), dtype=float)
    return ((higher - lower) / (2 * step * power))[()]
