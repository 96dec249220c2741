"""The Weibull distribution of wind speed: its figures, its curves, and fits to data.

Location is always zero. A calm cannot belong to the distribution (its density at zero is none),
so calms are kept apart as a point mass and given back with the fit. A fit describes a site;
energy belongs to the series or the frequency table, because a fit can misstate it by several
per cent. Extremes are not here.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from windkit.kernels._checks import floats, refuse, refuse_negative, refuse_not_positive

__all__ = [
    "RAYLEIGH_SHAPE",
    "WeibullFit",
    "fit_weibull",
    "fit_weibull_energy",
    "fit_weibull_moments",
    "fit_weibull_table",
    "rayleigh_scale",
    "weibull_cdf",
    "weibull_energy_pattern_factor",
    "weibull_mean",
    "weibull_mean_cube",
    "weibull_median",
    "weibull_mode",
    "weibull_most_energetic_speed",
    "weibull_pdf",
    "weibull_power_density",
    "weibull_quantile",
    "weibull_skewness",
    "weibull_standard_deviation",
]

#: Shape at which the Weibull distribution is a Rayleigh distribution [1].
RAYLEIGH_SHAPE = 2.0

#: Shapes a fit may return [1]; wind is 1 to 4, and outside these data are no wind.
_LEAST_SHAPE, _GREATEST_SHAPE = 0.2, 50.0

_FIT_REMEDY = "a distribution of wind has a positive scale and shape"


@dataclass(frozen=True, slots=True)
class WeibullFit:
    """A fitted distribution: a Weibull of the moving air and a point mass of calms.

    Attributes
    ----------
    weibull_scale : float
        A [m/s].
    weibull_shape : float
        k [1].
    calm_share : float
        Share of records at or below the calm threshold [1]; they are not part of A and k, so
        the mean of all records is ``(1 - calm_share) * weibull_mean(A, k)``.
    count : int or None
        Records the fit stands on, calms included; None where only figures were given.
    """

    weibull_scale: float
    weibull_shape: float
    calm_share: float = 0.0
    count: int | None = None


# ---------------------------------------------------------------- figures of a distribution


def weibull_mean(weibull_scale: ArrayLike, weibull_shape: ArrayLike) -> NDArray[np.float64]:
    """Mean speed, A Gamma(1 + 1/k).

    Parameters
    ----------
    weibull_scale : array_like
        A [m/s], any shape that broadcasts with `weibull_shape`.
    weibull_shape : array_like
        k [1].

    Returns
    -------
    float or ndarray
        Mean [m/s] in the broadcast shape; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a scale or shape is not positive.

    References
    ----------
    .. [1] C. G. Justus et al. 1978, Journal of Applied Meteorology 17: 350.
    """
    A, k = _checked_parameters(weibull_scale, weibull_shape)
    return A * special.gamma(1.0 + 1.0 / k)


def weibull_standard_deviation(
    weibull_scale: ArrayLike, weibull_shape: ArrayLike
) -> NDArray[np.float64]:
    """Standard deviation of speed [m/s]; parameters and errors as `weibull_mean`."""
    A, k = _checked_parameters(weibull_scale, weibull_shape)
    return A * np.sqrt(special.gamma(1.0 + 2.0 / k) - special.gamma(1.0 + 1.0 / k) ** 2)


def weibull_median(weibull_scale: ArrayLike, weibull_shape: ArrayLike) -> NDArray[np.float64]:
    """Speed exceeded half of the time [m/s]; parameters and errors as `weibull_mean`."""
    A, k = _checked_parameters(weibull_scale, weibull_shape)
    return A * np.log(2.0) ** (1.0 / k)


def weibull_mode(weibull_scale: ArrayLike, weibull_shape: ArrayLike) -> NDArray[np.float64]:
    """Most frequent speed [m/s], zero for a shape up to one; as `weibull_mean` otherwise."""
    A, k = _checked_parameters(weibull_scale, weibull_shape)
    return A * np.maximum(1.0 - 1.0 / k, 0.0) ** (1.0 / k)


def weibull_most_energetic_speed(
    weibull_scale: ArrayLike, weibull_shape: ArrayLike
) -> NDArray[np.float64]:
    """Speed that carries most energy [m/s], A (1 + 2/k)^(1/k); as `weibull_mean` otherwise."""
    A, k = _checked_parameters(weibull_scale, weibull_shape)
    return A * (1.0 + 2.0 / k) ** (1.0 / k)


def weibull_mean_cube(weibull_scale: ArrayLike, weibull_shape: ArrayLike) -> NDArray[np.float64]:
    """Mean of the cubed speed [m3/s3], A^3 Gamma(1 + 3/k); as `weibull_mean` otherwise."""
    A, k = _checked_parameters(weibull_scale, weibull_shape)
    return A**3 * special.gamma(1.0 + 3.0 / k)


def weibull_power_density(
    weibull_scale: ArrayLike, weibull_shape: ArrayLike, air_density: ArrayLike
) -> NDArray[np.float64]:
    """Mean power density of the wind.

    Parameters
    ----------
    weibull_scale, weibull_shape : array_like
        A [m/s] and k [1].
    air_density : array_like
        Mean air density [kg/m3].

    Returns
    -------
    float or ndarray
        Power density [W/m2] in the broadcast shape.

    Raises
    ------
    ValueError
        If a scale, shape or density is not positive.
    """
    rho = refuse_not_positive("air_density", air_density, "kg/m3", "mask such values")
    return 0.5 * rho * weibull_mean_cube(weibull_scale, weibull_shape)


def weibull_energy_pattern_factor(
    weibull_scale: ArrayLike, weibull_shape: ArrayLike
) -> NDArray[np.float64]:
    """Mean cube over cubed mean [1]: 6/pi at k = 2; the scale only sets the shape of the result.

    Parameters and errors as `weibull_mean`.
    """
    A, k = _checked_parameters(weibull_scale, weibull_shape)
    factor = special.gamma(1.0 + 3.0 / k) / special.gamma(1.0 + 1.0 / k) ** 3
    return factor + 0.0 * A


def weibull_skewness(weibull_scale: ArrayLike, weibull_shape: ArrayLike) -> NDArray[np.float64]:
    """Skewness [1]; the scale only sets the shape of the result; as `weibull_mean` otherwise."""
    A, k = _checked_parameters(weibull_scale, weibull_shape)
    g1, g2, g3 = (special.gamma(1.0 + order / k) for order in (1.0, 2.0, 3.0))
    return (g3 - 3.0 * g1 * g2 + 2.0 * g1**3) / (g2 - g1**2) ** 1.5 + 0.0 * A


# ---------------------------------------------------------------- curves


def weibull_pdf(
    wind_speed: ArrayLike, weibull_scale: ArrayLike, weibull_shape: ArrayLike
) -> NDArray[np.float64]:
    """Probability density of wind speed.

    Parameters
    ----------
    wind_speed : array_like
        Wind speed [m/s], not negative.
    weibull_scale, weibull_shape : array_like
        A [m/s] and k [1]; all three broadcast.

    Returns
    -------
    float or ndarray
        Density [s/m]; infinite at zero speed for a shape below one.

    Raises
    ------
    ValueError
        If a speed is negative, or a scale or shape not positive.
    """
    A, k = _checked_parameters(weibull_scale, weibull_shape)
    x = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values") / A
    with np.errstate(divide="ignore"):
        return k / A * x ** (k - 1.0) * np.exp(-(x**k))


def weibull_cdf(
    wind_speed: ArrayLike, weibull_scale: ArrayLike, weibull_shape: ArrayLike
) -> NDArray[np.float64]:
    """Share of time below a wind speed [1]; parameters and errors as `weibull_pdf`."""
    A, k = _checked_parameters(weibull_scale, weibull_shape)
    v = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    return -np.expm1(-((v / A) ** k))


def weibull_quantile(
    probability: ArrayLike, weibull_scale: ArrayLike, weibull_shape: ArrayLike
) -> NDArray[np.float64]:
    """Speed below which a given share of the time lies; undoes `weibull_cdf`.

    Parameters
    ----------
    probability : array_like
        Share of time below the speed [1], 0 to 1.
    weibull_scale, weibull_shape : array_like
        A [m/s] and k [1]; all three broadcast.

    Returns
    -------
    float or ndarray
        Wind speed [m/s]; infinite at a probability of one.

    Raises
    ------
    ValueError
        If a probability is outside 0 to 1, or a scale or shape not positive.
    """
    A, k = _checked_parameters(weibull_scale, weibull_shape)
    q = floats(probability)
    refuse((q < 0.0) | (q > 1.0), q, "probability must be between 0 and 1 [1]", "divide percent")
    with np.errstate(divide="ignore"):
        return A * (-np.log1p(-q)) ** (1.0 / k)


def rayleigh_scale(mean_speed: ArrayLike) -> NDArray[np.float64]:
    """Scale A of the Rayleigh distribution (k = 2) with a given mean.

    Parameters
    ----------
    mean_speed : array_like
        Mean wind speed [m/s].

    Returns
    -------
    float or ndarray
        A [m/s], 2 mean / sqrt(pi).

    Raises
    ------
    ValueError
        If a mean is not positive.
    """
    mean = refuse_not_positive("mean_speed", mean_speed, "m/s", "a distribution needs wind")
    return mean / special.gamma(1.0 + 1.0 / RAYLEIGH_SHAPE)


# ---------------------------------------------------------------- fits


def fit_weibull(wind_speed: ArrayLike, *, calm_threshold: float = 0.0) -> WeibullFit:
    """Fit a Weibull distribution to a series by maximum likelihood, calms apart.

    Parameters
    ----------
    wind_speed : array_like
        Wind speeds [m/s]; NaN is skipped, all else counts.
    calm_threshold : float
        Speed [m/s] at or below which a record is a calm.

    Returns
    -------
    WeibullFit
        Scale and shape of the moving air, share of calms, number of records.

    Raises
    ------
    ValueError
        If a speed is negative, or fewer than two different speeds are above the threshold.

    Notes
    -----
    Location is zero. Calms are a point mass: leaving them in makes the likelihood zero, leaving
    them out of the total makes energy too high. The cut at `calm_threshold` is not modelled, so
    keep it at the start speed of the sensor or below.

    References
    ----------
    .. [1] A. C. Cohen 1965, Technometrics 7: 579, the likelihood equation for the shape.
    """
    from scipy.optimize import brentq

    v = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values before the fit")
    v = v[~np.isnan(v)].reshape(-1)
    moving = v[v > calm_threshold]
    if moving.size < 2 or np.ptp(moving) == 0.0:
        raise ValueError(
            f"a Weibull fit needs at least two different wind speeds above the calm threshold "
            f"{calm_threshold:g} m/s, got {np.unique(moving).size} in {v.size} records; take a "
            f"longer period or a larger sector"
        )
    # Over the largest speed, powers stay within range whatever the shape.
    largest = float(np.max(moving))
    x = moving / largest
    log_x = np.log(x)
    mean_log = float(np.mean(log_x))

    def likelihood_equation(k: float) -> float:
        power = x**k
        return float(np.sum(power * log_x) / np.sum(power) - 1.0 / k - mean_log)

    if likelihood_equation(_GREATEST_SHAPE) < 0.0 or likelihood_equation(_LEAST_SHAPE) > 0.0:
        raise ValueError(
            f"the wind speeds between {np.min(moving):g} and {largest:g} m/s would need a Weibull "
            f"shape outside {_LEAST_SHAPE:g} to {_GREATEST_SHAPE:g}; look for a stuck sensor"
        )
    k = float(brentq(likelihood_equation, _LEAST_SHAPE, _GREATEST_SHAPE, xtol=1e-10))
    A = largest * float(np.mean(x**k)) ** (1.0 / k)
    return WeibullFit(A, k, calm_share=1.0 - moving.size / v.size, count=int(v.size))


def fit_weibull_table(speed_edges: ArrayLike, share: ArrayLike) -> WeibullFit:
    """Fit a Weibull distribution to binned speeds by maximum likelihood.

    Parameters
    ----------
    speed_edges : array_like
        Bin edges [m/s], increasing, one more than bins; the first is not negative.
    share : array_like
        Share of time, or hours, or counts in each bin. Only their proportions matter.

    Returns
    -------
    WeibullFit
        Scale and shape; no calms apart (they are in the first bin) and no count.

    Raises
    ------
    ValueError
        If edges do not increase, numbers do not match, a share is negative, or fewer than two
        bins hold anything.

    Notes
    -----
    The likelihood of bin j is F(v_j) - F(v_j-1), so wide bins are treated exactly instead of
    being put at their centre.
    """
    from scipy.optimize import minimize

    edges = refuse_negative("speed_edges", speed_edges, "m/s", "start at zero")
    weight = refuse_negative("share", share, "1", "a share of time is zero or more")
    if edges.ndim != 1 or weight.ndim != 1 or edges.size != weight.size + 1:
        raise ValueError(
            f"speed_edges must have one value more than share, got {edges.shape} and "
            f"{weight.shape}; give both edges of every bin"
        )
    if not np.all(np.diff(edges) > 0.0):
        raise ValueError(f"speed_edges must increase, got {edges.tolist()}; sort the bins")
    if np.count_nonzero(weight) < 2 or not np.isfinite(weight).all():
        raise ValueError(
            f"a Weibull fit needs at least two bins that hold a share, got "
            f"{np.count_nonzero(weight)}; use narrower bins and leave no share missing"
        )
    filled = weight > 0.0
    low, high = edges[:-1][filled], edges[1:][filled]
    weight = weight[filled] / weight.sum()

    def negative_log_likelihood(log_parameters: NDArray[np.float64]) -> float:
        A, k = np.exp(log_parameters)
        t_low, t_high = (low / A) ** k, (high / A) ** k
        # log(exp(-t_low) - exp(-t_high)) without losing the far tail.
        log_share = -t_low + np.log(np.maximum(-np.expm1(t_low - t_high), 1e-300))
        return -float(np.sum(weight * log_share))

    centre = 0.5 * (low + high)
    mean = float(np.sum(weight * centre))
    spread = float(np.sqrt(np.sum(weight * (centre - mean) ** 2)))
    start = fit_weibull_moments(mean, max(spread, 0.05 * mean))
    found = minimize(
        negative_log_likelihood,
        np.log([start.weibull_scale, start.weibull_shape]),
        method="Nelder-Mead",
        options={"xatol": 1e-9, "fatol": 1e-13, "maxiter": 2000},
    )
    A, k = np.exp(found.x)
    return WeibullFit(float(A), float(k))


def fit_weibull_moments(mean_speed: float, speed_standard_deviation: float) -> WeibullFit:
    """Weibull distribution with a given mean and standard deviation, solved exactly.

    Parameters
    ----------
    mean_speed : float
        Mean wind speed [m/s].
    speed_standard_deviation : float
        Standard deviation of wind speed [m/s].

    Returns
    -------
    WeibullFit
        Scale and shape; no calms apart and no count.

    Raises
    ------
    ValueError
        If a figure is not positive, or their ratio belongs to no wind.
    """
    mean, spread = _checked_pair("speed_standard_deviation", mean_speed, speed_standard_deviation)

    def excess(k: float) -> float:
        return float(weibull_standard_deviation(1.0, k) / weibull_mean(1.0, k)) - spread / mean

    k = _solved_shape(excess, "speed_standard_deviation over mean_speed", spread / mean)
    return WeibullFit(float(mean / weibull_mean(1.0, k)), k)


def fit_weibull_energy(mean_speed: float, mean_cube: float) -> WeibullFit:
    """Weibull distribution with a given mean and mean cube, so that its energy is right.

    Parameters
    ----------
    mean_speed : float
        Mean wind speed [m/s].
    mean_cube : float
        Mean of the cubed wind speed [m3/s3].

    Returns
    -------
    WeibullFit
        Scale and shape; no calms apart and no count.

    Raises
    ------
    ValueError
        If a figure is not positive, or their ratio belongs to no wind.
    """
    mean, cube = _checked_pair("mean_cube", mean_speed, mean_cube)

    def excess(k: float) -> float:
        return float(np.log(weibull_energy_pattern_factor(1.0, k) / (cube / mean**3)))

    k = _solved_shape(excess, "mean_cube over mean_speed cubed", cube / mean**3)
    return WeibullFit(float(mean / weibull_mean(1.0, k)), k)


# ---------------------------------------------------------------- helpers


def _checked_parameters(
    weibull_scale: ArrayLike, weibull_shape: ArrayLike
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    A = refuse_not_positive("weibull_scale", weibull_scale, "m/s", _FIT_REMEDY)
    k = refuse_not_positive("weibull_shape", weibull_shape, "1", _FIT_REMEDY)
    return A, k


def _checked_pair(name: str, mean_speed: float, other: float) -> tuple[float, float]:
    mean = float(refuse_not_positive("mean_speed", mean_speed, "m/s", _FIT_REMEDY))
    value = float(refuse_not_positive(name, other, "m/s or its power", _FIT_REMEDY))
    if not (np.isfinite(mean) and np.isfinite(value)):
        raise ValueError(f"mean_speed and {name} must be known, got {mean:g} and {value:g}")
    return mean, value


def _solved_shape(excess: Callable[[float], float], name: str, value: float) -> float:
    """Root of a falling function of the shape."""
    from scipy.optimize import brentq

    if excess(_LEAST_SHAPE) < 0.0 or excess(_GREATEST_SHAPE) > 0.0:
        raise ValueError(
            f"no Weibull shape between {_LEAST_SHAPE:g} and {_GREATEST_SHAPE:g} has {name} "
            f"{value:g}; check that both figures come from the same series and units"
        )
    return float(brentq(excess, _LEAST_SHAPE, _GREATEST_SHAPE, xtol=1e-12))
