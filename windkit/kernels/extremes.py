"""Extreme winds: what a fitted distribution of maxima says about long return periods.

A fit of any method comes in, a level and its standard error go out. The fits are in
`extreme_fits`, the picking of maxima from a series is in `extreme_samples`, gusts and averaging
times are in `gusts`. A return level from ten years is a guess at a fifty-year wind; design loads
are for the turbine's maker and a licensed engineer.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import floats, refuse, refuse_not_positive
from windkit.kernels.weibull import weibull_mean

__all__ = [
    "ExtremeFit",
    "extreme_over_mean_from_weibull",
    "gumbel_variate",
    "return_level",
    "return_level_standard_error",
]

#: Independent ten-minute winds in a year [1]: H. Bergstroem 1992; European Wind Turbine
#: Standards II 1998.
_EVENTS_PER_YEAR = 23_037.0


@dataclass(frozen=True, slots=True, eq=False)
class ExtremeFit:
    """A fitted extreme value distribution.

    Attributes
    ----------
    location, scale : float
        In the unit of the maxima.
    shape : float
        xi [1]: zero for Gumbel, positive for a heavy tail, negative for a bounded one.
    covariance : ndarray
        Of location, scale and shape, shape (3, 3); zeros where the shape was not fitted, NaN
        where nothing is known.
    count : int
        Maxima the fit stands on.
    method : str
        How it was made, for the reader.
    """

    location: float
    scale: float
    shape: float
    covariance: NDArray[np.float64]
    count: int
    method: str


def gumbel_variate(
    return_period: ArrayLike, *, events_per_year: ArrayLike = 1.0
) -> NDArray[np.float64]:
    """Reduced variate -ln(-ln p) of the value exceeded in one year out of so many.

    Parameters
    ----------
    return_period : array_like
        Return period [years], above one.
    events_per_year : array_like
        Independent maxima a year the distribution was fitted to: one for yearly maxima, the
        number of storms a year for storm maxima.

    Returns
    -------
    float or ndarray
        Reduced variate [1], p being (1 - 1/T)^(1/events).

    Raises
    ------
    ValueError
        If a return period is not above one year, or a number of events not positive.
    """
    T = floats(return_period)
    refuse(T <= 1.0, T, "return_period must be above 1 [years]", "50 is usual")
    r = refuse_not_positive("events_per_year", events_per_year, "1/year", "1 for yearly maxima")
    return -np.log(-np.log1p(-1.0 / T) / r)


def return_level(
    fit: ExtremeFit, return_period: ArrayLike, *, events_per_year: ArrayLike = 1.0
) -> NDArray[np.float64]:
    """Value whose chance to be exceeded in any one year is one over the return period.

    Parameters
    ----------
    fit : ExtremeFit
        Any of the fits.
    return_period : array_like
        Return period [years].
    events_per_year : array_like
        As for `gumbel_variate`.

    Returns
    -------
    float or ndarray
        Level in the unit of the maxima.

    Raises
    ------
    ValueError
        As `gumbel_variate`.

    References
    ----------
    .. [1] S. Coles 2001, An Introduction to Statistical Modeling of Extreme Values, eq. 3.4.
    """
    y = gumbel_variate(return_period, events_per_year=events_per_year)
    xi = fit.shape
    reduced = y if abs(xi) < 1e-8 else np.expm1(xi * y) / xi
    return fit.location + fit.scale * reduced


def return_level_standard_error(
    fit: ExtremeFit, return_period: ArrayLike, *, events_per_year: ArrayLike = 1.0
) -> NDArray[np.float64]:
    """Standard error of a return level by the delta method.

    Parameters
    ----------
    fit, return_period, events_per_year
        As for `return_level`.

    Returns
    -------
    float or ndarray
        Standard error in the unit of the maxima. It knows the scatter of the sample, not
        whether the distribution is right or the years were ordinary.

    Raises
    ------
    ValueError
        As `gumbel_variate`.
    """
    y = np.asarray(gumbel_variate(return_period, events_per_year=events_per_year))
    xi = fit.shape
    if abs(xi) < 1e-5:
        reduced, by_shape = y, y**2 / 2.0
    else:
        reduced = np.expm1(xi * y) / xi
        by_shape = (y * np.exp(xi * y) - reduced) / xi
    gradient = np.stack([np.ones_like(y), reduced, fit.scale * by_shape], axis=-1)
    return np.sqrt(np.einsum("...i,ij,...j->...", gradient, fit.covariance, gradient))[()]


def extreme_over_mean_from_weibull(
    weibull_shape: ArrayLike,
    *,
    return_period: ArrayLike = 50.0,
    events_per_year: float = _EVENTS_PER_YEAR,
) -> NDArray[np.float64]:
    """Extreme ten-minute wind over yearly mean, from the tail of a Weibull distribution.

    Parameters
    ----------
    weibull_shape : array_like
        k [1].
    return_period : array_like
        Return period [years].
    events_per_year : float
        Independent ten-minute winds in a year.

    Returns
    -------
    float or ndarray
        Ratio [1]; k = 1.75 gives the 5 of IEC 61400-1.

    Raises
    ------
    ValueError
        If a shape is not positive or a return period not above one.

    Notes
    -----
    For a first look only: the parent's tail is a guess, and 0.1 in k moves the ratio by 7 %.
    Storms of another kind (tropical cyclones, thunderstorms) are not in the parent at all.

    References
    ----------
    .. [1] H. Bergstroem 1992; European Wind Turbine Standards II, 1998, part 1.
    """
    k = refuse_not_positive("weibull_shape", weibull_shape, "1", "2 is a Rayleigh distribution")
    y = gumbel_variate(return_period, events_per_year=events_per_year)
    # y is -ln(-ln p); the tail needs -ln(1 - p) with p near one.
    exceedance = -np.expm1(-np.exp(-y))
    return (-np.log(exceedance)) ** (1.0 / k) / weibull_mean(1.0, k)
