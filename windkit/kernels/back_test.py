"""A claimed interval held against blocks and stand-ins whose truth is known.

Here is the arithmetic of the back-test: the share of truths that intervals made without them hold,
the factor that mends a claim which does not hold, draws from the errors seen, and the site's own
held-out months beside those of its references.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

__all__ = [
    "draw_errors",
    "held_out_rms",
    "persistent_mean_variance",
    "stand_in_coverage",
    "widening_factor",
]

Array = NDArray[np.float64]

#: Degrees of freedom each stand-in beyond the first brings to the spread of the errors [1].
#: Set on simulated sites with two and three references, where few stand-ins make it matter.
FREEDOM_PER_STAND_IN = 4
#: What a single stand-in counts for beyond the first [1]: its t has three degrees of freedom.
LEAST_STAND_INS = 0.75


def stand_in_coverage(errors: Array, level: float) -> float:
    """Share of stand-ins' errors within an interval made of the other stand-ins' errors.

    The interval is made as for the site: spread out for the number of stand-ins it rests on.

    Parameters
    ----------
    errors : ndarray, shape (m, w)
        Truth less estimate of each stand-in and window, NaN where there is none.
    level : float
        Of the interval [1].
    """
    ratio = _over_others(errors, level)
    return float(np.nanmean(np.where(np.isnan(ratio), np.nan, ratio <= 1)))


def widening_factor(errors: Array, level: float = 0.8) -> float:
    """Factor, at least 1, with which those intervals would have held `level` of the truths.

    What the draws are spread out by already, for their few stand-ins, is not asked for twice.
    """
    return float(max(1.0, np.nanquantile(_over_others(errors, level), level)))


def draw_errors(errors: Array, count: int, *, weight: Array | None = None, seed: int = 0) -> Array:
    """Errors like those of the stand-ins, spread out for their small number.

    Parameters
    ----------
    errors : ndarray, shape (m, w)
    count : int
    weight : ndarray, shape (w,), optional
        Of each window; equal if left out.
    seed : int

    Returns
    -------
    ndarray, shape (count,)
        Symmetric about 0: an error of either sign is held equally likely. Each is scaled as in
        Student's t, with four degrees of freedom for each stand-in beyond the first, and drawn in
        because the site is corrected with one reference more than a stand-in.

    Notes
    -----
    Of m stations that are alike and err independently, each is predicted by m - 1 others with a
    variance of 1 + 1/(m - 1), and the site by all m with 1 + 1/m: the ratio is 1 - 1/m^2.
    """
    rng = np.random.default_rng(seed)
    stand_ins = errors.shape[0]
    mass = np.isfinite(errors) * (1.0 if weight is None else weight)
    values = np.abs(errors)[mass > 0]
    share = mass[mass > 0] / mass.sum()
    order = np.argsort(values)
    position = np.cumsum(share[order]) - share[order] / 2
    # One draw from each of `count` equal slices, so that quantiles hardly vary with the seed
    even = (np.arange(count) + rng.random(count)) / count
    size = np.interp(even, position, values[order])
    sign = rng.permutation(np.where(np.arange(count) % 2 == 0, 1.0, -1.0))
    freedom = _freedom(stand_ins)
    stretch = np.sqrt((1 - 1 / stand_ins**2) * freedom / rng.chisquare(freedom, count))
    return np.asarray(rng.permutation(size) * sign * stretch)


def held_out_rms(target: Array, references: Array, weight: Array, blocks: ArrayLike) -> float:
    """Rms log error of a target's block means predicted from all its other blocks.

    Parameters
    ----------
    target : ndarray, shape (d,)
        Daily means [m/s].
    references : ndarray, shape (d, m)
        The same days of the references [m/s].
    weight : ndarray, shape (d,)
        Share of each day that was measured [1].
    blocks : array_like of int, shape (d,)
        Block of each day: months, or weeks.

    Notes
    -----
    Each block's mean is predicted by the mean of the references' ratios, block over rest.
    """
    label = np.unique(np.asarray(blocks), return_inverse=True)[1]
    columns = np.column_stack([target, references])
    mass = np.bincount(label, weight)
    total = np.column_stack([np.bincount(label, weight * c) for c in columns.T])
    kept = mass > 0.3 * mass.max()
    rest = (total.sum(axis=0) - total) / (mass.sum() - mass)[:, None]
    ratio = np.log(np.maximum(total[kept] / mass[kept, None], 1e-6) / rest[kept])
    return float(np.sqrt(np.mean((ratio[:, 0] - ratio[:, 1:].mean(axis=1)) ** 2)))


def persistent_mean_variance(count: int, autocorrelation: float) -> float:
    """Variance of a mean of `count` values over that of one, with memory of lag one.

    Notes
    -----
    (1/n) [1 + 2 sum over k of (1 - k/n) phi^k], the variance of an AR(1) mean.

    References
    ----------
    .. [1] Priestley 1981, Spectral Analysis and Time Series, section 5.3.
    """
    lags = np.arange(1, count)
    return float((1 + 2 * np.sum((1 - lags / count) * autocorrelation**lags)) / count)


def _freedom(stand_ins: int) -> float:
    """Degrees of freedom of Student's t; one stand-in alone counts as hardly any."""
    return FREEDOM_PER_STAND_IN * max(stand_ins - 1, LEAST_STAND_INS)


def _over_others(errors: Array, level: float) -> Array:
    """Size of each error over the half-width that the other stand-ins' errors make."""
    ratio = np.full(errors.shape, np.nan)
    at = (1 + level) / 2
    stretch = special.stdtrit(_freedom(errors.shape[0] - 1), at) / special.ndtri(at)
    for row in range(errors.shape[0]):
        others = np.abs(np.delete(errors, row, axis=0))
        if np.isfinite(others).any():
            half = stretch * float(np.nanquantile(others, level))
            ratio[row] = np.abs(errors[row]) / max(half, 1e-9)
    return ratio
