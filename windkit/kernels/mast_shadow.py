"""What a mast does to its own anemometers: expected from geometry, seen in pairs of sensors.

The flow slows in front of a mast, speeds up beside it and is useless behind it. The expectation
(lattice or tube, length of boom) says how long a boom should be and which directions to
distrust; the ratio of a pair by direction says what happened. Which sensor is used where is a
decision made elsewhere, and written down there.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import floats, refuse, refuse_negative, refuse_not_positive
from windkit.kernels.circular import direction_difference
from windkit.kernels.frequency import sector_index

__all__ = [
    "LATTICE_THRUST_FACTOR",
    "TUBE_BOOM_LENGTH",
    "PairedRatio",
    "cylinder_flow_speed",
    "in_mast_shadow",
    "lattice_boom_length",
    "lattice_flow_speed",
    "lattice_thrust_coefficient",
    "paired_speed_ratio",
]

#: Factor c in Ct = c (1 - t) t [1], t being solidity, by cross-section and members: IEC
#: 61400-12-1:2005, annex G (from memory of the table), for solidity 0.1 to 0.5.
LATTICE_THRUST_FACTOR: Mapping[str, float] = MappingProxyType(
    {"square, sharp-edged": 4.4, "square, round": 2.6, "triangular, round": 2.1}
)
#: Boom length from the centre of a tubular mast, in mast diameters [1], by flow distortion [1]:
#: IEC 61400-12-1:2005, annex G.
TUBE_BOOM_LENGTH: Mapping[float, float] = MappingProxyType({0.01: 6.1, 0.005: 8.2})

#: Fit of the centre-line deficit ahead of a lattice mast [1]: IEC 61400-12-1:2005, annex G.
_LATTICE_SQUARE, _LATTICE_LINEAR, _LATTICE_OFFSET = 0.062, 0.076, 0.082


@dataclass(frozen=True, slots=True, eq=False)
class PairedRatio:
    """Ratio of two sensors at one height by direction.

    Attributes
    ----------
    sector_centres : ndarray
        Centres of the direction sectors [deg, from], the first at 0.
    ratio : ndarray
        Mean of the first speed over mean of the second [1]; NaN in an empty sector.
    standard_error : ndarray
        Standard error of the ratio [1], records taken as independent, which ten-minute records
        are not: treat it as a lower bound. NaN below two records.
    count : ndarray of int
        Records in each sector.
    """

    sector_centres: NDArray[np.float64]
    ratio: NDArray[np.float64]
    standard_error: NDArray[np.float64]
    count: NDArray[np.intp]


def lattice_thrust_coefficient(solidity: ArrayLike, *, section: str) -> NDArray[np.float64]:
    """Thrust coefficient of a lattice mast from the share of a face that its members fill.

    Parameters
    ----------
    solidity : array_like
        Projected area of the members of one face over the face's area [1], 0.1 to 0.5.
    section : str
        One of `LATTICE_THRUST_FACTOR`.

    Returns
    -------
    float or ndarray
        Thrust coefficient [1], per area of the face.

    Raises
    ------
    ValueError
        If a solidity is outside 0.1 to 0.5 or the section is not in the table.

    References
    ----------
    .. [1] IEC 61400-12-1:2005, annex G.
    """
    if section not in LATTICE_THRUST_FACTOR:
        raise ValueError(
            f"section {section!r} is not in the table; write one of: "
            f"{', '.join(repr(known) for known in LATTICE_THRUST_FACTOR)}"
        )
    t = floats(solidity)
    refuse(
        (t < 0.1) | (t > 0.5),
        t,
        "solidity must be between 0.1 and 0.5 [1]",
        "it is filled over whole area of one face; divide a percentage by 100",
    )
    return LATTICE_THRUST_FACTOR[section] * (1.0 - t) * t


def lattice_flow_speed(
    boom_length: ArrayLike, face_width: ArrayLike, thrust_coefficient: ArrayLike
) -> NDArray[np.float64]:
    """Speed ahead of a lattice mast on its centre line, over the free speed.

    Parameters
    ----------
    boom_length : array_like
        Distance R of the sensor from the centre of the mast [m].
    face_width : array_like
        Distance L between the legs [m].
    thrust_coefficient : array_like
        Ct of the mast [1]; all three broadcast.

    Returns
    -------
    float or ndarray
        Speed ratio [1], below one: the largest deficit of the directions in front.

    Raises
    ------
    ValueError
        If a length or coefficient is not positive, or the boom is shorter than the face is wide.

    Notes
    -----
    Wind-tunnel and flow-model work says this fit overstates the distortion (Stickland et al.
    2013). It does not hold behind the mast.

    References
    ----------
    .. [1] IEC 61400-12-1:2005, annex G: 1 - (0.062 Ct^2 + 0.076 Ct)(L/R - 0.082).
    """
    R = refuse_not_positive("boom_length", boom_length, "m", "from the centre of the mast")
    L = refuse_not_positive("face_width", face_width, "m", "between two legs")
    Ct = _checked_thrust(thrust_coefficient)
    ratio = np.asarray(L / R)
    refuse(
        ratio > 1.0,
        ratio,
        "boom_length must be at least face_width, their inverse ratio",
        "measure the boom from the centre of the mast",
    )
    return 1.0 - _lattice_strength(Ct) * (L / R - _LATTICE_OFFSET)


def lattice_boom_length(
    flow_distortion: ArrayLike, face_width: ArrayLike, thrust_coefficient: ArrayLike
) -> NDArray[np.float64]:
    """Boom length that keeps the deficit ahead of a lattice mast to a given value.

    Parameters
    ----------
    flow_distortion : array_like
        Largest deficit allowed [1], such as 0.01.
    face_width, thrust_coefficient : array_like
        As for `lattice_flow_speed`.

    Returns
    -------
    float or ndarray
        Boom length from the centre of the mast [m], at least the face width.

    Raises
    ------
    ValueError
        As `lattice_flow_speed`; if a distortion is negative or at least one.

    References
    ----------
    .. [1] IEC 61400-12-1:2005, annex G, solved for the length.
    """
    deficit = refuse_negative("flow_distortion", flow_distortion, "1", "give the deficit itself")
    refuse(deficit >= 1.0, deficit, "flow_distortion must be a fraction", "divide by 100")
    L = refuse_not_positive("face_width", face_width, "m", "between two legs")
    Ct = _checked_thrust(thrust_coefficient)
    return L * np.maximum(1.0 / (deficit / _lattice_strength(Ct) + _LATTICE_OFFSET), 1.0)


def cylinder_flow_speed(
    distance_diameters: ArrayLike, direction_from_boom: ArrayLike
) -> NDArray[np.float64]:
    """Speed beside a tubular mast without a wake, over the free speed.

    Parameters
    ----------
    distance_diameters : array_like
        Distance of the sensor from the centre of the mast, in mast diameters [1].
    direction_from_boom : array_like
        Wind direction less the direction the boom points to [deg]; both broadcast.

    Returns
    -------
    float or ndarray
        Speed ratio [1]: below one with the wind on the boom, above one across it. NaN more than
        120 degrees from the boom, where the sensor is near the wake that is left out.

    Raises
    ------
    ValueError
        If the sensor would be inside the mast.

    Notes
    -----
    The wake of a real tube slows the flow ahead of it further: the standard asks for 6.1
    diameters for 1 %, this flow for 5.

    References
    ----------
    .. [1] G. K. Batchelor 1967, An Introduction to Fluid Dynamics, section 6.6: potential flow.
    """
    d = refuse_not_positive("distance_diameters", distance_diameters, "1", "from the centre")
    refuse(d < 0.5, d, "distance_diameters must be at least 0.5 [1]", "measure from the centre")
    angle = direction_difference(direction_from_boom, 0.0)
    q = (0.5 / d) ** 2
    speed = np.sqrt(1.0 - 2.0 * q * np.cos(2.0 * np.radians(angle)) + q**2)
    return np.where(np.abs(angle) > 120.0, np.nan, speed)[()]


def in_mast_shadow(
    wind_direction: ArrayLike, boom_direction: float, *, half_width: float = 30.0
) -> NDArray[np.bool_]:
    """Whether the mast stands between the wind and the sensor.

    Parameters
    ----------
    wind_direction : array_like
        Directions [deg, from]; NaN is in no shadow.
    boom_direction : float
        Direction from the mast to the sensor [deg, clockwise from true north].
    half_width : float
        Half of the sector to distrust [deg]; 15 to 30 is common practice.

    Returns
    -------
    bool or ndarray of bool
        True where the wind comes from within the half width of the boom's back bearing.

    Raises
    ------
    ValueError
        If a boom direction is outside 0 to 360 or a half width outside 0 to 180.
    """
    if not 0.0 <= boom_direction <= 360.0:
        raise ValueError(
            f"boom_direction must be between 0 and 360 [deg], got {boom_direction:g}; give the "
            f"bearing from mast to sensor from true north"
        )
    if not 0.0 < half_width <= 180.0:
        raise ValueError(f"half_width must be above 0 and up to 180 [deg], got {half_width:g}")
    away = np.abs(direction_difference(wind_direction, boom_direction + 180.0))
    return np.asarray(away <= half_width)[()]


def paired_speed_ratio(
    wind_speed: ArrayLike,
    other_speed: ArrayLike,
    wind_direction: ArrayLike,
    *,
    sector_count: int = 72,
    lowest_speed: float = 4.0,
) -> PairedRatio:
    """Ratio of two anemometers at one height by direction, where each mast shadow shows.

    Parameters
    ----------
    wind_speed, other_speed : array_like
        Speeds [m/s] of both sensors at the same times, one dimension.
    wind_direction : array_like
        Directions [deg, from], same length. Records with a missing part are left out.
    sector_count : int
        Number of direction sectors, narrow enough to show a shadow of some 30 degrees.
    lowest_speed : float
        Records in which the mean of both sensors is below this [m/s] are left out: near the
        start speed, sensors differ for other reasons.

    Returns
    -------
    PairedRatio
        Ratio of mean speeds with its standard error and count by sector.

    Raises
    ------
    ValueError
        If lengths differ, a speed is negative, or a direction outside 0 to 360.

    Notes
    -----
    The mean of both decides what is left out: choosing by one of them would bias the ratio.

    References
    ----------
    .. [1] W. G. Cochran 1977, Sampling Techniques, section 2.11: error of a ratio estimate.
    """
    a = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    b = refuse_negative("other_speed", other_speed, "m/s", "mask such values")
    direction = floats(wind_direction)
    if a.ndim != 1 or a.shape != b.shape or a.shape != direction.shape:
        raise ValueError(
            f"wind_speed, other_speed and wind_direction must be series of one length, got "
            f"{a.shape}, {b.shape} and {direction.shape}; join them on time first"
        )
    sector = sector_index(direction, sector_count)
    used = (0.5 * (a + b) >= lowest_speed) & (sector >= 0)
    a, b, sector = a[used], b[used], sector[used]
    count = np.bincount(sector, minlength=sector_count)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean_b = np.bincount(sector, b, minlength=sector_count) / count
        ratio = np.bincount(sector, a, minlength=sector_count) / count / mean_b
        residual = (a - ratio[sector] * b) ** 2
        variance = np.bincount(sector, residual, minlength=sector_count) / (count - 1.0)
        standard_error = np.sqrt(variance / count) / mean_b
    return PairedRatio(
        sector_centres=np.linspace(0.0, 360.0, sector_count, endpoint=False),
        ratio=ratio,
        standard_error=np.where(count > 1, standard_error, np.nan),
        count=count,
    )


def _lattice_strength(Ct: NDArray[np.float64]) -> NDArray[np.float64]:
    return _LATTICE_SQUARE * Ct**2 + _LATTICE_LINEAR * Ct


def _checked_thrust(thrust_coefficient: ArrayLike) -> NDArray[np.float64]:
    return refuse_not_positive(
        "thrust_coefficient", thrust_coefficient, "1", "see lattice_thrust_coefficient"
    )
