"""Checks that look at one channel by itself: what cannot be, and what does not move.

Each function takes a reading and thresholds and gives spans. Nothing is masked here.
"""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.study.checks.spans import joined, runs, spans_of
from windkit.study.checks.thresholds import CheckSettings
from windkit.study.reading import Reading
from windkit.study.stations import ChannelSettings

__all__ = ["plausible_limits", "range_spans", "stuck_spans"]

#: Averaging periods between which the highest plausible speed is interpolated [s].
_GUST_SECONDS, _MEAN_SECONDS = 3.0, 600.0
#: Humidity at which sensors saturate and may rightly stand still [1].
_SATURATED = 0.99
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
        values = reading.frame[channel.name].to_numpy()
        lowest, highest = plausible_limits(channel, settings, reading.interval)
        for mask, limit, side in (
            (values < lowest, lowest, "below"),
            (values > highest, highest, "above"),
        ):
            tables.append(
                spans_of(
                    mask,
                    _index(reading),
                    reading.interval,
                    channel=channel.name,
                    rule="range",
                    reason=f"{channel.quantity} ({channel.statistic}) {side} what it can be",
                    threshold=limit,
                    measure=values,
                )
            )
    return joined(tables)


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
        values = reading.frame[channel.name].to_numpy()
        equal = _same_as_before(values, _index(reading), reading.interval)
        equal &= ~_may_rest(values, channel, reading.settings.calm_below_m_s)
        shortest = _shortest_run(equal, np.isfinite(values).sum(), reading.interval, settings)
        if shortest is None:
            continue
        first, behind = runs(equal, _index(reading), reading.interval)
        mask = np.zeros(len(values), dtype=bool)
        for start, stop in zip(first - 1, behind, strict=True):
            if stop - start >= shortest:
                mask[start:stop] = True
        # Two stuck runs may touch; each is its own span, told apart by its value.
        tables += [
            spans_of(
                part,
                _index(reading),
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
        np.diff(index.to_numpy()) == interval.to_timedelta64()
    )
    return equal


def _may_rest(
    values: NDArray[np.float64], channel: ChannelSettings, calm_below: float
) -> NDArray[np.bool_]:
    """Values that may rightly stand still: a cup's floor, no spread, saturated air."""
    if channel.quantity == "relative_humidity" and channel.statistic != "sd":
        return values >= _SATURATED
    if channel.statistic == "sd":
        return values == 0.0
    if channel.quantity in {"wind_speed", "wind_speed_of_gust"}:
        floor = np.nanmin(values) if np.isfinite(values).any() else 0.0
        return (values < calm_below) | (values == floor)
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


def _index(reading: Reading) -> pd.DatetimeIndex:
    assert isinstance(reading.frame.index, pd.DatetimeIndex)
    return reading.frame.index
