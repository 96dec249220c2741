"""What channels of one mast say about each other: pairs, neighbours, expected values.

Helpers for the checks that compare: which cups are a pair, which vane belongs to a cup, what a
cup should read after the others, robust spreads, days and levels. No spans are made here.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.study.checks.spans import instants
from windkit.study.reading import Reading
from windkit.study.stations import ChannelSettings, StationSettings

__all__ = [
    "MOVING_SPEED",
    "Expected",
    "day_numbers",
    "expected_speed",
    "index_of",
    "intervals_in",
    "levels",
    "long_runs",
    "median_by",
    "middle",
    "nearest_speed",
    "nearest_vane",
    "siblings",
    "speed_pairs",
    "spread",
    "values_of",
]

Values = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Ratios of cups are taken above this speed, where offsets no longer matter [m/s]; common
#: practice (calibrations begin at 4 m/s, IEC 61400-12-1).
MOVING_SPEED = 4.0
#: Standard deviation over median absolute deviation of a normal distribution.
_MAD = 1.4826


def values_of(reading: Reading, channel: ChannelSettings) -> Values:
    """A channel's values."""
    return reading.frame[channel.name].to_numpy()


def index_of(reading: Reading) -> pd.DatetimeIndex:
    """Starts of the reading's intervals."""
    assert isinstance(reading.frame.index, pd.DatetimeIndex)
    return reading.frame.index


def intervals_in(reading: Reading, minutes: float) -> int:
    """Whole intervals in a time, at least one."""
    return max(1, math.ceil(minutes / reading.settings.interval_min - 1e-9))


def day_numbers(reading: Reading) -> NDArray[np.int64]:
    """Day of each interval, counted from the first."""
    days = instants(index_of(reading)).astype("datetime64[D]").astype(np.int64)
    return days - days[0]


def speed_pairs(
    settings: StationSettings, height: float
) -> list[tuple[ChannelSettings, ChannelSettings]]:
    """Cups whose heights differ by no more than `height`, each pair once."""
    cups = settings.mean_speeds
    return [
        (one, other)
        for at, one in enumerate(cups)
        for other in cups[at + 1 :]
        if abs(one.height_m - other.height_m) <= height
    ]


def nearest_vane(settings: StationSettings, height: float) -> ChannelSettings | None:
    """The vane nearest to a height."""
    vanes = settings.directions
    return min(vanes, key=lambda vane: abs(vane.height_m - height)) if vanes else None


def nearest_speed(settings: StationSettings, height: float) -> ChannelSettings:
    """The cup nearest to a height."""
    return min(settings.mean_speeds, key=lambda cup: abs(cup.height_m - height))


def siblings(settings: StationSettings, channel: ChannelSettings) -> list[ChannelSettings]:
    """All channels of the same sensor: same kind, height and boom, any statistic."""
    wind = {"wind_speed", "wind_speed_of_gust"}
    kinds = wind if channel.quantity in wind else {channel.quantity}
    return [
        other
        for other in settings.channels
        if other.quantity in kinds
        and other.height_m == channel.height_m
        and other.boom_bearing_deg == channel.boom_bearing_deg
    ]


def middle(values: Values) -> float:
    """Median of what is known; NaN if nothing is."""
    known = values[np.isfinite(values)]
    return float(np.median(known)) if len(known) else math.nan


def spread(values: Values) -> float:
    """Robust standard deviation: scaled median absolute deviation, NaN skipped."""
    known = values[np.isfinite(values)]
    if not len(known):
        return math.nan
    return float(_MAD * np.median(np.abs(known - np.median(known))))


def median_by(values: Values, group: NDArray[np.int64], count: int, least: int) -> Values:
    """Median of each group 0 .. count - 1; NaN where fewer than `least` values are known."""
    known = np.isfinite(values) & (group >= 0)
    # Sorting by value within group at once is far cheaper than a median per group.
    order = np.lexsort((values[known], group[known]))
    sorted_values = values[known][order]
    counts = np.bincount(group[known], minlength=count)
    first = np.concatenate([[0], np.cumsum(counts)[:-1]])
    out = np.full(count, np.nan)
    filled = counts >= max(least, 1)
    low = first[filled] + (counts[filled] - 1) // 2
    high = first[filled] + counts[filled] // 2
    out[filled] = 0.5 * (sorted_values[low] + sorted_values[high])
    return out


def long_runs(mask: Mask, length: int) -> Mask:
    """The runs of a mask that are at least `length` long."""
    if length <= 1 or not mask.any():
        return mask
    edges = np.flatnonzero(np.diff(np.concatenate([[False], mask, [False]]).astype(np.int8)))
    out = np.zeros(len(mask), dtype=bool)
    for start, stop in zip(edges[::2], edges[1::2], strict=True):
        if stop - start >= length:
            out[start:stop] = True
    return out


@dataclass(frozen=True)
class Expected:
    """What a cup should read after the others.

    Attributes
    ----------
    log_ratio : ndarray
        Logarithm of read over expected speed, level taken out; NaN where unknown.
    level : float
        The level that was taken out.
    basis : str
        ``pair`` (a cup at the same height), ``between`` (cups above and below) or ``beyond``
        (a profile through others, all above or all below).
    others : tuple of str
        Channels the expectation stands on.
    """

    log_ratio: Values
    level: float
    basis: str
    others: tuple[str, ...]


def expected_speed(
    reading: Reading,
    cup: ChannelSettings,
    *,
    pair_height: float,
    free: dict[str, Mask] | None = None,
    leave_out: tuple[str, ...] = (),
) -> Expected | None:
    """Hold a cup against the others: its pair, or a power law through other heights.

    Parameters
    ----------
    reading : Reading
        The record.
    cup : ChannelSettings
        The cup in question.
    pair_height : float
        Cups closer than this are a pair [m].
    free : dict of str to ndarray of bool, optional
        Where each cup stands free of the mast's shadow; everywhere if left out.
    leave_out : tuple of str
        Channels not to stand on.

    Returns
    -------
    Expected or None
        None if no other cup serves.
    """
    free = free or {}
    everywhere = np.ones(len(reading.frame), dtype=bool)

    def log_speed(channel: ChannelSettings) -> Values:
        speed = values_of(reading, channel)
        usable = (speed >= MOVING_SPEED) & free.get(channel.name, everywhere)
        return np.log(np.where(usable, speed, np.nan))

    others = [c for c in reading.settings.mean_speeds if c.name not in {cup.name, *leave_out}]
    partners = [c for c in others if abs(c.height_m - cup.height_m) <= pair_height]
    if partners:
        expected = log_speed(partners[0])
        basis = "pair"
        used: tuple[str, ...] = (partners[0].name,)
    else:
        above = [c for c in others if c.height_m > cup.height_m]
        below = [c for c in others if c.height_m < cup.height_m]
        if above and below:
            high, low = _merged(above[-1], above), _merged(below[0], below)
            basis = "between"
        else:
            apart = above or below
            heights = sorted({c.height_m for c in apart}, key=lambda h: abs(h - cup.height_m))
            heights = [h for h in heights if abs(h - heights[0]) > pair_height or h == heights[0]]
            if len(heights) < 2:
                return None
            near, far = heights[:2]
            low = [c for c in apart if c.height_m == near]
            high = [c for c in apart if c.height_m == far]
            basis = "beyond"
        used = tuple(c.name for c in [*low, *high])
        z_low, z_high = math.log(low[0].height_m), math.log(high[0].height_m)
        share = (math.log(cup.height_m) - z_low) / (z_high - z_low)
        with np.errstate(invalid="ignore"):
            expected = (1 - share) * _mean([log_speed(c) for c in low]) + share * _mean(
                [log_speed(c) for c in high]
            )
    ratio = log_speed(cup) - expected
    level = middle(ratio)
    return Expected(ratio - level, level, basis, used)


def _merged(nearest: ChannelSettings, cups: list[ChannelSettings]) -> list[ChannelSettings]:
    return [cup for cup in cups if cup.height_m == nearest.height_m]


def _mean(parts: list[Values]) -> Values:
    """Mean of what is known at each time, NaN where nothing is."""
    stack = np.vstack(parts)
    known = np.isfinite(stack)
    count = known.sum(axis=0)
    total = np.where(known, stack, 0.0).sum(axis=0)
    return np.divide(total, count, out=np.full(stack.shape[1], np.nan), where=count > 0)


def levels(series: Values, *, step: float, shortest: int, sureness: float = 6.0) -> list[int]:
    """Where the level of a series of days changes: positions of the first day of each new level.

    Parameters
    ----------
    series : ndarray
        One value a day, NaN where unknown.
    step : float
        Least change of level that counts.
    shortest : int
        Least days with a value on either side.
    sureness : float
        Least change over its standard error, the noise being that between neighbouring days.

    Returns
    -------
    list of int
        Positions in `series`, rising; empty if the level holds.

    Notes
    -----
    The medians of the days before and after each day are compared, `shortest` days on either
    side, or ten if that is more; where they differ most there is a change. Neighbouring levels
    that then differ by less than `step` are one. A slow drift makes no change of level here.
    """
    at = np.flatnonzero(np.isfinite(series))
    reach = min(max(shortest, 10), len(at) // 2)
    if len(at) < 2 * shortest or reach < shortest:
        return []
    values = series[at]
    noise = max(spread(np.diff(values)) / math.sqrt(2.0), 1e-12)
    # Short windows see short levels, long ones small changes.
    cuts: set[int] = set()
    for width in {shortest, reach}:
        medians = np.median(np.lib.stride_tricks.sliding_window_view(values, width), axis=1)
        jump = np.abs(medians[width:] - medians[:-width])
        sure = max(step, sureness * 1.25 * noise * math.sqrt(2.0 / width))
        cuts |= {each + width for each in _peaks(jump, sure, shortest)}
    edges = [0, *sorted(cuts), len(values)]
    while True:
        middles = [float(np.median(values[a:b])) for a, b in itertools.pairwise(edges)]
        sizes = np.abs(np.diff(middles))
        lengths = np.diff(edges)
        if len(sizes) and sizes.min() < step:
            del edges[int(np.argmin(sizes)) + 1]
        elif len(sizes) and lengths.min() < shortest:
            # Too short to be a level: joined to the neighbour it resembles more.
            short = int(np.argmin(lengths))
            left = sizes[short - 1] if short else math.inf
            right = sizes[short] if short < len(sizes) else math.inf
            del edges[short if left <= right else short + 1]
        else:
            return [int(at[each]) for each in edges[1:-1]]


def _peaks(jump: Values, least: float, apart: int) -> list[int]:
    """Positions of the largest jumps, each the largest within `apart` on either side."""
    found: list[int] = []
    left = np.where(jump >= least, jump, -1.0)
    while len(left) and left.max() > 0:
        best = int(np.argmax(left))
        # A jump is a plateau of equal medians; its middle is the day.
        found.append(best)
        left[max(best - apart, 0) : best + apart + 1] = -1.0
    return found
