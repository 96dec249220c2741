"""Sampling error of a fit from blocks of its own record.

Here are the data-driven block length, indices of the stationary and circular block bootstraps,
counts of how often each block is drawn, and a bootstrap of sector lines that never goes back to
the hours: each day is reduced to sums once, a resample is a matrix product of counts and sums.

A bootstrap sees what the campaign saw. It knows nothing of a break in a reference or of the other
years, so it is one part of an uncertainty and never the whole.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels.frequency import sector_index

__all__ = [
    "SectorBootstrap",
    "block_counts",
    "block_length",
    "circular_block_indices",
    "resample_sector_lines",
    "stationary_indices",
]

Array = NDArray[np.float64]

#: Width of the speed bins that a long reference is reduced to for energy [m/s]. A curve read at
#: a bin's mean is wrong by its bend within the bin alone.
ENERGY_BIN = 0.1


class SectorBootstrap(NamedTuple):
    """Long-term statistics of resampled sector fits, each of shape (resamples,).

    Attributes
    ----------
    mean : ndarray
        Mean speed [m/s].
    mean_cube : ndarray
        Mean of the cube of the speed [m3/s3].
    energy : ndarray or None
        Mean power [W], or None without a power function.
    """

    mean: Array
    mean_cube: Array
    energy: Array | None


def block_length(values: ArrayLike) -> tuple[float, float]:
    """Block length suited to the mean of a series, from its own autocovariance.

    Parameters
    ----------
    values : array_like, shape (n,)
        In time order, no NaN.

    Returns
    -------
    stationary, circular : float
        Expected block length of the stationary, length of the circular bootstrap [steps].

    References
    ----------
    .. [1] Politis and White 2004, Econom. Rev. 23:53; correction by Patton, Politis and White
       2009, Econom. Rev. 28:372.
    """
    values = np.asarray(values, dtype=float)
    n = values.size
    if n < 10 or not np.all(np.isfinite(values)):
        raise ValueError(
            f"a block length needs at least 10 finite values, got {n} of which "
            f"{np.count_nonzero(np.isfinite(values))} are finite"
        )
    if np.ptp(values) == 0:
        return 1.0, 1.0
    about = values - values.mean()
    longest = float(np.ceil(min(3 * np.sqrt(n), n / 3)))
    run = max(5, int(np.log10(n)))  # lags in a row that must be insignificant
    most = min(int(np.ceil(np.sqrt(n))) + run, n - 2)
    padded = np.fft.rfft(about, 2 * n)
    covariance = np.fft.irfft(np.abs(padded) ** 2)[: most + 1] / n
    # Each correlation over the standard deviations of its two overlapping stretches
    squares = about**2
    head, tail = np.cumsum(squares), np.cumsum(squares[::-1])
    lags = np.arange(1, most + 1)
    rho = covariance[1:] * n / np.sqrt(head[n - 1 - lags] * tail[n - 1 - lags])
    quiet = np.abs(rho) < 2 * np.sqrt(np.log10(n) / n)
    # The first insignificant lag, as in the program that goes with the correction [1]
    first = [lag for lag in range(1, most - run + 1) if quiet[lag - 1 : lag - 1 + run].all()]
    reach = min(2 * first[0], most) if first else most
    k = np.arange(1, reach + 1)
    taper = np.where(k / reach <= 0.5, 1.0, 2 * (1 - k / reach))
    g = 2 * np.sum(taper * k * covariance[1 : reach + 1])
    variance = covariance[0] + 2 * np.sum(taper * covariance[1 : reach + 1])
    stationary = (g**2 / variance**2 * n) ** (1 / 3)
    circular = (2 * g**2 / (4 / 3 * variance**2) * n) ** (1 / 3)
    return (
        float(np.clip(stationary, 1.0, longest)),
        float(np.clip(circular, 1.0, longest)),
    )


def stationary_indices(
    count: int, length: float, resamples: int, *, seed: int = 0
) -> NDArray[np.int64]:
    """Indices of the stationary bootstrap, (resamples, count): blocks of geometric length.

    References
    ----------
    .. [1] Politis and Romano 1994, J. Am. Statist. Assoc. 89:1303.
    """
    rng = np.random.default_rng(seed)
    fresh = rng.random((resamples, count)) < 1 / max(length, 1.0)
    fresh[:, 0] = True
    start = rng.integers(count, size=(resamples, count))
    at = np.where(fresh, np.arange(count), 0)
    last = np.maximum.accumulate(at, axis=1)
    return (np.take_along_axis(start, last, axis=1) + np.arange(count) - last) % count


def circular_block_indices(
    count: int, length: float, resamples: int, *, seed: int = 0
) -> NDArray[np.int64]:
    """Indices of the circular block bootstrap, (resamples, count): blocks of one length.

    References
    ----------
    .. [1] Politis and Romano 1992, in Exploring the Limits of Bootstrap, Wiley.
    """
    size = int(np.clip(np.ceil(length), 1, count))
    rng = np.random.default_rng(seed)
    start = rng.integers(count, size=(resamples, -(-count // size)))
    index = (start[:, :, None] + np.arange(size)) % count
    return index.reshape(resamples, -1)[:, :count]


def block_counts(count: int, length: float, resamples: int, *, seed: int = 0) -> Array:
    """How often each of `count` steps is drawn in stationary resamples, (resamples, count)."""
    index = stationary_indices(count, length, resamples, seed=seed)
    flat = index + np.arange(resamples)[:, None] * count
    drawn = np.bincount(flat.ravel(), minlength=resamples * count)
    return drawn.reshape(resamples, count).astype(float)


def resample_sector_lines(
    reference: ArrayLike,
    direction: ArrayLike,
    site: ArrayLike,
    long_reference: ArrayLike,
    long_direction: ArrayLike,
    *,
    steps_per_block: int = 24,
    counts: ArrayLike,
    sector_count: int = 12,
    power: Callable[[Array], Array] | None = None,
) -> SectorBootstrap:
    """Mean, mean cube and energy of resampled least-squares lines by sector.

    Parameters
    ----------
    reference, direction, site : array_like, shape (n,)
        Concurrent speeds [m/s] and reference direction [deg].
    long_reference, long_direction : array_like, shape (N,)
        The reference's whole record.
    steps_per_block : int
        Steps reduced to one row of sums, a day of hours for instance [1].
    counts : array_like, shape (resamples, ceil(n / steps_per_block))
        How often each row is drawn: from `block_counts`.
    sector_count : int
        Of the reference's direction, the first centred on north [1].
    power : callable, optional
        Power [W] of an array of speeds [m/s].

    Returns
    -------
    SectorBootstrap

    Notes
    -----
    The same numbers as a loop of line fits over resampled hours: sums are exact for the lines, the
    mean and the cube (moments of the long record by sector); for energy the long record is held
    in bins of 0.1 m/s. Lines carry no scatter here and may fall below zero, as in such a loop;
    records without a direction are left out on both sides.
    """
    x, y = np.asarray(reference, dtype=float), np.asarray(site, dtype=float)
    sector = sector_index(direction, sector_count)
    kept = (sector >= 0) & np.isfinite(x) & np.isfinite(y)
    rows = -(-x.size // steps_per_block)
    cell = (np.arange(x.size) // steps_per_block * sector_count + sector)[kept]
    x, y = x[kept], y[kept]

    def summed(values: Array | None) -> Array:
        added = np.bincount(cell, values, rows * sector_count)
        return added.reshape(rows, sector_count).astype(float)

    drawn = np.asarray(counts, dtype=float)
    n, sx, sy, sxx, sxy = (drawn @ summed(v) for v in (np.ones_like(x), x, y, x * x, x * y))
    with np.errstate(divide="ignore", invalid="ignore"):
        slope = (n * sxy - sx * sy) / (n * sxx - sx**2)
        intercept = (sy - slope * sx) / n

    X = np.asarray(long_reference, dtype=float)
    long_sector = sector_index(long_direction, sector_count)
    known = (long_sector >= 0) & np.isfinite(X)
    X, long_sector = X[known], long_sector[known]
    moment = [np.bincount(long_sector, X**p, sector_count) / X.size for p in range(4)]
    mean = intercept @ moment[0] + slope @ moment[1]
    cube = (
        intercept**3 @ moment[0]
        + 3 * (intercept**2 * slope) @ moment[1]
        + 3 * (intercept * slope**2) @ moment[2]
        + slope**3 @ moment[3]
    )
    energy = None
    if power is not None:
        energy = _binned_energy(intercept, slope, X, long_sector, sector_count, power)
    return SectorBootstrap(mean, cube, energy)


def _binned_energy(
    intercept: Array,
    slope: Array,
    speed: Array,
    sector: NDArray[np.int64],
    sector_count: int,
    power: Callable[[Array], Array],
) -> Array:
    bins = np.floor(speed / ENERGY_BIN).astype(np.int64)
    width = int(bins.max()) + 1
    cell = sector * width + bins
    hours = np.bincount(cell, minlength=sector_count * width).reshape(sector_count, width)
    total = np.bincount(cell, speed, sector_count * width).reshape(sector_count, width)
    energy = np.zeros(intercept.shape[0])
    for s in range(sector_count):
        filled = np.flatnonzero(hours[s])
        if filled.size == 0:
            continue
        at = total[s, filled] / hours[s, filled]
        energy += power(intercept[:, s, None] + slope[:, s, None] * at) @ (
            hours[s, filled] / speed.size
        )
    return energy
