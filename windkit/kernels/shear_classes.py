"""Shear by sector, hour and month: each record gets the exponent of its own kind of weather.

The wind profile changes with the surface upwind, the time of day and the season. One exponent
for all hours carries the mean speed up, but not the nights and days apart, and so not the
energy. Classes with few records borrow from wider ones in a stated order. Fits of one profile
are in `profile`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels._checks import floats, refuse_negative
from windkit.kernels.profile import fit_shear, power_law

__all__ = [
    "FALL_BACK_LEVELS",
    "ShearClasses",
    "leave_one_height_out",
    "shear_by_class",
    "shear_of_records",
]

#: What a class is told apart by, finest first; a thin class takes the next wider one that holds
#: enough records. Our choice: the hour stands for stability and is given up last.
FALL_BACK_LEVELS: tuple[tuple[str, ...], ...] = (
    ("sector", "hour", "month"),
    ("sector", "hour"),
    ("hour", "month"),
    ("hour",),
    (),
)

_HOURS, _MONTHS = 24, 12
_AXES = ("sector", "hour", "month")


@dataclass(frozen=True, slots=True, eq=False)
class ShearClasses:
    """Shear exponents by sector, hour and month, and what each stands on.

    Attributes
    ----------
    shear_exponent : ndarray
        Exponent [1], shape (sector_count + 1, 24, 12); the last row is for records without a
        direction, so that a sector number of -1 finds it.
    count : ndarray of int
        Records in each finest class, same shape.
    level : ndarray of int
        Number of the level in `levels` the exponent comes from, same shape; 0 is the finest.
    levels : tuple of tuple of str
        The order in which thin classes were widened.
    """

    shear_exponent: NDArray[np.float64]
    count: NDArray[np.intp]
    level: NDArray[np.intp]
    levels: tuple[tuple[str, ...], ...]


def shear_by_class(
    wind_speed: ArrayLike,
    height: ArrayLike,
    sector: ArrayLike,
    hour: ArrayLike,
    month: ArrayLike,
    *,
    sector_count: int = 12,
    min_count: int = 100,
    levels: Sequence[Sequence[str]] = FALL_BACK_LEVELS,
    displacement_height: float = 0.0,
) -> ShearClasses:
    """Shear exponent of each class of sector, hour and month, thin classes widened.

    Parameters
    ----------
    wind_speed : array_like
        Wind speeds [m/s], shape (records, heights). Records with a speed missing at any height
        are left out, so that all heights of a class describe the same hours.
    height : array_like
        Heights [m], shape (heights,), all different.
    sector : array_like of int
        Sector number of each record, -1 without a direction, see `frequency.sector_index`.
    hour, month : array_like of int
        Hour of day 0 to 23 in the site's own time, and month 1 to 12, of each record.
    sector_count : int
        Number of sectors.
    min_count : int
        Records a class needs to stand for itself. Ten-minute records hang together: a hundred
        of them may be no more than a few days.
    levels : sequence of sequences of str
        What classes are told apart by, finest first, the last one usually empty (all records).
    displacement_height : float
        Height [m] the flow is lifted by a closed canopy.

    Returns
    -------
    ShearClasses
        Exponents of either sign, through the class means of speed at each height.

    Raises
    ------
    ValueError
        If lengths differ, a sector, hour or month is outside its range, a level names something
        else, or no level holds enough records.

    Notes
    -----
    The exponent of the mean speeds is used and not the mean of exponents, so that slow hours,
    in which the exponent is hardly defined, weigh little.
    """
    v = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    z = floats(height)
    if v.ndim != 2 or v.shape[1] != z.size:
        raise ValueError(
            f"wind_speed must be (records, heights) with {z.size} heights, got shape {v.shape}; "
            f"put one height into each column"
        )
    ranges = {"sector": (-1, sector_count), "hour": (0, _HOURS), "month": (1, _MONTHS + 1)}
    given = {"sector": sector, "hour": hour, "month": month}
    index = {
        name: _whole_numbers(name, values, v.shape[0], *ranges[name])
        for name, values in given.items()
    }
    index["month"] = index["month"] - 1
    known = ~np.isnan(v).any(axis=1)
    v = v[known]
    index = {name: values[known] for name, values in index.items()}
    shape = (sector_count + 1, _HOURS, _MONTHS)
    exponent = np.full(shape, np.nan)
    level = np.full(shape, -1, dtype=np.intp)
    for number, names in enumerate(levels):
        _check_level(names)
        wider, count = _level(v, z, index, names, shape, displacement_height)
        fill = (level < 0) & (count >= max(min_count, 1)) & ~np.isnan(wider)
        exponent = np.where(fill, wider, exponent)
        level = np.where(fill, number, level)
    if (level < 0).any():
        raise ValueError(
            f"{np.count_nonzero(level < 0)} of {level.size} classes of shear found no level with "
            f"min_count = {min_count} records among {v.shape[0]} complete ones; lower min_count, "
            f"or end levels with () for all records"
        )
    _, count = _level(v, z, index, _AXES, shape, displacement_height)
    undirected = np.bincount(
        (index["hour"] * _MONTHS + index["month"])[index["sector"] < 0],
        minlength=_HOURS * _MONTHS,
    )
    count = np.array(np.broadcast_to(count, shape))
    count[-1] = undirected.reshape(_HOURS, _MONTHS)
    return ShearClasses(exponent, count, level, tuple(tuple(names) for names in levels))


def shear_of_records(
    classes: ShearClasses, sector: ArrayLike, hour: ArrayLike, month: ArrayLike
) -> NDArray[np.float64]:
    """Exponent of the class each record belongs to.

    Parameters
    ----------
    classes : ShearClasses
        From `shear_by_class`.
    sector, hour, month : array_like of int
        As for `shear_by_class`, of any one length: the records to be carried to hub height need
        not be those the classes were made from.

    Returns
    -------
    ndarray
        Shear exponent [1] of each record.

    Raises
    ------
    ValueError
        If lengths differ, or a number is outside its range.
    """
    length = np.asarray(sector).size
    sector_count = classes.shear_exponent.shape[0] - 1
    i = _whole_numbers("sector", sector, length, -1, sector_count)
    j = _whole_numbers("hour", hour, length, 0, _HOURS)
    k = _whole_numbers("month", month, length, 1, _MONTHS + 1)
    return classes.shear_exponent[i, j, k - 1]


def leave_one_height_out(
    wind_speed: ArrayLike, height: ArrayLike, *, displacement_height: float = 0.0
) -> NDArray[np.float64]:
    """How far the power law through the other heights misses the mean speed at each height.

    Parameters
    ----------
    wind_speed : array_like
        Wind speeds [m/s], shape (records, heights), at least three heights.
    height : array_like
        Heights [m], shape (heights,).
    displacement_height : float
        Height [m] the flow is lifted by a closed canopy.

    Returns
    -------
    ndarray
        Predicted mean over measured mean less one [1], for each height, record by record from
        the exponent of the other heights and the speed at the nearest of them.

    Raises
    ------
    ValueError
        If there are fewer than three heights, or shapes do not match.

    Notes
    -----
    The value at the top is the one that speaks for extrapolation to hub height.
    """
    v = refuse_negative("wind_speed", wind_speed, "m/s", "mask such values")
    z = floats(height)
    if v.ndim != 2 or z.ndim != 1 or v.shape[1] != z.size or z.size < 3:
        raise ValueError(
            f"leaving a height out needs wind_speed (records, heights) with at least three "
            f"heights, got shape {v.shape} and {z.size} heights; two cannot test each other"
        )
    error = np.full(z.size, np.nan)
    for left_out in range(z.size):
        others = np.flatnonzero(np.arange(z.size) != left_out)
        nearest = others[np.argmin(np.abs(np.log(z[others] / z[left_out])))]
        exponent = fit_shear(v[:, others], z[others], displacement_height=displacement_height)
        predicted = power_law(
            v[:, nearest],
            z[nearest],
            z[left_out],
            exponent,
            displacement_height=displacement_height,
        )
        both = ~(np.isnan(predicted) | np.isnan(v[:, left_out]))
        if both.any():
            error[left_out] = predicted[both].mean() / v[both, left_out].mean() - 1.0
    return error


def _level(
    v: NDArray[np.float64],
    z: NDArray[np.float64],
    index: dict[str, NDArray[np.intp]],
    names: Sequence[str],
    shape: tuple[int, int, int],
    displacement_height: float,
) -> tuple[NDArray[np.float64], NDArray[np.intp]]:
    """Exponent and count of one level, in a shape that broadcasts to the finest."""
    used = index["sector"] >= 0 if "sector" in names else np.ones(v.shape[0], dtype=bool)
    grid = tuple(size if name in names else 1 for name, size in zip(_AXES, shape, strict=True))
    cell = np.zeros(int(used.sum()), dtype=np.intp)
    for name, size in zip(_AXES, grid, strict=True):
        if name in names:
            cell = cell * size + index[name][used]
    cells = int(np.prod(grid))
    count = np.bincount(cell, minlength=cells)
    sums = [np.bincount(cell, v[used, column], minlength=cells) for column in range(z.size)]
    filled = np.maximum(count, 1)[:, None]
    means = np.where(count[:, None] > 0, np.stack(sums, axis=-1) / filled, np.nan)
    exponent = fit_shear(means, z, displacement_height=displacement_height)
    return exponent.reshape(grid), count.reshape(grid)


def _check_level(names: Sequence[str]) -> None:
    unknown = [name for name in names if name not in _AXES]
    if isinstance(names, str) or unknown:
        raise ValueError(
            f"levels must name any of {', '.join(_AXES)}, got {names!r}; write each level as a "
            f"tuple such as ('sector', 'hour')"
        )


def _whole_numbers(
    name: str, values: ArrayLike, length: int, least: int, beyond: int
) -> NDArray[np.intp]:
    array = np.asarray(values)
    if array.shape != (length,):
        raise ValueError(
            f"{name} must have one value for each of the {length} records, got shape "
            f"{array.shape}; take all from one table"
        )
    if not np.issubdtype(array.dtype, np.integer):
        raise ValueError(f"{name} must hold whole numbers, got {array.dtype}; give integers")
    bad = (array < least) | (array >= beyond)
    if bad.any():
        raise ValueError(
            f"{name} must be from {least} to {beyond - 1}, got {array[bad][0]} at position "
            f"{int(np.flatnonzero(bad)[0])}; hours count from 0, months from 1, sectors from 0"
        )
    return array.astype(np.intp)
