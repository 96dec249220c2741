"""Power curves: power at a speed and density, and mean power over a wind climate, exactly.

Here: the curve itself, the change of speed that stands in for a change of density, mean power
under a Weibull distribution and over a table of speeds, the bin formula of IEC 61400-12-1, and
the check of a curve against the Betz limit. Not here: years and capacity factors (`energy`),
losses (`losses`), the stream a rotor stands in (`stream`).

Between its points a curve is a set of straight lines. Every mean below is the exact integral of
those lines, so it depends on no step width. Two switching speeds bound them:

- cut-in is judged on the density-normalised speed, because thin air starts a rotor later;
- cut-out is judged on the speed as it blows, because a controller stops the machine on its
  anemometer, which does not know the density. The cut-out speed itself counts as running.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import gamma, gammainc

from windkit.kernels.air import density_speed_factor
from windkit.kernels.constants import STANDARD_AIR_DENSITY
from windkit.kernels.energy import HOURS_PER_YEAR
from windkit.kernels.stream import BETZ_LIMIT, stream_power

__all__ = [
    "CoefficientPeak",
    "PowerCurve",
    "annual_energy_iec",
    "betz_check",
    "density_normalised_speed",
    "mean_power_table",
    "mean_power_weibull",
    "power_at",
]

#: Width of the first bin below the first point in the IEC bin formula [m/s], IEC 61400-12-1.
_IEC_FIRST_BIN = 0.5
#: Fewest points that are a curve rather than a line.
_FEWEST_POINTS = 3
#: Highest speed a curve is believed to be tabulated for [m/s]; above it the unit is in doubt.
_HIGHEST_PLAUSIBLE_SPEED = 60.0
#: Slack for the sum of a frequency table, which is printed and read back with rounding.
_SHARE_TOLERANCE = 1e-6


class CoefficientPeak(NamedTuple):
    """Where a curve is at its most efficient.

    Attributes
    ----------
    power_coefficient : float
        Highest power coefficient over the points of the curve [1].
    wind_speed : float
        Speed of that point [m/s].
    betz_share : float
        That coefficient as a share of the Betz limit [1].
    """

    power_coefficient: float
    wind_speed: float
    betz_share: float


@dataclass(frozen=True, eq=False)
class PowerCurve:
    """Power of one turbine against wind speed, at one air density.

    Parameters
    ----------
    wind_speed : array_like
        Speeds at hub height [m/s], shape (n,), increasing, at least three.
    power : array_like
        Power at those speeds [W], shape (n,), finite and not negative.
    air_density : float
        Density the curve is stated for [kg/m3].
    cut_in, cut_out : float, optional
        First and last running speed [m/s], inside the table. Left out: its first and last point.

    Raises
    ------
    ValueError
        If the points do not make a curve; the message names the value and the remedy.
    """

    wind_speed: NDArray[np.float64]
    power: NDArray[np.float64]
    air_density: float = STANDARD_AIR_DENSITY
    cut_in: float | None = None
    cut_out: float | None = None

    def __init__(
        self,
        wind_speed: ArrayLike,
        power: ArrayLike,
        air_density: float = STANDARD_AIR_DENSITY,
        cut_in: float | None = None,
        cut_out: float | None = None,
    ) -> None:
        speed = np.array(wind_speed, dtype=float)
        watts = np.array(power, dtype=float)
        _check_points(speed, watts)
        if not 0.5 < air_density < 1.6:
            raise ValueError(
                f"air_density of a power curve must lie between 0.5 and 1.6 kg/m3, got "
                f"{air_density:g}; give the density the curve was stated for"
            )
        first = speed[0] if cut_in is None else float(cut_in)
        last = speed[-1] if cut_out is None else float(cut_out)
        if not speed[0] <= first < last <= speed[-1]:
            raise ValueError(
                f"cut_in {first:g} and cut_out {last:g} m/s must lie in this order inside the "
                f"table, which runs from {speed[0]:g} to {speed[-1]:g} m/s; add points to the "
                f"table or correct the switching speeds"
            )
        speed.setflags(write=False)
        watts.setflags(write=False)
        object.__setattr__(self, "wind_speed", speed)
        object.__setattr__(self, "power", watts)
        object.__setattr__(self, "air_density", float(air_density))
        object.__setattr__(self, "cut_in", first)
        object.__setattr__(self, "cut_out", last)

    @property
    def rated_power(self) -> float:
        """Highest power of the curve [W]."""
        return float(self.power.max())


def density_normalised_speed(
    wind_speed: ArrayLike,
    air_density: ArrayLike,
    *,
    reference_air_density: float = STANDARD_AIR_DENSITY,
) -> NDArray[np.float64]:
    """Speed that carries the same power at the density of the curve.

    Parameters
    ----------
    wind_speed : array_like
        Speed at the site [m/s].
    air_density : array_like
        Density at the site and hub height [kg/m3]; broadcasts with `wind_speed`.
    reference_air_density : float
        Density the power curve is stated for [kg/m3].

    Returns
    -------
    float or ndarray
        Normalised speed [m/s]; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a density is not positive.

    Notes
    -----
    For pitch-regulated machines only: a stall-regulated one scales its power instead. Power at
    the site is the curve at this speed, so rated power is not exceeded in dense air.

    References
    ----------
    .. [1] IEC 61400-12-1, normalisation of active power control machines.
    """
    factor = density_speed_factor(air_density, reference_air_density=reference_air_density)
    return (np.asarray(wind_speed, dtype=float) * factor)[()]


def power_at(
    curve: PowerCurve, wind_speed: ArrayLike, air_density: ArrayLike | None = None
) -> NDArray[np.float64]:
    """Power of the turbine at each speed, by straight lines between the points.

    Parameters
    ----------
    curve : PowerCurve
        The turbine.
    wind_speed : array_like
        Speed at hub height [m/s], any shape.
    air_density : array_like, optional
        Density at hub height [kg/m3]; broadcasts with `wind_speed`. Left out: that of the curve.

    Returns
    -------
    float or ndarray
        Power [W]; zero below cut-in and above cut-out, NaN where an input is NaN.

    Raises
    ------
    ValueError
        If a speed is negative or a density is not positive.

    Notes
    -----
    Density acts on the speed, see `density_normalised_speed`. In dense air a normalised speed can
    pass the end of the table while the turbine still runs; it then gives the last power.
    """
    speed = np.asarray(wind_speed, dtype=float)
    if np.any(speed < 0):
        raise ValueError(
            f"wind_speed must not be negative, got {np.nanmin(speed):g} m/s; "
            f"mask codes for missing values before the curve is used"
        )
    density = curve.air_density if air_density is None else air_density
    normalised = density_normalised_speed(speed, density, reference_air_density=curve.air_density)
    speeds, watts = _running_points(curve)
    power = np.interp(normalised, speeds, watts)
    stopped = (normalised < speeds[0]) | (speed > speeds[-1])
    return np.where(stopped, 0.0, power)[()]


def mean_power_weibull(
    curve: PowerCurve,
    weibull_scale: ArrayLike,
    weibull_shape: ArrayLike,
    *,
    air_density: ArrayLike | None = None,
) -> NDArray[np.float64]:
    """Mean power where speeds follow a Weibull distribution, integrated exactly.

    Parameters
    ----------
    curve : PowerCurve
        The turbine.
    weibull_scale, weibull_shape : array_like
        A [m/s] and k [1] at hub height; broadcast with each other and with `air_density`.
    air_density : array_like, optional
        Density at hub height [kg/m3]. Left out: that of the curve.

    Returns
    -------
    float or ndarray
        Mean power [W] in the broadcast shape; NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a scale, a shape or a density is not positive.

    Notes
    -----
    With S the probability that a speed is exceeded and G(v) the integral of S from 0 to v,
    integration by parts over straight lines from v_1 (cut-in) to v_n (cut-out) gives

    mean P = sum over i of (P_i+1 - P_i)/(v_i+1 - v_i) [G(v_i+1) - G(v_i)] + P_1 S(v_1) - P_n S(v_n)

    and for Weibull G(v) = A Gamma(1 + 1/k) P(1/k, (v/A)^k), P being the regularised lower
    incomplete gamma function.

    References
    ----------
    .. [1] NIST Digital Library of Mathematical Functions, 8.2.4 (P) and 5.5.1 (Gamma).
    """
    scale, shape, density = np.broadcast_arrays(
        np.asarray(weibull_scale, dtype=float),
        np.asarray(weibull_shape, dtype=float),
        np.asarray(curve.air_density if air_density is None else air_density, dtype=float),
    )
    for name, values in (("weibull_scale", scale), ("weibull_shape", shape)):
        if np.any(values <= 0):
            raise ValueError(f"{name} must be positive, got {np.nanmin(values):g}")
    # The curve stays as it is and the wind is normalised: v s is Weibull with scale A s.
    factor = density_normalised_speed(1.0, density, reference_air_density=curve.air_density)
    scale = (scale * factor)[..., np.newaxis]
    shape = shape[..., np.newaxis]
    nodes, watts = _running_nodes(curve, factor)

    reduced = (nodes / scale) ** shape
    exceeded = np.exp(-reduced)
    area = scale * gamma(1 + 1 / shape) * gammainc(1 / shape, reduced)
    width = np.diff(nodes)
    slope = np.divide(np.diff(watts), width, out=np.zeros_like(width), where=width > 0)
    rising = (slope * np.diff(area)).sum(axis=-1)
    return (rising + watts[..., 0] * exceeded[..., 0] - watts[..., -1] * exceeded[..., -1])[()]


def mean_power_table(
    curve: PowerCurve,
    speed_edges: ArrayLike,
    speed_share: ArrayLike,
    *,
    air_density: ArrayLike | None = None,
) -> NDArray[np.float64]:
    """Mean power over a table of speeds, exact for speeds spread evenly inside each bin.

    Parameters
    ----------
    curve : PowerCurve
        The turbine.
    speed_edges : array_like
        Edges of the speed bins at hub height [m/s], shape (n + 1,), increasing from 0 or more.
    speed_share : array_like
        Share of all time in each bin [1], shape (..., n), calms in the bin that starts at 0.
        Leading axes can be sectors or sites. A row that sums to less than one gives its part of
        the mean power, so the rows of a sector table add up to the whole.
    air_density : array_like, optional
        Density at hub height [kg/m3], broadcasting with the leading axes. Left out: the curve's.

    Returns
    -------
    float or ndarray
        Mean power [W], shape (...); NaN in gives NaN out.

    Raises
    ------
    ValueError
        If edges do not increase, shapes do not agree, a share is negative or a row is above one.
    """
    edges = np.asarray(speed_edges, dtype=float)
    share = np.asarray(speed_share, dtype=float)
    if edges.ndim != 1 or np.any(np.diff(edges) <= 0) or edges[0] < 0:
        raise ValueError(
            "speed_edges must be one row of increasing speeds from 0 or more [m/s]; "
            "give n + 1 edges for n bins"
        )
    if share.ndim == 0 or share.shape[-1] != edges.size - 1:
        raise ValueError(
            f"speed_share has shape {share.shape} but {edges.size} edges bound "
            f"{edges.size - 1} bins; its last axis must hold one share a bin"
        )
    if np.any(share < 0) or np.any(share.sum(axis=-1) > 1 + _SHARE_TOLERANCE):
        raise ValueError(
            f"speed_share must not be negative nor sum to more than 1 in a row, got a smallest "
            f"share {np.nanmin(share):g} and a largest sum {np.nanmax(share.sum(axis=-1)):g}; "
            f"divide counts by the number of all records"
        )
    density = np.asarray(curve.air_density if air_density is None else air_density, dtype=float)
    factor = density_normalised_speed(1.0, density, reference_air_density=curve.air_density)
    bounds = edges * np.asarray(factor)[..., np.newaxis]
    mean_in_bin = np.diff(_power_integral(curve, bounds, factor)) / np.diff(bounds)
    return (share * mean_in_bin).sum(axis=-1)[()]


def annual_energy_iec(
    curve: PowerCurve, mean_speed: ArrayLike, *, hours_per_year: float = HOURS_PER_YEAR
) -> NDArray[np.float64]:
    """Annual energy by the bin formula of IEC 61400-12-1, for comparing printed curves.

    Parameters
    ----------
    curve : PowerCurve
        The turbine; its points are the bins as they stand.
    mean_speed : array_like
        Yearly mean speed at hub height [m/s] of a Rayleigh distribution.
    hours_per_year : float
        Hours [h].

    Returns
    -------
    float or ndarray
        Annual energy [Wh]; NaN in gives NaN out.

    Notes
    -----
    The formula counts half the first point's power in a bin 0.5 m/s wide below it, which the
    machine does not give; `mean_power_weibull` does not. Use this one to meet printed tables.

    References
    ----------
    .. [1] IEC 61400-12-1, annual energy production: N_h sum [F(V_i) - F(V_i-1)] (P_i-1 + P_i)/2.
    """
    mean = np.asarray(mean_speed, dtype=float)[..., np.newaxis]
    if np.any(mean <= 0):
        raise ValueError(f"mean_speed must be positive [m/s], got {np.nanmin(mean):g}")
    speed = np.concatenate([[curve.wind_speed[0] - _IEC_FIRST_BIN], curve.wind_speed])
    watts = np.concatenate([[0.0], curve.power])
    cumulative = 1 - np.exp(-np.pi / 4 * (np.maximum(speed, 0.0) / mean) ** 2)
    in_bin = np.diff(cumulative, axis=-1)
    return (hours_per_year * (in_bin * (watts[:-1] + watts[1:]) / 2).sum(axis=-1))[()]


def betz_check(curve: PowerCurve, rotor_diameter: float) -> CoefficientPeak:
    """Hold a curve against the Betz limit and say where it comes closest.

    Parameters
    ----------
    curve : PowerCurve
        The turbine.
    rotor_diameter : float
        Rotor diameter [m].

    Returns
    -------
    CoefficientPeak
        Highest power coefficient, its speed, and its share of the limit.

    Raises
    ------
    ValueError
        If a point gives more than 16/27 of the power in the stream through the rotor.

    Notes
    -----
    Judged at the points, which are what was claimed; not on the lines between them.

    References
    ----------
    .. [1] A. Betz, Das Maximum der theoretisch moeglichen Ausnuetzung des Windes, 1920.
    """
    moving = curve.wind_speed > 0
    speed, watts = curve.wind_speed[moving], curve.power[moving]
    coefficient = watts / stream_power(speed, curve.air_density, rotor_diameter)
    best = int(np.argmax(coefficient))
    peak = CoefficientPeak(
        float(coefficient[best]), float(speed[best]), float(coefficient[best] / BETZ_LIMIT)
    )
    if peak.power_coefficient > BETZ_LIMIT:
        raise ValueError(
            f"the power curve gives {watts[best] / 1000:g} kW at {peak.wind_speed:g} m/s, a power "
            f"coefficient of {peak.power_coefficient:.3f} for a rotor of {rotor_diameter:g} m; "
            f"the Betz limit is {BETZ_LIMIT:.3f}. Check the unit of power, the rotor diameter "
            f"and the air density of the curve"
        )
    return peak


def _check_points(speed: NDArray[np.float64], watts: NDArray[np.float64]) -> None:
    if speed.ndim != 1 or speed.shape != watts.shape or speed.size < _FEWEST_POINTS:
        raise ValueError(
            f"a power curve needs two rows of equal length with at least {_FEWEST_POINTS} points, "
            f"got wind_speed of shape {speed.shape} and power of shape {watts.shape}"
        )
    if not (np.all(np.isfinite(speed)) and np.all(np.isfinite(watts))):
        at = int(np.flatnonzero(~(np.isfinite(speed) & np.isfinite(watts)))[0])
        raise ValueError(
            f"point {at + 1} of the power curve is not a number (speed {speed[at]:g}, power "
            f"{watts[at]:g}); remove the point or give its value"
        )
    steps = np.diff(speed)
    if np.any(steps <= 0):
        at = int(np.flatnonzero(steps <= 0)[0])
        raise ValueError(
            f"wind_speed of a power curve must increase, but {speed[at]:g} is followed by "
            f"{speed[at + 1]:g} m/s; sort the points and keep each speed once"
        )
    if speed[0] < 0 or speed[-1] > _HIGHEST_PLAUSIBLE_SPEED:
        raise ValueError(
            f"wind_speed of a power curve must lie in 0 to {_HIGHEST_PLAUSIBLE_SPEED:g} m/s, got "
            f"{speed[0]:g} to {speed[-1]:g}; convert it to m/s first"
        )
    if np.any(watts < 0):
        at = int(np.argmin(watts))
        raise ValueError(
            f"power must not be negative, got {watts[at]:g} W at {speed[at]:g} m/s; set own use "
            f"at standstill to zero here and enter it as an electrical loss"
        )


def _running_points(curve: PowerCurve) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Points from cut-in to cut-out, both included, interpolated where they are not points."""
    assert curve.cut_in is not None  # set when the curve was made
    assert curve.cut_out is not None
    inside = (curve.wind_speed > curve.cut_in) & (curve.wind_speed < curve.cut_out)
    speeds = np.concatenate([[curve.cut_in], curve.wind_speed[inside], [curve.cut_out]])
    return speeds, np.interp(speeds, curve.wind_speed, curve.power)


def _running_nodes(
    curve: PowerCurve, factor: ArrayLike
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Nodes of the curve in normalised speed, ending where the real speed meets cut-out.

    Thin air (factor < 1) ends the lines early: nodes past the end close up on it, with no width.
    Dense air (factor > 1) holds the last power from the last point to the end.
    """
    speeds, watts = _running_points(curve)
    end = speeds[-1] * np.asarray(factor, dtype=float)[..., np.newaxis]
    nodes = np.minimum(np.append(speeds, np.inf), end)
    return nodes, np.interp(nodes, speeds, watts)


def _power_integral(
    curve: PowerCurve, bounds: NDArray[np.float64], factor: ArrayLike
) -> NDArray[np.float64]:
    """Integral of power over normalised speed from 0 to each of `bounds` [W m/s]."""
    speeds, watts = _running_points(curve)
    at_points = np.concatenate([[0.0], np.cumsum(np.diff(speeds) * (watts[:-1] + watts[1:]) / 2)])
    end = speeds[-1] * np.asarray(factor, dtype=float)[..., np.newaxis]
    upper = np.clip(bounds, speeds[0], end)
    left = np.clip(np.searchsorted(speeds, upper, side="right") - 1, 0, speeds.size - 1)
    power_upper = np.interp(upper, speeds, watts)
    return at_points[left] + (upper - speeds[left]) * (watts[left] + power_upper) / 2
