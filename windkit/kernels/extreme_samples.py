"""Independent maxima from a series: the highest of each block, or of each storm.

Blocks are years or months; storms are runs above a threshold that are far enough apart. Fits to
the maxima are in `extreme_fits`. Times are not known here: a series is records at even steps.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import floats

__all__ = ["block_maxima", "storm_maxima"]


def block_maxima(
    wind_speed: ArrayLike, blocks: ArrayLike, *, least_known: float = 0.9
) -> tuple[NDArray[np.int64], NDArray[np.float64], NDArray[np.float64]]:
    """Highest value in each block, such as each year.

    Parameters
    ----------
    wind_speed : array_like
        Wind speeds [m/s] or gusts, NaN where missing, one dimension.
    blocks : array_like of int
        Block each record belongs to, such as its year.
    least_known : float
        Share of a block's records [1] that must be known; a storm may hide in the rest.

    Returns
    -------
    labels : ndarray of int
        Blocks, ascending.
    maximum : ndarray
        Highest value of each [m/s]; NaN where too little is known.
    known_share : ndarray
        Share of each block's records that are known [1]. A block that is only partly in the
        series looks whole: give it whole or leave it out.

    Raises
    ------
    ValueError
        If lengths differ, blocks are not whole numbers, or the share is out of range.
    """
    v, label = floats(wind_speed), np.asarray(blocks)
    if v.ndim != 1 or label.shape != v.shape or v.size == 0:
        raise ValueError(
            f"wind_speed and blocks must be series of one length, got {v.shape} and {label.shape}; "
            f"take both from one table"
        )
    if not np.issubdtype(label.dtype, np.integer):
        raise ValueError(
            f"blocks must hold whole numbers, got {label.dtype}; give years as integers"
        )
    if not 0.0 < least_known <= 1.0:
        raise ValueError(
            f"least_known must be above 0 and up to 1 [1], got {least_known:g}; try 0.9"
        )
    labels, number = np.unique(label, return_inverse=True)
    known = ~np.isnan(v)
    share = np.bincount(number[known], minlength=labels.size) / np.bincount(number)
    maximum = np.full(labels.size, -np.inf)
    np.maximum.at(maximum, number[known], v[known])
    maximum = np.where(share >= least_known, maximum, np.nan)
    return labels.astype(np.int64), maximum, share


def storm_maxima(wind_speed: ArrayLike, *, threshold: float, separation: int) -> NDArray[np.intp]:
    """Positions of the highest record in each storm above a threshold.

    Parameters
    ----------
    wind_speed : array_like
        Wind speeds [m/s] at even steps, one dimension, NaN where missing.
    threshold : float
        Speed [m/s] a storm must exceed. Some ten storms a year is a usual aim.
    separation : int
        Steps without exceedance that end a storm; two to four days in the mid-latitudes (common
        practice). Missing records count as steps without exceedance.

    Returns
    -------
    ndarray of int
        Position of the first highest record of each storm, ascending; empty without a storm.
        Fit the speeds there, with the number of storms a year as `events_per_year`.

    Raises
    ------
    ValueError
        If the series has not one dimension, or the separation is below one.

    References
    ----------
    .. [1] N. J. Cook 1982, Journal of Wind Engineering and Industrial Aerodynamics 9: 295,
       independent storms; S. Coles 2001, section 5.3.2, runs.
    """
    v = floats(wind_speed)
    if v.ndim != 1:
        raise ValueError(f"wind_speed must be one series, got shape {v.shape}; take one height")
    if separation < 1:
        raise ValueError(f"separation must be at least 1 step, got {separation}; try two days")
    above = np.flatnonzero(v > threshold)
    if above.size == 0:
        return above
    # A gap of more than `separation` steps holds at least that many records below.
    starts = np.concatenate([[0], np.flatnonzero(np.diff(above) > separation) + 1])
    storm = np.repeat(np.arange(starts.size), np.diff(np.append(starts, above.size)))
    # Sorted by storm, then by falling speed, then by time: the first of each storm is its peak.
    order = np.lexsort((above, -v[above], storm))
    return above[order[starts]]
