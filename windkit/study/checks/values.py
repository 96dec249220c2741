"""Checks that look at one channel by itself: what cannot be, and what does not move.

Each function takes a reading and thresholds and gives spans. Nothing is masked here.
"""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.air import standard_atmosphere
from windkit.study.checks.comparing import index_of, nearest_speed, values_of
from windkit.study.checks.spans import instants, joined, runs, spans_of
from windkit.study.checks.thresholds import CheckSettings
from windkit.study.reading import Reading
from windkit.study.stations import ChannelSettings

__all__ = ["plausible_limits", "range_mark_spans", "range_spans", "stuck_spans"]

#: Averaging periods between which the highest plausible speed is interpolated [s].
_GUST_SECONDS, _MEAN_SECONDS = 3.0, 600.0
#: Humidity at which sensors, good to 3 %, saturate and may rightly stand still [1].
_SATURATED = 0.97
#: A vane may rest below this speed [m/s]; common practice.
_SLACK_BELOW = 2.0
#: Fewest runs of three equal values from which their continuation is estimated.
_FEWEST_RUNS = 30


def plausible_limits(
    channel: ChannelSettings, settings: CheckSettings, interval: pd.Timedelta
) -> tuple[float, float]:
    """Lowest and highest value a channel can show, in the library's unit.

    Parameters
    ----------
    channel : ChannelSettings
        Its own ``lowest`` and ``highest`` come first.
    settings : CheckSettings
        Defaults by quantity and statistic.
    interval : Timedelta
        Averaging interval. The highest mean speed falls with it, linear in its logarithm from
        the 3 s gust to the ten-minute mean.

    Returns
    -------
    tuple of float
        Lowest and highest; both are still plausible.
    """
    lowest, highest = _limits(channel, settings, interval)
    return (
        lowest if channel.lowest is None else channel.lowest,
        highest if channel.highest is None else channel.highest,
    )


def _limits(
    channel: ChannelSettings, settings: CheckSettings, interval: pd.Timedelta
) -> tuple[float, float]:
    spread = channel.statistic == "sd"
    match channel.quantity:
        case "wind_speed" | "wind_speed_of_gust" if spread:
            return 0.0, settings.highest_speed_sd_m_s
        case "wind_speed_of_gust":
            return 0.0, settings.highest_gust_m_s
        case "wind_speed" if channel.statistic == "max":
            return 0.0, settings.highest_gust_m_s
        case "wind_speed":
            seconds = min(max(interval.total_seconds(), _GUST_SECONDS), _MEAN_SECONDS)
            share = math.log(_MEAN_SECONDS / seconds) / math.log(_MEAN_SECONDS / _GUST_SECONDS)
            mean, gust = settings.highest_mean_speed_m_s, settings.highest_gust_m_s
            return 0.0, mean + share * max(gust - mean, 0.0)
        case "wind_from_direction":
            return 0.0, 180.0 if spread else 360.0
        case "air_temperature" | "dew_point_temperature":
            lowest, highest = settings.lowest_temperature_k, settings.highest_temperature_k
        case "air_pressure":
            lowest, highest = settings.lowest_pressure_pa, settings.highest_pressure_pa
        case "relative_humidity":
            lowest, highest = 0.0, settings.highest_relative_humidity
        case _:
            # Dry air between the extremes of pressure and temperature above.
            lowest, highest = 0.5, 2.1
    return (0.0, highest - lowest) if spread else (lowest, highest)


def range_spans(reading: Reading, settings: CheckSettings) -> pd.DataFrame:
    """Values outside what the quantity can be.

    Parameters
    ----------
    reading : Reading
        The record as read.
    settings : CheckSettings
        Limits by quantity.

    Returns
    -------
    DataFrame
        Spans of rule ``range``; the measure is the value furthest from zero.
    """
    tables = []
    for channel in reading.settings.channels:
        limits = plausible_limits(channel, settings, reading.interval)
        words = f"{channel.quantity} ({channel.statistic}) {{side}} what it can be"
        tables += _outside(reading, channel, limits, "range", words)
    return joined(tables)


def range_mark_spans(
    reading: Reading, settings: CheckSettings, *, elevation: float = 0.0
) -> pd.DataFrame:
    """Values beyond the screening marks of measurement practice: rare, and worth a look.

    Parameters
    ----------
    reading : Reading
        The record as read.
    settings : CheckSettings
        Marks, for ten- to sixty-minute means.
    elevation : float
        Of the ground above the sea [m]; pressure marks are scaled with it.

    Returns
    -------
    DataFrame
        Spans of rule ``range_mark``; the measure is the value furthest from zero.

    References
    ----------
    .. [1] Bailey et al. 1997, Wind Resource Assessment Handbook, NREL/SR-440-22223, range tests
       (MEA-7).
    """
    tables = []
    for channel in reading.settings.channels:
        limits = _marks(channel, settings, elevation)
        if limits is not None:
            words = f"{channel.quantity} ({channel.statistic}) {{side}} its screening mark"
            tables += _outside(reading, channel, limits, "range_mark", words)
    return joined(tables)


def _marks(
    channel: ChannelSettings, settings: CheckSettings, elevation: float
) -> tuple[float, float] | None:
    # A recorded mean below the logger's offset cannot come from a turning cup.
    floor = 0.0 if channel.is_recomputed else channel.applied_offset or 0.0
    match channel.quantity, channel.statistic:
        case (("wind_speed" | "wind_speed_of_gust"), "sd"):
            return 0.0, settings.mark_speed_sd_m_s
        case ("wind_speed_of_gust", _) | ("wind_speed", "max"):
            return floor, settings.mark_gust_m_s
        case "wind_speed", "mean":
            return floor, settings.mark_mean_speed_m_s
        case "wind_from_direction", "sd":
            return settings.mark_direction_sd_low_deg, settings.mark_direction_sd_high_deg
        case "air_pressure", "mean":
            here = standard_atmosphere(elevation + channel.height_m)[1]
            share = float(here / standard_atmosphere(0.0)[1])
            return share * settings.mark_pressure_low_pa, share * settings.mark_pressure_high_pa
    return None


def _outside(
    reading: Reading,
    channel: ChannelSettings,
    limits: tuple[float, float],
    rule: str,
    words: str,
) -> list[pd.DataFrame]:
    values = values_of(reading, channel)
    lowest, highest = limits
    return [
        spans_of(
            mask,
            index_of(reading),
            reading.interval,
            channel=channel.name,
            rule=rule,
            reason=words.format(side=side),
            threshold=limit,
            measure=values,
        )
        for mask, limit, side in (
            (values < lowest, lowest, "below"),
            (values > highest, highest, "above"),
        )
    ]


def stuck_spans(reading: Reading, settings: CheckSettings) -> pd.DataFrame:
    """Runs of one value, longer than chance and coarse digits explain.

    Parameters
    ----------
    reading : Reading
        The record as read.
    settings : CheckSettings
        Shortest run, and how many false alarms are accepted.

    Returns
    -------
    DataFrame
        Spans of rule ``stuck``; the measure is the count of equal values.

    Notes
    -----
    A record in whole knots or tens of degrees repeats itself rightly. How often it goes on
    repeating is taken from the record itself: with p the share of values equal to the one
    before, or, if larger, the share of runs of three that reach a fourth, N values bring about
    N p**(n-1) runs of n or more. The shortest run listed is the n that makes this number
    ``stuck_false_alarms``, and no less than ``shortest_stuck_min``. Runs in the floor of a cup
    (a calm), of a spread of zero and of saturated humidity are left out: they are no fault by
    themselves.
    """
    tables = []
    for channel in reading.settings.channels:
        values = values_of(reading, channel)
        equal = _same_as_before(values, index_of(reading), reading.interval)
        equal &= ~_may_rest(reading, values, channel)
        shortest = _shortest_run(equal, np.isfinite(values).sum(), reading.interval, settings)
        if shortest is None:
            continue
        first, behind = runs(equal, index_of(reading), reading.interval)
        mask = np.zeros(len(values), dtype=bool)
        for start, stop in zip(first - 1, behind, strict=True):
            if stop - start >= shortest:
                mask[start:stop] = True
        # Two stuck runs may touch; each is its own span, told apart by its value.
        tables += [
            spans_of(
                part,
                index_of(reading),
                reading.interval,
                channel=channel.name,
                rule="stuck",
                reason="the value does not change",
                threshold=float(shortest),
            )
            for part in _by_value(mask, equal)
        ]
    return joined(tables)


def _by_value(mask: NDArray[np.bool_], equal: NDArray[np.bool_]) -> list[NDArray[np.bool_]]:
    """Split a mask in two so that touching runs of different values fall apart."""
    number = np.cumsum(mask & ~equal)
    return [mask & (number % 2 == 0), mask & (number % 2 == 1)]


def _same_as_before(
    values: NDArray[np.float64], index: pd.DatetimeIndex, interval: pd.Timedelta
) -> NDArray[np.bool_]:
    equal = np.zeros(len(values), dtype=bool)
    equal[1:] = (values[1:] == values[:-1]) & (
        np.diff(instants(index)) == interval.to_timedelta64()
    )
    return equal


def _may_rest(
    reading: Reading, values: NDArray[np.float64], channel: ChannelSettings
) -> NDArray[np.bool_]:
    """Values that may rightly rest: a cup's floor, no spread, saturated air, a slack vane."""
    if channel.is_direction:
        cup = nearest_speed(reading.settings, channel.height_m)
        return values_of(reading, cup) < _SLACK_BELOW
    if channel.quantity == "relative_humidity" and channel.statistic != "sd":
        return values >= _SATURATED
    if channel.statistic == "sd":
        return values == 0.0
    if channel.quantity in {"wind_speed", "wind_speed_of_gust"}:
        floor = np.nanmin(values) if np.isfinite(values).any() else 0.0
        return (values < reading.settings.calm_below_m_s) | (values == floor)
    return np.zeros(len(values), dtype=bool)


def _shortest_run(
    equal: NDArray[np.bool_], count: int, interval: pd.Timedelta, settings: CheckSettings
) -> int | None:
    """Equal values a run must have to be listed; None if nothing repeats."""
    if not equal.any():
        return None
    edges = np.flatnonzero(np.diff(np.concatenate([[False], equal, [False]]).astype(np.int8)))
    lengths = edges[1::2] - edges[::2] + 1  # equal values in a run, the first included
    share = equal.sum() / max(count, 1)
    threes = int((lengths >= 3).sum())
    if threes >= _FEWEST_RUNS:
        share = max(share, (lengths >= 4).sum() / threes)
    share = min(share, 0.98)
    chance = 1 + math.log(settings.stuck_false_alarms / count) / math.log(share)
    least = settings.shortest_stuck_min / (interval.total_seconds() / 60.0)
    return max(3, math.ceil(least), math.ceil(chance))
