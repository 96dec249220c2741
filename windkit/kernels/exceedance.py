"""Uncertainty of an energy figure, and the levels exceeded with a stated probability.

Here: combining standard uncertainties, turning those of wind speed into those of energy, the
spread over one year or many, and P50 to P99. Not here: where each uncertainty comes from, and
drawing at random through a bent power response.

Every level assumes that energy is normally distributed about P50. That is a convention of the
trade, not a finding: P99 leans hardest on it. A bias of P50 is not part of the spread;
`shortfall_rate` says what a bias would do.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtr, ndtri

__all__ = [
    "ExceedanceTable",
    "combine_correlated",
    "combine_in_quadrature",
    "exceedance_level",
    "exceedance_table",
    "from_rectangular_bound",
    "from_triangular_bound",
    "shortfall_rate",
    "total_uncertainty",
    "wind_to_energy",
]

#: Slack for a correlation matrix that was rounded when it was printed.
_MATRIX_TOLERANCE = 1e-8


class ExceedanceTable(NamedTuple):
    """Levels of energy by years and probability.

    Attributes
    ----------
    years : ndarray
        Length of the period averaged over [years], shape (m,).
    probability : ndarray
        Probability that the level is exceeded [1], shape (n,): 0.9 is P90.
    standard_uncertainty : ndarray
        Standard uncertainty of the mean of each period [1], shape (m,).
    level : ndarray
        Levels in the unit of P50, shape (m, n).
    """

    years: NDArray[np.float64]
    probability: NDArray[np.float64]
    standard_uncertainty: NDArray[np.float64]
    level: NDArray[np.float64]


def from_rectangular_bound(bound: ArrayLike) -> NDArray[np.float64]:
    """Standard uncertainty of a value known only to lie within plus or minus `bound`.

    Parameters
    ----------
    bound : array_like
        Half width of the interval, in any unit.

    Returns
    -------
    float or ndarray
        Standard uncertainty in that unit; NaN in gives NaN out.

    References
    ----------
    .. [1] JCGM 100:2008 (GUM), 4.3.7.
    """
    return (_not_negative(bound, "bound") / np.sqrt(3))[()]


def from_triangular_bound(bound: ArrayLike) -> NDArray[np.float64]:
    """Standard uncertainty of a value within plus or minus `bound`, most likely in the middle.

    Parameters
    ----------
    bound : array_like
        Half width of the interval, in any unit.

    Returns
    -------
    float or ndarray
        Standard uncertainty in that unit; NaN in gives NaN out.

    References
    ----------
    .. [1] JCGM 100:2008 (GUM), 4.3.9.
    """
    return (_not_negative(bound, "bound") / np.sqrt(6))[()]


def wind_to_energy(standard_uncertainty: ArrayLike, sensitivity: ArrayLike) -> NDArray[np.float64]:
    """Standard uncertainty of energy that one of wind speed causes.

    Parameters
    ----------
    standard_uncertainty : array_like
        Of wind speed, as a fraction [1].
    sensitivity : array_like
        (dE/E)/(dv/v) of the study itself [1], see `energy.speed_to_energy_sensitivity`.

    Returns
    -------
    float or ndarray
        Of energy, as a fraction [1]; NaN in gives NaN out.
    """
    uncertainty = _not_negative(standard_uncertainty, "standard_uncertainty")
    return (_not_negative(sensitivity, "sensitivity") * uncertainty)[()]


def combine_in_quadrature(standard_uncertainty: ArrayLike) -> NDArray[np.float64]:
    """Combine standard uncertainties that have nothing to do with each other.

    Parameters
    ----------
    standard_uncertainty : array_like
        Components, all in one unit, shape (..., n).

    Returns
    -------
    float or ndarray
        Combined standard uncertainty, shape (...); NaN in gives NaN out.

    References
    ----------
    .. [1] JCGM 100:2008 (GUM), 5.1.2.
    """
    parts = np.atleast_1d(_not_negative(standard_uncertainty, "standard_uncertainty"))
    return np.sqrt((parts**2).sum(axis=-1))[()]


def combine_correlated(
    standard_uncertainty: ArrayLike, correlation: ArrayLike
) -> NDArray[np.float64]:
    """Combine standard uncertainties that move together.

    Parameters
    ----------
    standard_uncertainty : array_like
        Components, all in one unit, shape (..., n).
    correlation : array_like
        Correlation of the components [1], shape (n, n), ones on the diagonal.

    Returns
    -------
    float or ndarray
        Combined standard uncertainty, shape (...); NaN in gives NaN out.

    Raises
    ------
    ValueError
        If the matrix is not one of correlations, or no set of quantities could have it.

    Notes
    -----
    Fully correlated components add, uncorrelated ones combine in quadrature.

    References
    ----------
    .. [1] JCGM 100:2008 (GUM), 5.2.2, equation 16.
    """
    parts = np.atleast_1d(_not_negative(standard_uncertainty, "standard_uncertainty"))
    matrix = np.asarray(correlation, dtype=float)
    _check_correlation(matrix, parts.shape[-1])
    return np.sqrt(np.einsum("...i,ij,...j->...", parts, matrix, parts).clip(min=0.0))[()]


def total_uncertainty(
    static: ArrayLike, yearly: ArrayLike, years: ArrayLike
) -> NDArray[np.float64]:
    """Standard uncertainty of the mean of some years.

    Parameters
    ----------
    static : array_like
        What is the same in every year: measurement, models, the past mean [1].
    yearly : array_like
        What is drawn anew each year: windiness, availability [1].
    years : array_like
        Length of the period [years]; all three broadcast.

    Returns
    -------
    float or ndarray
        Standard uncertainty as a fraction [1]; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If an uncertainty is negative or the period is shorter than a year.

    Notes
    -----
    Only the yearly part shrinks, as one over the root of the years. It takes years as
    independent; where windy years come in runs, a long mean is less sure than this says.
    """
    u_static = _not_negative(static, "static")
    u_yearly = _not_negative(yearly, "yearly")
    n = np.asarray(years, dtype=float)
    if np.any(n < 1):
        raise ValueError(f"years must be at least 1, got {np.nanmin(n):g}")
    return np.sqrt(u_static**2 + u_yearly**2 / n)[()]


def exceedance_level(
    p50: ArrayLike, standard_uncertainty: ArrayLike, probability: ArrayLike
) -> NDArray[np.float64]:
    """Level that is exceeded with a stated probability, under a normal distribution.

    Parameters
    ----------
    p50 : array_like
        Central estimate, in any unit.
    standard_uncertainty : array_like
        As a fraction of `p50` [1].
    probability : array_like
        Of being exceeded [1]: 0.9 for P90; all three broadcast.

    Returns
    -------
    float or ndarray
        Level in the unit of `p50`; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a probability is not between 0 and 1, or an uncertainty is negative or above one.
    """
    uncertainty = _not_negative(standard_uncertainty, "standard_uncertainty")
    if np.any(uncertainty > 1):
        raise ValueError(
            f"standard_uncertainty is a fraction of P50, got {np.nanmax(uncertainty):g}; "
            f"write 0.08 for 8 %"
        )
    chance = _probability(probability)
    return (np.asarray(p50, dtype=float) * (1 - ndtri(chance) * uncertainty))[()]


def exceedance_table(
    p50: float,
    static: float,
    yearly: float,
    *,
    years: ArrayLike = (1, 10, 20),
    probabilities: ArrayLike = (0.5, 0.75, 0.9, 0.95, 0.99),
) -> ExceedanceTable:
    """Levels for several periods and probabilities at once.

    Parameters
    ----------
    p50 : float
        Central estimate, in any unit.
    static, yearly : float
        Standard uncertainties as fractions [1], see `total_uncertainty`.
    years : array_like
        Periods [years].
    probabilities : array_like
        Probabilities of being exceeded [1].

    Returns
    -------
    ExceedanceTable
        One row a period, one column a probability.
    """
    periods = np.atleast_1d(np.asarray(years, dtype=float))
    chances = np.atleast_1d(_probability(probabilities))
    spread = np.atleast_1d(total_uncertainty(static, yearly, periods))
    level = exceedance_level(p50, spread[:, np.newaxis], chances[np.newaxis, :])
    return ExceedanceTable(periods, chances, spread, level)


def shortfall_rate(
    standard_uncertainty: ArrayLike, probability: ArrayLike, *, bias: ArrayLike
) -> NDArray[np.float64]:
    """Share of projects that end below a stated level when P50 carries a bias.

    Parameters
    ----------
    standard_uncertainty : array_like
        Spread of the outcome, and the one the level was stated with, as a fraction of P50 [1].
    probability : array_like
        Probability that was stated for the level [1]: 0.9 for P90.
    bias : array_like
        Mean outcome less P50, as a fraction of P50 [1]: -0.05 when energy is 5 % short.

    Returns
    -------
    float or ndarray
        Share below the level [1]; one minus `probability` when the bias is zero.
    """
    uncertainty = _not_negative(standard_uncertainty, "standard_uncertainty")
    if np.any(uncertainty == 0):
        raise ValueError("standard_uncertainty must be above zero to have a shortfall rate")
    stated = ndtri(_probability(probability))
    return ndtr(-stated - np.asarray(bias, dtype=float) / uncertainty)[()]


def _not_negative(values: ArrayLike, name: str) -> NDArray[np.float64]:
    array = np.asarray(values, dtype=float)
    if np.any(array < 0):
        raise ValueError(f"{name} must not be negative, got {np.nanmin(array):g}")
    return array


def _probability(values: ArrayLike) -> NDArray[np.float64]:
    chance = np.asarray(values, dtype=float)
    if np.any(chance <= 0) or np.any(chance >= 1):
        met = np.nanmin(chance) if np.any(chance <= 0) else np.nanmax(chance)
        raise ValueError(
            f"a probability of being exceeded must lie between 0 and 1, got {met:g}; "
            f"write 0.9 for P90"
        )
    return chance


def _check_correlation(matrix: NDArray[np.float64], size: int) -> None:
    if matrix.shape != (size, size):
        raise ValueError(
            f"correlation has shape {matrix.shape} for {size} components; give a square matrix "
            f"with a row and a column for each"
        )
    if not (np.all(np.abs(matrix) <= 1) and np.allclose(np.diag(matrix), 1.0)):
        raise ValueError("correlation must hold values from -1 to 1, with ones on the diagonal")
    if not np.allclose(matrix, matrix.T):
        raise ValueError("correlation must be the same above and below its diagonal")
    lowest = float(np.linalg.eigvalsh(matrix)[0])
    if lowest < -_MATRIX_TOLERANCE * size:
        raise ValueError(
            f"no quantities can be correlated like this: the matrix has an eigenvalue of "
            f"{lowest:.3g}; lower the correlations that contradict each other"
        )
