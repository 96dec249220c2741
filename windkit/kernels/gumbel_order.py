"""Moments of the ordered values of a Gumbel sample: what best linear estimates are made from.

Only the standard Gumbel distribution (location 0, scale 1) is here, computed by quadrature and
kept for the sample sizes asked for. The estimates themselves are in `extremes`.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy import special

__all__ = ["MOST_ORDERED_VALUES", "best_linear_weights", "gumbel_order_moments"]

#: Largest sample whose ordered values are computed here; 400 takes a second or two, once.
MOST_ORDERED_VALUES = 400

#: Grid of the Gumbel variate. Both tails of every density used are below 1e-16 outside, and the
#: trapezoid rule on a smooth density that vanishes at both ends converges exponentially.
_GRID = np.arange(-5.0, 42.0, 0.08)
_STEP = 0.08


@lru_cache(maxsize=32)
def gumbel_order_moments(count: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Means and covariances of the ordered values of a standard Gumbel sample.

    Parameters
    ----------
    count : int
        Sample size, 2 to `MOST_ORDERED_VALUES`.

    Returns
    -------
    mean : ndarray
        Expected ordered values, ascending, shape (count,); read-only.
    covariance : ndarray
        Their covariances, shape (count, count); read-only.

    Raises
    ------
    ValueError
        If the sample size is out of range.

    Notes
    -----
    The i-th of the j smallest uniforms is the j-th times an independent Beta(i, j - i) variate.
    In Gumbel variates y and s of both factors the product has the variate -ln(e^-y + e^-s), so
    every mixed moment is a smooth double integral over the plane.

    References
    ----------
    .. [1] H. A. David and H. N. Nagaraja 2003, Order Statistics, ch. 2 and 3.
    """
    if not 2 <= count <= MOST_ORDERED_VALUES:
        raise ValueError(
            f"ordered Gumbel values are computed for 2 to {MOST_ORDERED_VALUES} maxima, got "
            f"{count}; fit a larger sample by maximum likelihood or moments"
        )
    ordered = np.stack([_weights(j, count - j + 1) for j in range(1, count + 1)])
    mean = ordered @ _GRID
    second = np.diag(ordered @ _GRID**2)
    # Rows: variate of the larger value; columns: variate of the ratio to the smaller one.
    product = -np.logaddexp(-_GRID[:, None], -_GRID[None, :])
    for j in range(2, count + 1):
        ratios = np.stack([_weights(i, j - i) for i in range(1, j)], axis=1)
        mixed = (ordered[j - 1] * _GRID) @ product @ ratios
        second[: j - 1, j - 1] = second[j - 1, : j - 1] = mixed
    covariance = second - np.outer(mean, mean)
    mean.flags.writeable = covariance.flags.writeable = False
    return mean, covariance


@lru_cache(maxsize=32)
def best_linear_weights(count: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Weights on ascending maxima that estimate location and scale without bias, least variance.

    Parameters
    ----------
    count : int
        Sample size, 2 to `MOST_ORDERED_VALUES`.

    Returns
    -------
    location_weights, scale_weights : ndarray
        Shape (count,); the first sum to one, the second to zero; read-only.

    Raises
    ------
    ValueError
        If the sample size is out of range.

    References
    ----------
    .. [1] J. Lieblein 1974, Efficient Methods of Extreme-Value Methodology, NBSIR 74-602.
    """
    mean, covariance = gumbel_order_moments(count)
    design = np.stack([np.ones(count), mean], axis=1)
    solved = np.linalg.solve(covariance, design)
    weights = np.linalg.solve(design.T @ solved, solved.T)
    weights.flags.writeable = False
    return weights[0], weights[1]


def _weights(a: int, b: int) -> NDArray[np.float64]:
    """Quadrature weights of the Gumbel variate of a Beta(a, b) uniform."""
    decay = np.exp(-_GRID)
    log_complement = np.log(-np.expm1(-decay))  # ln(1 - u) for u = exp(-exp(-y))
    log_density = -a * decay + (b - 1.0) * log_complement - _GRID - special.betaln(a, b)
    return _STEP * np.exp(log_density)
