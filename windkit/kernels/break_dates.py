"""How well the date of a break is known.

Here is the range of positions that a series allows for a break already found. The tests that find
it stand in `breaks`, the comparison of several references in `homogeneity`.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from windkit.kernels.breaks import LEAST_SEGMENT

__all__ = ["break_range"]


def break_range(
    values: ArrayLike, autocorrelation: float, *, level: float = 0.9
) -> tuple[int, int]:
    """Positions between which the one break of a stretch lies with a chance of `level` or more.

    Parameters
    ----------
    values : array_like, shape (n,)
        From the break before to the break after, in time order, no NaN, at least 13 values.
    autocorrelation : float
        Of lag one [1], below 1.
    level : float
        Least chance that the range holds the break [1].

    Returns
    -------
    first, last : int
        Indices of the first value after the break, at the earliest and at the latest.

    Raises
    ------
    ValueError
        If there are too few values, or some are not finite.

    Notes
    -----
    All positions whose likelihood ratio to the best stays below -2 ln(1 - sqrt(level)), 5.94 at
    90 %. Memory makes the values tell less, by (1 + phi) / (1 - phi), which the limit is raised
    by. The set is filled up to a range, so it holds more than `level`: 95 to 99 % at 90 % on
    simulated breaks of one to three standard deviations.

    References
    ----------
    .. [1] Hansen 2000, Econometrica 68:575, table I (the limit, from memory).
    """
    values = np.asarray(values, dtype=float)
    n = values.size
    if n <= 2 * LEAST_SEGMENT or not np.all(np.isfinite(values)):
        raise ValueError(
            f"the range of a break needs more than {2 * LEAST_SEGMENT} finite values, got {n} of "
            f"which {np.count_nonzero(np.isfinite(values))} are finite"
        )
    about = values - values.mean()
    k = np.arange(LEAST_SEGMENT, n - LEAST_SEGMENT + 1)
    explained = np.cumsum(about)[k - 1] ** 2 * (1 / k + 1 / (n - k))
    squares = np.maximum(np.sum(about**2) - explained, 1e-12)
    ratio = n * np.log(squares / squares.min())
    limit = -2 * np.log(1 - np.sqrt(level)) * (1 + autocorrelation) / (1 - autocorrelation)
    held = k[ratio <= limit]
    return int(held[0]), int(held[-1])
