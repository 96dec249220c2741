"""Fits of the Gumbel and the generalised extreme value distribution to maxima.

Each method is a function of its own and says how sure it is, so that several can stand side by
side. What a fit means for a return period is in `extremes`; how maxima are picked from a series
is in `extreme_samples`.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from windkit.kernels._checks import floats, refuse
from windkit.kernels.extremes import ExtremeFit
from windkit.kernels.gumbel_order import (
    MOST_ORDERED_VALUES,
    best_linear_weights,
    gumbel_order_moments,
)

__all__ = [
    "gev_maximum_likelihood",
    "gumbel_best_linear",
    "gumbel_l_moments",
    "gumbel_least_squares",
    "gumbel_maximum_likelihood",
    "gumbel_moments",
]

#: Skewness and kurtosis of any Gumbel distribution [1].
_SKEWNESS, _KURTOSIS = 1.139_547_099_404_648_6, 5.4
#: Scale of a Gumbel distribution over its standard deviation [1].
_SCALE_OVER_SPREAD = np.sqrt(6.0) / np.pi
#: Fewest maxima any fit takes; a useful number is ten and more (common practice).
_FEWEST = 3


def gumbel_moments(maxima: ArrayLike) -> ExtremeFit:
    """Gumbel distribution with the mean and standard deviation of the maxima.

    Parameters
    ----------
    maxima : array_like
        Independent maxima, such as the highest wind speed of each year [m/s].

    Returns
    -------
    ExtremeFit
        With the textbook's standard errors.

    Raises
    ------
    ValueError
        If there are fewer than three maxima, one is missing, or all are alike.

    References
    ----------
    .. [1] E. J. Gumbel 1958, Statistics of Extremes; E. Simiu and R. H. Scanlan, Wind Effects on
       Structures: variance s^2 (1 + 1.1396 K + 1.1 K^2) / n.
    """
    x = _checked_maxima(maxima)
    mean, spread = float(np.mean(x)), float(np.std(x, ddof=1))
    b = _SCALE_OVER_SPREAD * spread
    of_moments = (spread**2 / x.size) * np.array(
        [[1.0, _SKEWNESS / 2.0], [_SKEWNESS / 2.0, (_KURTOSIS - 1.0) / 4.0]]
    )
    step = np.array([[1.0, -np.euler_gamma * _SCALE_OVER_SPREAD], [0.0, _SCALE_OVER_SPREAD]])
    covariance = _padded(step @ of_moments @ step.T)
    return ExtremeFit(mean - np.euler_gamma * b, b, 0.0, covariance, x.size, "Gumbel, moments")


def gumbel_l_moments(maxima: ArrayLike) -> ExtremeFit:
    """Gumbel distribution with the first two L-moments of the maxima; parameters as moments.

    Parameters
    ----------
    maxima : array_like
        Independent maxima, at most `gumbel_order.MOST_ORDERED_VALUES`.

    Returns
    -------
    ExtremeFit
        Its covariance is exact for the sample size, given a Gumbel distribution.

    Raises
    ------
    ValueError
        As `gumbel_moments`.

    References
    ----------
    .. [1] J. R. M. Hosking 1990, Journal of the Royal Statistical Society B 52: 105.
    """
    x = _checked_maxima(maxima)
    n = x.size
    rank = np.arange(n) / (n - 1.0)
    scale_weights = (2.0 * rank - 1.0) / (n * np.log(2.0))
    location_weights = 1.0 / n - np.euler_gamma * scale_weights
    return _linear(x, location_weights, scale_weights, "Gumbel, L-moments")


def gumbel_least_squares(maxima: ArrayLike) -> ExtremeFit:
    """Gumbel distribution by the straight line through ordered maxima on probability paper.

    Parameters
    ----------
    maxima : array_like
        Independent maxima, at most `gumbel_order.MOST_ORDERED_VALUES`.

    Returns
    -------
    ExtremeFit
        Ordered maxima regressed on -ln(-ln(m / (n + 1))); covariance as `gumbel_l_moments`.

    Raises
    ------
    ValueError
        As `gumbel_moments`.

    Notes
    -----
    These plotting positions make the scale too large: some 9 % at 30 maxima. The method is
    here to be compared with, because older reports use it.

    References
    ----------
    .. [1] E. J. Gumbel 1958, Statistics of Extremes, ch. 1.
    """
    x = _checked_maxima(maxima)
    n = x.size
    y = -np.log(-np.log(np.arange(1, n + 1) / (n + 1.0)))
    centred = y - np.mean(y)
    scale_weights = centred / np.sum(centred**2)
    location_weights = 1.0 / n - np.mean(y) * scale_weights
    return _linear(x, location_weights, scale_weights, "Gumbel, least squares on paper")


def gumbel_best_linear(maxima: ArrayLike) -> ExtremeFit:
    """Gumbel distribution by Lieblein's best linear unbiased estimate from ordered maxima.

    Parameters
    ----------
    maxima : array_like
        Independent maxima, at most `gumbel_order.MOST_ORDERED_VALUES`.

    Returns
    -------
    ExtremeFit
        Unbiased, and as sure as a linear estimate can be; covariance as `gumbel_l_moments`.

    Raises
    ------
    ValueError
        As `gumbel_moments`.

    References
    ----------
    .. [1] J. Lieblein 1974, Efficient Methods of Extreme-Value Methodology, NBSIR 74-602.
    """
    x = _checked_maxima(maxima)
    _refuse_large(x.size)
    return _linear(x, *best_linear_weights(x.size), "Gumbel, best linear unbiased (Lieblein)")


def gumbel_maximum_likelihood(maxima: ArrayLike) -> ExtremeFit:
    """Gumbel distribution by maximum likelihood.

    Parameters
    ----------
    maxima : array_like
        Independent maxima.

    Returns
    -------
    ExtremeFit
        With the covariance of large samples, inverse of Fisher's information.

    Raises
    ------
    ValueError
        As `gumbel_moments`.

    References
    ----------
    .. [1] N. L. Johnson, S. Kotz and N. Balakrishnan 1995, Continuous Univariate Distributions,
       vol. 2, ch. 22.
    """
    from scipy.optimize import brentq

    x = _checked_maxima(maxima)
    spread = float(np.std(x))
    z = (x - np.mean(x)) / spread

    def likelihood_equation(b: float) -> float:
        weight = np.exp(-(z - np.min(z)) / b)
        return float(b + np.sum(z * weight) / np.sum(weight))

    b = float(brentq(likelihood_equation, 1e-2, 10.0, xtol=1e-12))
    u = float(-b * (special.logsumexp(-z / b) - np.log(z.size)))
    scale = spread * b
    g = 1.0 - np.euler_gamma
    information = np.array([[1.0, -g], [-g, np.pi**2 / 6.0 + g**2]]) * x.size / scale**2
    return ExtremeFit(
        location=float(np.mean(x)) + spread * u,
        scale=scale,
        shape=0.0,
        covariance=_padded(np.asarray(np.linalg.inv(information), dtype=np.float64)),
        count=x.size,
        method="Gumbel, maximum likelihood",
    )


def gev_maximum_likelihood(maxima: ArrayLike) -> ExtremeFit:
    """Generalised extreme value distribution by maximum likelihood.

    Parameters
    ----------
    maxima : array_like
        Independent maxima.

    Returns
    -------
    ExtremeFit
        With the inverse of the observed information as covariance; NaN for a shape of -0.5 and
        below, where it does not hold.

    Raises
    ------
    ValueError
        As `gumbel_moments`; if the likelihood has no maximum with a shape between -1 and 1.

    Notes
    -----
    Thirty maxima leave the shape unsure by 0.1 to 0.2: compare with Gumbel before you trust a
    bounded tail, since it gives the lower wind.

    References
    ----------
    .. [1] S. Coles 2001, An Introduction to Statistical Modeling of Extreme Values, section 3.3.
    """
    from scipy.optimize import minimize

    x = _checked_maxima(maxima)
    mean, spread = float(np.mean(x)), float(np.std(x))
    z = (x - mean) / spread

    def negative_log_likelihood(parameters: NDArray[np.float64]) -> float:
        u, b, xi = (float(value) for value in parameters)
        inside = 1.0 + xi * (z - u) / b
        if b <= 0.0 or np.any(inside <= 0.0) or abs(xi) >= 1.0:
            return np.inf
        # The reduced variate, whose limit for no shape is (z - u) / b.
        y = (z - u) / b if abs(xi) < 1e-8 else np.log(inside) / xi
        return float(z.size * np.log(b) + np.sum((1.0 + xi) * y + np.exp(-y)))

    start = gumbel_l_moments(z) if z.size <= MOST_ORDERED_VALUES else gumbel_moments(z)
    best = None
    for xi in (-0.1, 0.1):
        found = minimize(
            negative_log_likelihood,
            np.array([start.location, start.scale, xi]),
            method="Nelder-Mead",
            options={"xatol": 1e-9, "fatol": 1e-11, "maxiter": 5000, "maxfev": 5000},
        )
        if best is None or found.fun < best.fun:
            best = found
    assert best is not None
    u, b, xi = (float(value) for value in best.x)
    if not best.success or abs(xi) > 0.99:
        raise ValueError(
            f"the likelihood of a generalised extreme value distribution has no maximum for these "
            f"{x.size} maxima (shape went to {xi:.2f}); use a Gumbel fit or more years"
        )
    covariance = np.full((3, 3), np.nan)
    if xi > -0.5:
        to_units = np.diag([spread, spread, 1.0])
        covariance = to_units @ np.linalg.inv(_hessian(negative_log_likelihood, best.x)) @ to_units
    return ExtremeFit(
        location=mean + spread * u,
        scale=spread * b,
        shape=xi,
        covariance=covariance,
        count=x.size,
        method="generalised extreme value, maximum likelihood",
    )


def _checked_maxima(maxima: ArrayLike) -> NDArray[np.float64]:
    x = floats(maxima)
    if x.ndim != 1 or x.size < _FEWEST:
        raise ValueError(
            f"an extreme value fit needs a series of at least {_FEWEST} maxima, got shape "
            f"{x.shape}; take storm maxima if there are few years"
        )
    refuse(~np.isfinite(x), x, "maxima must all be known", "leave out blocks without a maximum")
    if np.ptp(x) == 0.0:
        raise ValueError(
            f"maxima must differ, got {x.size} times {x[0]:g}; look for a stuck sensor"
        )
    return np.sort(x)


def _refuse_large(count: int) -> None:
    if count > MOST_ORDERED_VALUES:
        raise ValueError(
            f"this method takes at most {MOST_ORDERED_VALUES} maxima, got {count}; fit by maximum "
            f"likelihood or moments"
        )


def _linear(
    ordered: NDArray[np.float64],
    location_weights: NDArray[np.float64],
    scale_weights: NDArray[np.float64],
    method: str,
) -> ExtremeFit:
    """Fit that is linear in ordered maxima; its covariance follows from theirs."""
    _refuse_large(ordered.size)
    scale = float(scale_weights @ ordered)
    weights = np.stack([location_weights, scale_weights])
    _, covariance = gumbel_order_moments(ordered.size)
    return ExtremeFit(
        location=float(location_weights @ ordered),
        scale=scale,
        shape=0.0,
        covariance=_padded(scale**2 * weights @ covariance @ weights.T),
        count=ordered.size,
        method=method,
    )


def _padded(covariance: NDArray[np.float64]) -> NDArray[np.float64]:
    """Covariance of location and scale with a row and column of zeros for the shape."""
    return np.pad(covariance, (0, 1))


def _hessian(
    function: Callable[[NDArray[np.float64]], float], at: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Second derivatives by central differences, steps fit for values of order one."""
    steps = np.diag(np.full(at.size, 1e-4))
    hessian = np.empty((at.size, at.size))
    for i, e in enumerate(steps):
        for j, d in enumerate(steps):
            hessian[i, j] = (
                function(at + e + d)
                - function(at + e - d)
                - function(at - e + d)
                + function(at - e - d)
            ) / (4e-8)
    return hessian
