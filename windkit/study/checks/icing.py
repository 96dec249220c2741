"""Ice on sensors: several signs together, in the cold.

No sign is ice by itself: a vane rests in a calm, cups slow down in a lull, cold air is often
humid. Where two or more come together in the cold for long enough, the sensors that show them are
listed until they move again.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.circular import direction_difference
from windkit.study.checks.comparing import (
    index_of,
    intervals_in,
    long_runs,
    nearest_speed,
    siblings,
    values_of,
)
from windkit.study.checks.shadow import Shadow, free_of_shadow
from windkit.study.checks.spans import joined, spans_of
from windkit.study.checks.thresholds import CheckSettings
from windkit.study.reading import Reading
from windkit.study.stations import ChannelSettings

__all__ = ["icing_spans"]

Values = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: A vane whose bearing and spread stay within this does not move [deg]; common practice.
_STILL_DEG = 0.6
#: Another cup at this speed says that there is wind [m/s].
_WINDY = 3.0
#: A pause in the signs no longer than this belongs to the event [min].
_PAUSE_MIN = 180.0


@dataclass(frozen=True)
class _Sign:
    channel: ChannelSettings
    words: str
    mask: Mask


def icing_spans(
    reading: Reading, settings: CheckSettings, shadows: list[Shadow] | None = None
) -> pd.DataFrame:
    """Sensors that stand still or read low in the cold, by several signs together.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and thresholds.
    shadows : list of Shadow, optional
        The mast's shadows, if they are at hand.

    Returns
    -------
    DataFrame
        Spans of rule ``icing`` on each sensor that shows a sign, all its statistics; the measure
        is the air temperature [K], the one furthest from zero kelvin. Empty without a
        thermometer: nothing else tells ice from a broken sensor.

    Notes
    -----
    Signs, each for ``icing_shortest_min`` or longer at less than ``icing_below_k``: a vane whose
    bearing does not move; a cup at its floor while another turns or the vane moves; a cup lower
    than its neighbours by ``icing_low_share``; everything still for ``icing_calm_min``. Ice is
    said where two sensors show a sign, or one does and the humidity is ``icing_humidity`` or
    more. Pauses of three hours belong to the event as long as it stays cold.
    """
    thermometers = [
        c
        for c in reading.settings.channels
        if c.quantity == "air_temperature" and c.statistic == "mean"
    ]
    if not thermometers:
        return joined([])
    temperature = values_of(reading, thermometers[0])
    cold = _carried(temperature, intervals_in(reading, _PAUSE_MIN)) < settings.icing_below_k
    if not cold.any():
        return joined([])
    signs = _signs(reading, settings, cold, free_of_shadow(reading, settings, shadows))
    if not signs:
        return joined([])
    showing = np.sum([sign.mask for sign in signs], axis=0)
    humid = np.zeros(len(cold), dtype=bool)
    for channel in reading.settings.channels:
        if channel.quantity == "relative_humidity" and channel.statistic == "mean":
            humid |= values_of(reading, channel) >= settings.icing_humidity
    ice = (showing >= 2) | ((showing == 1) & humid)
    ice = _closed(ice, cold, intervals_in(reading, _PAUSE_MIN))
    tables = []
    by_sensor: dict[str, list[_Sign]] = {}
    for sign in signs:
        by_sensor.setdefault(sign.channel.name, []).append(sign)
    for own in by_sensor.values():
        sensor = own[0].channel
        shown = np.logical_or.reduce([sign.mask for sign in own])
        mask = _closed(shown & ice, cold & ice, intervals_in(reading, _PAUSE_MIN))
        rest = _still(reading, sensor) if sensor.is_direction else _at_floor(reading, sensor)
        mask = _until_it_moves(mask, rest & cold)
        words = ", ".join(sorted({sign.words for sign in own if (sign.mask & mask).any()}))
        for channel in siblings(reading.settings, sensor):
            tables.append(
                spans_of(
                    mask & np.isfinite(values_of(reading, channel)),
                    index_of(reading),
                    reading.interval,
                    channel=channel.name,
                    rule="icing",
                    reason=f"cold, and signs of ice: {words}",
                    threshold=settings.icing_below_k,
                    measure=np.where(np.isfinite(temperature), temperature, 0.0),
                )
            )
    return joined(tables)


def _signs(
    reading: Reading, settings: CheckSettings, cold: Mask, free: dict[str, Mask]
) -> list[_Sign]:
    needed = intervals_in(reading, settings.icing_shortest_min)
    station = reading.settings
    vanes = station.directions
    cups = station.mean_speeds
    still_vane = {vane.name: _still(reading, vane) for vane in vanes}
    floor = {cup.name: _at_floor(reading, cup) for cup in cups}
    fastest = np.full(len(cold), 0.0)
    for cup in cups:
        fastest = np.fmax(fastest, values_of(reading, cup))
    signs = []
    for vane in vanes:
        cup = nearest_speed(station, vane.height_m)
        # In a calm a vane may rest; a cup at its floor beside it says nothing either way.
        resting = (values_of(reading, cup) < _WINDY) & (fastest < _WINDY)
        unmoved = still_vane[vane.name] & ~resting
        # Whole degrees, or tens of them, repeat by chance: as often as in warm air.
        chance = _run_by_chance(unmoved[~cold], int(cold.sum()), settings)
        mask = long_runs(unmoved & cold, max(needed, chance))
        signs.append(_Sign(vane, "vane does not move", mask))
    for cup in cups:
        others = [other for other in cups if other.name != cup.name]
        windy = np.zeros(len(cold), dtype=bool)
        for other in others:
            windy |= values_of(reading, other) >= _WINDY
        mask = long_runs(floor[cup.name] & cold & windy, needed)
        signs.append(_Sign(cup, "cup at its floor while others turn", mask))
        low = _reads_low(reading, settings, cup, others, free)
        signs.append(_Sign(cup, "cup lower than its neighbours", long_runs(low & cold, needed)))
    long = intervals_in(reading, settings.icing_calm_min)
    if cups:
        quiet = np.logical_and.reduce([floor[cup.name] for cup in cups])
        still = [still_vane[vane.name] for vane in vanes]
        if still:
            quiet &= np.logical_and.reduce(still)
        frozen = long_runs(quiet & cold, long)
        signs += [_Sign(cup, "all still for long", frozen) for cup in cups]
        signs += [_Sign(vane, "all still for long", frozen) for vane in vanes]
    return [sign for sign in signs if sign.mask.any()]


def _run_by_chance(still_when_warm: Mask, count: int, settings: CheckSettings) -> int:
    """How long a vane must be still to be more than coarse digits, from how it is when warm."""
    if not len(still_when_warm) or not count:
        return 1
    share = min(max(float(still_when_warm.mean()), 1e-6), 0.95)
    return math.ceil(1 + math.log(settings.stuck_false_alarms / count) / math.log(share))


def _still(reading: Reading, vane: ChannelSettings) -> Mask:
    """Where a vane's bearing does not move, and its spread, if recorded, says so too."""
    direction = values_of(reading, vane)
    turn = np.abs(direction_difference(direction[1:], direction[:-1])) <= _STILL_DEG
    still = np.concatenate([[False], turn])
    still[:-1] |= turn & still[1:]
    for other in siblings(reading.settings, vane):
        if other.statistic == "sd":
            moving = values_of(reading, other) > _STILL_DEG
            still &= ~moving
    return still


def _at_floor(reading: Reading, cup: ChannelSettings) -> Mask:
    values = values_of(reading, cup)
    if not np.isfinite(values).any():
        return np.zeros(len(values), dtype=bool)
    lowest = float(np.nanmin(values))
    floor: Mask = values <= max(lowest + 0.05, min(reading.settings.calm_below_m_s, 0.5))
    return floor


def _reads_low(
    reading: Reading,
    settings: CheckSettings,
    cup: ChannelSettings,
    others: list[ChannelSettings],
    free: dict[str, Mask],
) -> Mask:
    """Where a cup lies below what every neighbour usually means for it."""
    if not others:
        return np.zeros(len(reading.frame), dtype=bool)
    values = values_of(reading, cup)
    low = np.ones(len(values), dtype=bool)
    near = sorted(others, key=lambda other: abs(other.height_m - cup.height_m))[:2]
    for other in near:
        speed = values_of(reading, other)
        usable = free[cup.name] & free[other.name] & (speed >= _WINDY)
        both = usable & (values >= _WINDY)
        if not both.any():
            return np.zeros(len(values), dtype=bool)
        ratio = float(np.median(values[both] / speed[both]))
        # Far cups are tied loosely: shear moves their ratio.
        apart = abs(other.height_m - cup.height_m) / max(cup.height_m, 1.0)
        share = settings.icing_low_share + 0.5 * apart
        low &= usable & (values < (1.0 - share) * ratio * speed)
    return low


def _until_it_moves(mask: Mask, rest: Mask) -> Mask:
    """The runs of rest that touch the mask, with the mask itself."""
    edges = np.flatnonzero(np.diff(np.concatenate([[False], rest, [False]]).astype(np.int8)))
    out = mask.copy()
    for start, stop in zip(edges[::2], edges[1::2], strict=True):
        if mask[max(start - 1, 0) : stop + 1].any():
            out[start:stop] = True
    return out


def _carried(values: Values, length: int) -> Values:
    """Last known value, carried forward over short gaps."""
    return np.asarray(pd.Series(values).ffill(limit=length), dtype=np.float64)


def _closed(mask: Mask, within: Mask, length: int) -> Mask:
    """Fill pauses of a mask that are short and stay within the other mask."""
    out = mask.copy()
    at = np.flatnonzero(mask)
    for start, stop in itertools.pairwise(at):
        if 1 < stop - start <= length and within[start:stop].all():
            out[start:stop] = True
    return out
