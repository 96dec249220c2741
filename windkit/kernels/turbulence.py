"""Turbulence of a site: intensity by speed and sector, wakes added, fatigue-weighted, and gusts.

Everything starts from a mean and a standard deviation of wind speed over ten minutes. What the
design classes of the standards allow is in `design_classes`; extreme winds are in `extremes`.
No trend is taken out of the ten minutes and no sensor is corrected here.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import floats, refuse, refuse_negative, refuse_not_positive
from windkit.kernels.frequency import sector_index, speed_bin_edges

__all__ = [
    "REPRESENTATIVE_FACTOR",
    "TurbulenceTable",
    "effective_turbulence",
    "gust_factor",
    "turbulence_in_sectors",
    "turbulence_in_speed_bins",
    "turbulence_intensity",
    "wake_standard_deviation_frandsen_2005",
    "wake_turbulence_frandsen_2007",
]

#: Standard deviations from the mean to the 90 % value [1], as IEC 61400-1 rounds it.
REPRESENTATIVE_FACTOR = 1.28

#: Share of time a neighbour's wake hits the turbine [1], IEC 61400-1, effective turbulence.
_WAKE_PROBABILITY = 0.06
#: Neighbours that the sum over directions allows for [1], same place.
_MOST_NEIGHBOURS = 8
#: Factor and averaging time [1], [s] of Wieringa's gust factor.
_GUST_FACTOR, _GUST_REFERENCE_TIME = 0.42, 3600.0


@dataclass(frozen=True, slots=True, eq=False)
class TurbulenceTable:
    """Turbulence intensity by speed bin, for all directions or for each sector.

    Attributes
    ----------
    speed_edges : ndarray
        Bin edges [m/s], shape (bins + 1,), bins centred on whole multiples of their width.
    count : ndarray of int
        Records in each bin, shape (bins,) or (sector_count, bins).
    mean : ndarray
        Mean turbulence intensity [1], same shape; NaN in an empty bin.
    spread : ndarray
        Standard deviation of turbulence intensity [1], same shape; NaN below two records.
    representative : ndarray
        Mean plus 1.28 spreads [1], the 90 % value of IEC 61400-1, same shape.
    """

    speed_edges: NDArray[np.float64]
    count: NDArray[np.intp]
    mean: NDArray[np.float64]
    spread: NDArray[np.float64]
    representative: NDArray[np.float64]


def turbulence_intensity(
    wind_speed: ArrayLike, speed_standard_deviation: ArrayLike
) -> NDArray[np.float64]:
    """Standard deviation over mean of wind speed.

    Parameters
    ----------
    wind_speed : array_like
        Mean wind speeds [m/s], over ten minutes as a rule.
    speed_standard_deviation : array_like
        Standard deviations over the same periods [m/s].

    Returns
    -------
    float or ndarray
        Turbulence intensity [1]; NaN in a calm. NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a value is negative, or a standard deviation is above twice the mean of a wind of
        more than 2 m/s, which no wind has.
    """
    v = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    sigma = refuse_negative(
        "speed_standard_deviation", speed_standard_deviation, "m/s", "mask such values"
    )
    intensity = np.asarray(sigma / np.where(v > 0.0, v, np.nan))
    refuse(
        np.asarray((v > 2.0) & (intensity > 2.0)),
        intensity,
        "speed_standard_deviation must not be above twice wind_speed, their ratio",
        "check that it is a standard deviation in m/s and not a percentage or a maximum",
    )
    return intensity[()]


def turbulence_in_speed_bins(
    wind_speed: ArrayLike, speed_standard_deviation: ArrayLike, *, bin_width: float = 1.0
) -> TurbulenceTable:
    """Mean, spread and 90 % value of turbulence intensity in each speed bin, all directions.

    Parameters
    ----------
    wind_speed, speed_standard_deviation : array_like
        Ten-minute means and standard deviations [m/s], one dimension; records with a missing
        part, and calms, are left out.
    bin_width : float
        Width of the speed bins [m/s].

    Returns
    -------
    TurbulenceTable
        Arrays of shape (bins,).

    Raises
    ------
    ValueError
        As `turbulence_intensity`; if lengths differ or nothing is known.

    Notes
    -----
    Statistics are of the intensity of each record, so the change of speed inside a bin does not
    count as scatter. The 90 % value is a normal one; ten-minute intensity is skewed.

    References
    ----------
    .. [1] IEC 61400-1, normal turbulence model: representative value, mean + 1.28 spread.
    """
    v, intensity = _known_records(wind_speed, speed_standard_deviation)
    return _table(v, intensity, np.zeros(v.size, dtype=np.intp), 1, bin_width, squeeze=True)


def turbulence_in_sectors(
    wind_speed: ArrayLike,
    speed_standard_deviation: ArrayLike,
    wind_direction: ArrayLike,
    *,
    sector_count: int = 12,
    bin_width: float = 1.0,
) -> TurbulenceTable:
    """Mean, spread and 90 % value of turbulence intensity in each speed bin of each sector.

    Parameters
    ----------
    wind_speed, speed_standard_deviation : array_like
        As for `turbulence_in_speed_bins`.
    wind_direction : array_like
        Directions [deg, from]; records without one are left out.
    sector_count : int
        Number of sectors, the first centred on north.
    bin_width : float
        Width of the speed bins [m/s].

    Returns
    -------
    TurbulenceTable
        Arrays of shape (sector_count, bins). Count before you read: most cells are thin.

    Raises
    ------
    ValueError
        As `turbulence_in_speed_bins`; if a direction is outside 0 to 360.
    """
    v, intensity = _known_records(wind_speed, speed_standard_deviation)
    direction = floats(wind_direction)
    if direction.shape != np.shape(wind_speed):
        raise ValueError(
            f"wind_direction must have the length of wind_speed, got {direction.shape} and "
            f"{np.shape(wind_speed)}; join them on time first"
        )
    sector = sector_index(direction, sector_count)
    whole = floats(wind_speed)
    sector = sector[~np.isnan(turbulence_intensity(whole, speed_standard_deviation))]
    directed = sector >= 0
    if not directed.any():
        raise ValueError("wind_direction must be known for one record at least; check the vane")
    return _table(
        v[directed], intensity[directed], sector[directed], sector_count, bin_width, squeeze=False
    )


def wake_turbulence_frandsen_2007(
    distance_diameters: ArrayLike,
    thrust_coefficient: ArrayLike,
    turbulence_intensity: ArrayLike,
) -> NDArray[np.float64]:
    """Turbulence intensity in the wake of one neighbour, from its thrust coefficient.

    Parameters
    ----------
    distance_diameters : array_like
        Distance to the neighbour over its rotor diameter [1].
    thrust_coefficient : array_like
        Thrust coefficient of the neighbour [1].
    turbulence_intensity : array_like
        Ambient turbulence intensity [1]; all three broadcast.

    Returns
    -------
    float or ndarray
        Turbulence intensity in the wake [1], the ambient one included.

    Raises
    ------
    ValueError
        If a distance or coefficient is not positive, or an intensity negative or a percentage.

    References
    ----------
    .. [1] S. Frandsen 2007, Riso-R-1188; IEC 61400-1:2019, annex E.
    """
    d = refuse_not_positive("distance_diameters", distance_diameters, "1", "leave it out of itself")
    Ct = refuse_not_positive("thrust_coefficient", thrust_coefficient, "1", "a still rotor: skip")
    I0 = _checked_intensity(turbulence_intensity)
    return np.sqrt(1.0 / (1.5 + 0.8 * d / np.sqrt(Ct)) ** 2 + I0**2)


def wake_standard_deviation_frandsen_2005(
    wind_speed: ArrayLike,
    speed_standard_deviation: ArrayLike,
    distance_diameters: ArrayLike,
) -> NDArray[np.float64]:
    """Standard deviation of speed in the wake of one neighbour of unknown thrust.

    Parameters
    ----------
    wind_speed : array_like
        Wind speed [m/s].
    speed_standard_deviation : array_like
        Ambient standard deviation [m/s].
    distance_diameters : array_like
        Distance to the neighbour over its rotor diameter [1]; all three broadcast.

    Returns
    -------
    float or ndarray
        Standard deviation in the wake [m/s], the ambient one included.

    Raises
    ------
    ValueError
        If a speed or standard deviation is negative or a distance not positive.

    References
    ----------
    .. [1] IEC 61400-1:2005, annex D: the thrust is taken as 7 m/s over the wind speed.
    """
    V = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    sigma = refuse_negative(
        "speed_standard_deviation", speed_standard_deviation, "m/s", "mask such values"
    )
    d = refuse_not_positive("distance_diameters", distance_diameters, "1", "leave it out of itself")
    return np.sqrt(0.9 * V**2 / (1.5 + 0.3 * d * np.sqrt(V)) ** 2 + sigma**2)


def effective_turbulence(
    turbulence_intensity: ArrayLike,
    wake_turbulence: ArrayLike,
    woehler_exponent: float,
    *,
    wake_probability: float = _WAKE_PROBABILITY,
) -> NDArray[np.float64]:
    """Turbulence intensity that would tire a part as much as the ambient and all wakes do.

    Parameters
    ----------
    turbulence_intensity : array_like
        Ambient turbulence intensity [1], shape (...).
    wake_turbulence : array_like
        Intensity in the wake of each neighbour [1], shape (..., neighbours), at most eight.
    woehler_exponent : float
        Exponent of the material's fatigue curve [1]: about 4 for steel, 10 for composites.
    wake_probability : float
        Share of time each wake hits [1].

    Returns
    -------
    float or ndarray
        Effective turbulence intensity [1], shape (...).

    Raises
    ------
    ValueError
        If there are more than eight neighbours, an exponent is below one, a probability is out
        of range, or an intensity is negative or a percentage.

    References
    ----------
    .. [1] S. Frandsen 2007, Riso-R-1188; IEC 61400-1, effective turbulence with p_w = 0.06.
    """
    I0 = _checked_intensity(turbulence_intensity)
    Iw = np.atleast_1d(_checked_intensity(wake_turbulence))
    m, N, p = woehler_exponent, Iw.shape[-1], wake_probability
    if N > _MOST_NEIGHBOURS:
        raise ValueError(
            f"wake_turbulence must have at most {_MOST_NEIGHBOURS} neighbours, got {N}; take the "
            f"nearest in each direction"
        )
    if not m >= 1.0:
        raise ValueError(f"woehler_exponent must be at least 1, got {m:g}; steel has about 4")
    if not 0.0 <= N * p <= 1.0:
        raise ValueError(
            f"wake_probability must keep all wakes below the whole time, got {N} x {p:g}; the "
            f"standard has {_WAKE_PROBABILITY:g}"
        )
    return ((1.0 - N * p) * I0**m + p * np.sum(Iw**m, axis=-1)) ** (1.0 / m)


def gust_factor(turbulence_intensity: ArrayLike, gust_duration: ArrayLike) -> NDArray[np.float64]:
    """Highest short mean within an hour over the hourly mean.

    Parameters
    ----------
    turbulence_intensity : array_like
        Turbulence intensity [1].
    gust_duration : array_like
        Duration the gust is averaged over [s], up to an hour; both broadcast.

    Returns
    -------
    float or ndarray
        Gust factor [1], at least one.

    Raises
    ------
    ValueError
        If a duration is not within an hour, or an intensity is negative or a percentage.

    References
    ----------
    .. [1] J. Wieringa 1973, Boundary-Layer Meteorology 3: 424; T. Burton et al. 2001, Wind
       Energy Handbook, eq. 2.40.
    """
    I = _checked_intensity(turbulence_intensity)  # noqa: E741
    t = refuse_not_positive("gust_duration", gust_duration, "s", "3 s is usual")
    refuse(
        t > _GUST_REFERENCE_TIME,
        t,
        f"gust_duration must be at most {_GUST_REFERENCE_TIME:g} s",
        "the factor is over the hourly mean",
    )
    return 1.0 + _GUST_FACTOR * I * np.log(_GUST_REFERENCE_TIME / t)


def _known_records(
    wind_speed: ArrayLike, speed_standard_deviation: ArrayLike
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    v, sigma = floats(wind_speed), floats(speed_standard_deviation)
    if v.ndim != 1 or v.shape != sigma.shape:
        raise ValueError(
            f"wind_speed and speed_standard_deviation must be series of one length, got "
            f"{v.shape} and {sigma.shape}; join them on time first"
        )
    intensity = turbulence_intensity(v, sigma)
    known = ~np.isnan(intensity)
    if not known.any():
        raise ValueError(
            f"turbulence needs at least one record with wind and a standard deviation, got none "
            f"of {v.size}; check the exclusions"
        )
    return v[known], intensity[known]


def _table(
    v: NDArray[np.float64],
    intensity: NDArray[np.float64],
    row: NDArray[np.intp],
    rows: int,
    bin_width: float,
    *,
    squeeze: bool,
) -> TurbulenceTable:
    edges = speed_bin_edges(float(v.max()), bin_width)
    bins = edges.size - 1
    cell = row * bins + np.searchsorted(edges, v, side="right") - 1
    count = np.bincount(cell, minlength=rows * bins)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = np.bincount(cell, intensity, minlength=rows * bins) / count
        squares = np.bincount(cell, (intensity - mean[cell]) ** 2, minlength=rows * bins)
        spread = np.where(count > 1, np.sqrt(squares / (count - 1.0)), np.nan)
    shape = (bins,) if squeeze else (rows, bins)
    mean, spread, count = mean.reshape(shape), spread.reshape(shape), count.reshape(shape)
    return TurbulenceTable(edges, count, mean, spread, mean + REPRESENTATIVE_FACTOR * spread)


def _checked_intensity(turbulence_intensity: ArrayLike) -> NDArray[np.float64]:
    array = refuse_negative("turbulence intensity", turbulence_intensity, "1", "mask such values")
    refuse(
        array > 2.0,
        array,
        "turbulence intensity must be a fraction, at most 2",
        "looks like percent: divide by 100",
    )
    return array
