"""Hourly values of a record, and the rule that a calm has no direction.

Means by interval with a stated least share; directions as unit vectors, each interval equal. The
direction of the mean wind vector, where speed weighs, is a separate result with its own name.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.circular import mean_direction, speed_weighted_mean_direction
from windkit.study.errors import StudyError
from windkit.study.stations import ChannelSettings, StationSettings

__all__ = [
    "LEAST_SHARE_OF_HOUR",
    "calm_hours",
    "hourly_means",
    "hourly_weighted_directions",
    "without_calm_directions",
]

#: Least share of an hour's intervals that an hourly mean stands on: five of six ten-minute
#: values (common practice).
LEAST_SHARE_OF_HOUR = 5 / 6


def calm_hours(
    frame: pd.DataFrame, direction: ChannelSettings, settings: StationSettings
) -> NDArray[np.bool_]:
    """Intervals that are calm where a vane hangs.

    Parameters
    ----------
    frame : DataFrame
        Channels of the station.
    direction : ChannelSettings
        The vane's channel; the mean speed nearest in height decides.
    settings : StationSettings
        The calm rule.

    Returns
    -------
    ndarray of bool
        True where that speed is below ``calm_below_m_s``; a missing speed is not calm.
    """
    speed = frame[_nearest(settings, direction).name].to_numpy()
    calm: NDArray[np.bool_] = speed < settings.calm_below_m_s
    return calm


def _nearest(settings: StationSettings, direction: ChannelSettings) -> ChannelSettings:
    """The mean speed nearest in height to a vane."""
    return min(settings.mean_speeds, key=lambda cup: abs(cup.height_m - direction.height_m))


def without_calm_directions(frame: pd.DataFrame, settings: StationSettings) -> pd.DataFrame:
    """The frame with directions of calms taken out: a calm has none, and still counts."""
    out = frame.copy()
    for channel in settings.channels:
        if channel.is_direction:
            out.loc[calm_hours(frame, channel, settings), channel.name] = np.nan
    return out


def hourly_means(
    frame: pd.DataFrame, settings: StationSettings, *, min_share: float = LEAST_SHARE_OF_HOUR
) -> pd.DataFrame:
    """Hourly values from a frame of shorter intervals.

    Parameters
    ----------
    frame : DataFrame
        Channels on starts of intervals, masked; directions of calms still in.
    settings : StationSettings
        Interval, calm rule, and what each channel holds.
    min_share : float
        Least share of an hour's intervals that must have a value [1].

    Returns
    -------
    DataFrame
        Channels on every hour from first to last, NaN where too few values stand. Means are
        means; a spread is the root of the mean square (the spread between the intervals is
        left out); extremes are extremes; a direction is the mean of unit vectors, each interval
        equal, over intervals that are not calm.

    Raises
    ------
    StudyError
        If `min_share` is not a share, or an hour is not a whole number of intervals.

    Notes
    -----
    An interval belongs to the hour its middle lies in. A calm counts as observed when the share
    of a direction is taken. Intervals of one hour keep their value; longer ones are refused.
    """
    grid = _hours_of(frame, settings, min_share)
    columns = {}
    for channel in settings.channels:
        values = grid.laid(frame[channel.name].to_numpy())
        observed = np.isfinite(values).sum(axis=1)
        if channel.is_direction:
            values[grid.laid(calm_hours(frame, channel, settings)) == 1.0] = np.nan
        enough = (observed >= grid.needed) & np.isfinite(values).any(axis=1)
        columns[channel.name] = np.full(len(grid.hours), np.nan)
        columns[channel.name][enough] = _of_each_hour(values[enough], channel)
    return pd.DataFrame(columns, index=grid.hours)


def hourly_weighted_directions(
    frame: pd.DataFrame, settings: StationSettings, *, min_share: float = LEAST_SHARE_OF_HOUR
) -> pd.DataFrame:
    """Direction of the mean wind vector of each hour: where the air came from.

    Parameters
    ----------
    frame, settings, min_share : DataFrame, StationSettings, float
        As in `hourly_means`.

    Returns
    -------
    DataFrame
        One column for each mean direction, weighted with the mean speed nearest in height; NaN
        where too few intervals know both. `hourly_means` says where the wind came from most of
        the time; this says where the air came from.
    """
    grid = _hours_of(frame, settings, min_share)
    columns = {}
    for vane in settings.directions:
        cup = _nearest(settings, vane)
        direction = grid.laid(frame[vane.name].to_numpy())
        speed = grid.laid(np.maximum(frame[cup.name].to_numpy(), 0.0))
        enough = (np.isfinite(direction) & np.isfinite(speed)).sum(axis=1) >= grid.needed
        values = np.full(len(grid.hours), np.nan)
        values[enough] = speed_weighted_mean_direction(speed[enough], direction[enough], axis=1)
        columns[vane.name] = values
    return pd.DataFrame(columns, index=grid.hours)


@dataclass(frozen=True)
class _Hours:
    """Where each interval lies in a grid of hours, and how many of them an hour needs."""

    hours: pd.DatetimeIndex
    at: NDArray[np.intp]
    slot: NDArray[np.intp]
    per_hour: int
    needed: int

    def laid(self, values: NDArray[np.float64] | NDArray[np.bool_]) -> NDArray[np.float64]:
        """Values laid into the grid, NaN where no interval stands."""
        grid = np.full((len(self.hours), self.per_hour), np.nan)
        grid[self.at, self.slot] = values
        return grid


def _hours_of(frame: pd.DataFrame, settings: StationSettings, min_share: float) -> _Hours:
    if not 0 < min_share <= 1:
        raise StudyError.of(
            key="samples_per_hour_share",
            met=f"the share is {min_share:g}",
            rule="it is above 0 and no more than 1",
            remedy="write 0.8333 for five of six intervals",
        )
    per_hour = round(60.0 / settings.interval_min)
    if not math.isclose(per_hour * settings.interval_min, 60.0, rel_tol=1e-9):
        raise StudyError.of(
            key="interval_min",
            met=f"{settings.name}: intervals last {settings.interval_min:g} minutes",
            rule="an hourly mean needs a whole number of intervals in an hour",
            remedy="use the record at its own interval",
        )
    assert isinstance(frame.index, pd.DatetimeIndex)
    half = pd.Timedelta(minutes=settings.interval_min / 2)
    hour = pd.Timedelta(hours=1)
    middles = frame.index + half
    first, last = middles[0].floor("h"), middles[-1].floor("h")
    hours = pd.date_range(first, last, freq="h", name="time").as_unit("ns")
    at = ((middles - first) // hour).to_numpy().astype(np.intp)
    slot = ((middles - first - at * hour) // (2 * half)).to_numpy().astype(np.intp)
    needed = math.ceil(min_share * per_hour - 1e-3)  # 0.8333 of six is five
    return _Hours(hours, at, slot, per_hour, needed)


def _of_each_hour(grid: NDArray[np.float64], channel: ChannelSettings) -> NDArray[np.float64]:
    if channel.is_direction:
        return mean_direction(grid, axis=1)
    if channel.statistic == "sd":
        return np.sqrt(np.nanmean(grid**2, axis=1))
    if channel.statistic == "max" or channel.quantity == "wind_speed_of_gust":
        return np.nanmax(grid, axis=1)
    if channel.statistic == "min":
        return np.nanmin(grid, axis=1)
    return np.nanmean(grid, axis=1)
