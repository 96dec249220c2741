"""The mast tests its own profile: its top sensor is predicted from those below.

What is missed there, by hour, season and sector, is carried to the hub with the logarithm of the
height ratio. How the miss becomes an uncertainty of the study is in `hub`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.study.hub_profile import ProfileData, factors
from windkit.study.hub_settings import ProfileSettings

__all__ = ["SEASONS", "LeftOut", "leave_top_height_out"]

Array = NDArray[np.float64]

SEASONS = ("Dec-Feb", "Mar-May", "Jun-Aug", "Sep-Nov")
#: Fewest records for a group's error to be told, our choice.
_LEAST_IN_GROUP = 20
#: A mean error above this is notable [1], and one whose scatter over hours and seasons is below
#: this part of it is steady [1]; our choice.
_NOTABLE, _STEADY = 0.005, 0.5


@dataclass(frozen=True)
class LeftOut:
    """The top sensor predicted from those below.

    Attributes
    ----------
    table : DataFrame
        One row a group: by (hour, season, sector or all), group, predicted and measured mean
        [m/s], error [1], count.
    mean_error : float
        Predicted over measured mean speed less one, over all records [1].
    typical_error : float
        Root mean square of the errors of each hour of each season, weighted with their counts
        [1]: over- and underestimates do not cancel in it.
    scaled : float
        `typical_error` at the hub: times ln(hub/mast) over ln(top/next sensor) [1].
    heights : tuple of float
        The sensor it was predicted from, and the one left out [m].
    """

    table: pd.DataFrame
    mean_error: float
    typical_error: float
    scaled: float
    heights: tuple[float, float]

    @property
    def is_steady(self) -> bool:
        """Whether a notable error hardly moves with hour and season."""
        moving = self.typical_error**2 - self.mean_error**2
        return abs(self.mean_error) > _NOTABLE and moving < (_STEADY * self.mean_error) ** 2


def leave_top_height_out(
    data: ProfileData, choice: ProfileSettings, *, main_height: float, hub_height: float
) -> LeftOut | None:
    """Predict the top sensor from those below and see by how much that misses.

    Parameters
    ----------
    data : ProfileData
        Speeds of all heights.
    choice : ProfileSettings
        The method that is put to the test is the one in use.
    main_height, hub_height : float
        Between which the study extrapolates [m].

    Returns
    -------
    LeftOut or None
        None with fewer than three heights: two cannot test each other.

    Notes
    -----
    The error at the hub is taken to grow with the logarithm of the height ratio. Wind that has
    another profile above the mast than below its top (a low jet, an edge of a wood) is not seen.
    """
    if data.height.size < 3 or len(data.wind_speed) < _LEAST_IN_GROUP:
        return None
    below, top = float(data.height[-2]), float(data.height[-1])
    lower = ProfileData(
        data.wind_speed[:, :-1],
        data.height[:-1],
        data.channels[:-1],
        data.kinds,
        data.inverse_obukhov_length,
        [],
    )
    up = factors(lower, choice, method=choice.method, height=below, target_height=top)
    predicted = data.wind_speed[:, -2] * up.of(data.kinds)
    measured = data.wind_speed[:, -1]
    season = data.kinds.month % 12 // 3
    hour = data.kinds.hour
    rows = [_group("all", "all", predicted, measured)]
    for by, key, names in (
        ("hour", hour, [f"{h:02d}" for h in range(24)]),
        ("season", season, list(SEASONS)),
        ("sector", data.kinds.sector, [f"{s * 360 / data.kinds.sector_count:.0f}°"
                                       for s in range(data.kinds.sector_count)]),
    ):  # fmt: skip
        for number, name in enumerate(names):
            inside = key == number
            if np.count_nonzero(inside) >= _LEAST_IN_GROUP:
                rows.append(_group(by, name, predicted[inside], measured[inside]))
    cell = hour * len(SEASONS) + season
    count = np.bincount(cell)
    enough = count >= _LEAST_IN_GROUP
    if not enough.any():
        cell, enough = np.zeros_like(cell), np.array([True])
        count = np.bincount(cell)
    sums = np.bincount(cell, predicted)[enough], np.bincount(cell, measured)[enough]
    error, weight = sums[0] / sums[1] - 1.0, count[enough]
    typical = float(np.sqrt(np.sum(weight * error**2) / weight.sum()))
    d = choice.displacement_height_m
    reach = abs(np.log((hub_height - d) / (main_height - d))) / np.log((top - d) / (below - d))
    columns = ["by", "group", "predicted_m_s", "measured_m_s", "error", "count"]
    return LeftOut(
        table=pd.DataFrame(rows, columns=columns),
        mean_error=float(predicted.mean() / measured.mean() - 1.0),
        typical_error=typical,
        scaled=typical * float(reach),
        heights=(below, top),
    )


def _group(
    by: str, name: str, predicted: Array, measured: Array
) -> tuple[str, str, float, float, float, int]:
    p, m = float(predicted.mean()), float(measured.mean())
    return by, name, p, m, p / m - 1.0, int(measured.size)
