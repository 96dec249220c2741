"""Checks of change in time: steps that weather does not make, and single values that stand out.

Each function takes a reading and thresholds and gives spans. A front or a squall moves every
sensor at once; what moves one sensor alone is suspect.
"""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.circular import direction_difference
from windkit.study.checks.comparing import (
    index_of,
    intervals_in,
    nearest_speed,
    nearest_vane,
    spread,
    values_of,
)
from windkit.study.checks.spans import instants, joined, spans_of
from windkit.study.checks.thresholds import CheckSettings
from windkit.study.reading import Reading
from windkit.study.stations import SPEEDS, ChannelSettings

__all__ = ["spike_spans", "step_spans"]

Values = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: A front explains no change of temperature larger than this many thresholds.
_FRONT_SHARE = 1.5
#: Share of a jump that another sensor must make too, to share it.
_SHARED = 0.5


def step_spans(reading: Reading, settings: CheckSettings) -> pd.DataFrame:
    """Changes within an hour (pressure: three) larger than weather makes, fronts left out.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and thresholds.

    Returns
    -------
    DataFrame
        Spans of rule ``step`` where the change is reached; the measure is the change.

    Notes
    -----
    A change that another sensor of the same kind shares is weather. So is a change of
    temperature while the wind turns or the speed steps: a front.

    References
    ----------
    .. [1] Bailey et al. 1997, NREL/SR-440-22223, trend tests (MEA-9).
    """
    tables = []
    for channel in reading.settings.channels:
        limit, hours = _step(channel, settings)
        if limit is None or channel.statistic != "mean":
            continue
        change = _change(reading, values_of(reading, channel), hours)
        large = np.abs(change) > limit
        if not large.any():
            continue
        for other in reading.settings.channels:
            same_kind = other.quantity == channel.quantity and other.statistic == "mean"
            if same_kind and other.name != channel.name:
                shared = _change(reading, values_of(reading, other), hours)
                large &= ~(shared * np.sign(change) > _SHARED * limit)
        if channel.quantity in {"air_temperature", "dew_point_temperature"}:
            large &= ~(_front(reading, settings) & (np.abs(change) < _FRONT_SHARE * limit))
        tables.append(
            spans_of(
                large,
                index_of(reading),
                reading.interval,
                channel=channel.name,
                rule="step",
                reason=f"changes within {hours} h by more than weather does",
                threshold=limit,
                measure=change,
            )
        )
    return joined(tables)


def _step(channel: ChannelSettings, settings: CheckSettings) -> tuple[float | None, int]:
    match channel.quantity:
        case "wind_speed":
            return settings.step_speed_m_s_per_h, 1
        case "air_temperature" | "dew_point_temperature":
            return settings.step_temperature_k_per_h, 1
        case "air_pressure":
            return settings.step_pressure_pa_per_3h, 3
    return None, 1


def _change(reading: Reading, values: Values, hours: int) -> Values:
    """Change over that many hours; NaN where the earlier interval is absent."""
    back = intervals_in(reading, 60.0 * hours)
    stamps = instants(index_of(reading))
    change = np.full(len(values), np.nan)
    there = stamps[back:] - stamps[:-back] == back * reading.interval.to_timedelta64()
    change[back:] = np.where(there, values[back:] - values[:-back], np.nan)
    return change


def _front(reading: Reading, settings: CheckSettings) -> Mask:
    """Where the wind turns or its speed steps within an hour: a front passes."""
    front = np.zeros(len(reading.frame), dtype=bool)
    back = intervals_in(reading, 60.0)
    vane = nearest_vane(reading.settings, 0.0)
    if vane is not None:
        direction = values_of(reading, vane)
        turn = np.abs(direction_difference(direction[back:], direction[:-back]))
        cup = nearest_speed(reading.settings, vane.height_m)
        windy = values_of(reading, cup)[back:] >= settings.vane_moves_above_m_s
        front[back:] |= windy & (turn > settings.front_turn_deg)
    for cup in reading.settings.mean_speeds:
        gain = np.abs(_change(reading, values_of(reading, cup), 1))
        front |= gain > _SHARED * settings.step_speed_m_s_per_h
    return front


def spike_spans(reading: Reading, settings: CheckSettings) -> pd.DataFrame:
    """Single values far from both neighbours that no other sensor shares.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and thresholds.

    Returns
    -------
    DataFrame
        Spans of rule ``spike``, one interval each; the measure is the departure from the mean
        of the neighbours.

    Notes
    -----
    A value stands out if it lies on one side of both neighbours, from each by more than half the
    hourly step of MEA-9 (more, as the root of the interval, beyond ten minutes) and by
    ``spike_spreads`` robust spreads of such departures, which grow
    with the speed. Another sensor of the same kind that departs the same way makes it weather.
    Without such a sensor a squall cannot be told from a spike: speeds are then held to twice the
    departure.
    """
    tables = []
    for channel in reading.settings.channels:
        limit, _ = _step(channel, settings)
        if channel.quantity == "relative_humidity":
            limit = 0.3  # of saturation within one interval; common practice
        if limit is None or channel.statistic != "mean":
            continue
        values = values_of(reading, channel)
        departure = _departure(reading, values)
        scale = np.maximum(values - departure, 1.0) if channel.quantity in SPEEDS else None
        usual = spread(departure if scale is None else departure / scale)
        # Over a longer interval weather changes more from one value to the next.
        longer = math.sqrt(max(reading.settings.interval_min / 10.0, 1.0))
        least = longer * (0.5 * limit if channel.quantity in SPEEDS else limit)
        bound = np.maximum(
            least, settings.spike_spreads * usual * (1.0 if scale is None else scale)
        )
        others = [
            other
            for other in reading.settings.channels
            if other.quantity == channel.quantity
            and other.statistic == "mean"
            and other.name != channel.name
        ]
        if not others and channel.quantity in SPEEDS:
            bound = 2.0 * bound
        large = np.abs(departure) > bound
        if not large.any():
            continue
        for other in others:
            shared = _departure(reading, values_of(reading, other))
            large &= ~(shared * np.sign(departure) > _SHARED * np.abs(departure))
        tables.append(
            spans_of(
                large,
                index_of(reading),
                reading.interval,
                channel=channel.name,
                rule="spike",
                reason="a single value far from both neighbours, seen by no other sensor",
                threshold=float(least),
                measure=departure,
            )
        )
    return joined(tables)


def _departure(reading: Reading, values: Values) -> Values:
    """Value less the nearer of its neighbours, if it lies beyond both; else zero."""
    stamps = instants(index_of(reading))
    out = np.zeros(len(values))
    if len(values) < 3:
        return out
    before, here, after = values[:-2], values[1:-1], values[2:]
    near = stamps[2:] - stamps[:-2] == 2 * reading.interval.to_timedelta64()
    up = here - np.maximum(before, after)
    down = here - np.minimum(before, after)
    beyond = np.where(up > 0, up, np.where(down < 0, down, 0.0))
    out[1:-1] = np.where(near & np.isfinite(beyond), beyond, 0.0)
    return out
