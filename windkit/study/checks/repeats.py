"""Checks for values that come again: copied blocks, and codes that mean no value.

Each function takes a reading and thresholds and gives spans. A single value that does not move is
in `values` (stuck).
"""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.study.checks.comparing import index_of, values_of
from windkit.study.checks.spans import instants, joined, runs, spans_of
from windkit.study.checks.thresholds import CheckSettings
from windkit.study.reading import Reading
from windkit.study.stations import SPEEDS, ChannelSettings

__all__ = ["missing_code_spans", "repeated_block_spans"]

Values = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Shortest and longest block that is compared [intervals].
_SHORTEST_BLOCK, _LONGEST_BLOCK = 12, 144
#: Share of a block's values that must differ from the one before.
_LEAST_MOVING = 0.5
#: A code is entered at least so often; one long spell is a stuck sensor.
_FEWEST_ENTRIES = 5
#: Values on either side that show how often a value near a code stands.
_NEIGHBOURS = 12


def repeated_block_spans(reading: Reading, settings: CheckSettings) -> pd.DataFrame:
    """Blocks of values that stand a second time, in the same channel or in another of its kind.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and thresholds.

    Returns
    -------
    DataFrame
        Spans of rule ``repeated_block`` on the later block; the measure is its count. Which of
        the two is the copy, nobody can tell from the values.

    Notes
    -----
    Windows of equal length are compared by a hash of their values. The length is such that
    chance brings ``stuck_false_alarms`` equal windows: with q the probability that two changes
    from value to value are equal, N windows bring N**2/2 q**n pairs. Windows that hardly move
    are left out.
    """
    # What was copied was copied in rows: the means show it.
    channels = [c for c in reading.settings.channels if c.statistic == "mean"]
    groups: dict[str, list[ChannelSettings]] = {}
    for channel in channels:
        groups.setdefault(channel.quantity, []).append(channel)
    tables = []
    for group in groups.values():
        tables += _repeated(reading, settings, group)
    return joined(tables)


def _repeated(
    reading: Reading, settings: CheckSettings, group: list[ChannelSettings]
) -> list[pd.DataFrame]:
    stamps = instants(index_of(reading))
    step = reading.interval.to_timedelta64()
    joins = np.diff(stamps) == step
    length = max(_block_length(values_of(reading, c), settings, len(group)) for c in group)
    if length > min(_LONGEST_BLOCK, len(stamps) // 2):
        return []
    hashes: list[NDArray[np.uint64]] = []
    places: list[NDArray[np.intp]] = []
    owners: list[NDArray[np.int64]] = []
    for number, channel in enumerate(group):
        found, at = _windows(
            values_of(reading, channel), joins, length, _rests_below(reading, channel)
        )
        hashes.append(found)
        places.append(at)
        owners.append(np.full(len(at), number, dtype=np.int64))
    hashed, place, owner = (np.concatenate(part) for part in (hashes, places, owners))
    order = np.argsort(hashed, kind="stable")
    hashed, place, owner = hashed[order], place[order], owner[order]
    new = np.ones(len(hashed), dtype=bool)
    new[1:] = hashed[1:] != hashed[:-1]
    if new.all():
        return []
    # Of equal windows the earliest is taken for the first, whichever channel it is in.
    group_of = np.cumsum(new) - 1
    earliest = np.lexsort((owner, place, group_of))
    place, owner = place[earliest], owner[earliest]
    first = np.flatnonzero(new)[group_of]
    again = np.flatnonzero(~new)
    tables = []
    for number, channel in enumerate(group):
        mine = again[owner[again] == number]
        if not len(mine):
            continue
        mask = np.zeros(len(stamps), dtype=bool)
        for offset in range(length):
            mask[place[mine] + offset] = True
        sources = {int(place[m]): (int(place[first[m]]), int(owner[first[m]])) for m in mine}
        for start, stop in zip(*runs(mask, index_of(reading), reading.interval), strict=True):
            origin, whose = sources[int(start)]
            if origin == start and stop - start < _least_alike(
                values_of(reading, channel), values_of(reading, group[whose]), settings
            ):
                continue
            block = np.zeros(len(stamps), dtype=bool)
            block[start:stop] = True
            tables.append(
                spans_of(
                    block,
                    index_of(reading),
                    reading.interval,
                    channel=channel.name,
                    rule="repeated_block",
                    reason=f"the same values as {group[whose].name} from "
                    f"{str(stamps[origin])[:16]}Z",
                    threshold=float(length),
                )
            )
    return tables


def _block_length(values: Values, settings: CheckSettings, channels: int) -> int:
    change = np.diff(values)
    change = change[np.isfinite(change)]
    if not len(change):
        return _LONGEST_BLOCK + 1
    counts = np.unique(np.round(change, 9), return_counts=True)[1]
    equal = float(np.sum((counts / counts.sum()) ** 2))
    # Weather changes in spells, so that small changes follow small ones: allow for it.
    equal = min(math.sqrt(equal), 0.95)
    pairs = 0.5 * (len(values) * channels) ** 2
    length = math.log(settings.stuck_false_alarms / pairs) / math.log(equal)
    return max(_SHORTEST_BLOCK, math.ceil(length))


def _least_alike(one: Values, other: Values, settings: CheckSettings) -> int:
    """How long two sensors may show equal values at one time by chance."""
    both = np.isfinite(one) & np.isfinite(other)
    # As in spells of weather below: equal values follow equal values.
    share = min(math.sqrt(float(np.mean(one[both] == other[both])) + 1e-12), 0.99)
    return math.ceil(math.log(settings.stuck_false_alarms / max(both.sum(), 1)) / math.log(share))


def _rests_below(reading: Reading, channel: ChannelSettings) -> float:
    """Speeds of a calm are alike and say nothing."""
    return reading.settings.calm_below_m_s if channel.quantity in SPEEDS else -math.inf


def _windows(
    values: Values, joins: Mask, length: int, rests_below: float
) -> tuple[NDArray[np.uint64], NDArray[np.intp]]:
    """Hash of each window that is whole and moves, and where it begins."""
    count = len(values) - length + 1
    factors = np.random.default_rng(0).integers(1, 2**63, length, dtype=np.uint64) | np.uint64(1)
    bits = (values + 0.0).view(np.uint64)  # minus zero becomes zero
    hashed = np.zeros(count, dtype=np.uint64)
    for offset in range(length):
        part = bits[offset : offset + count]
        hashed += (part ^ (part >> np.uint64(29))) * factors[offset]
    moves = np.concatenate([[False], values[1:] != values[:-1]]) & (values >= rests_below)
    whole = _sums(np.isfinite(values), length) == length
    whole &= np.concatenate([_sums(joins, length - 1), []])[:count] == length - 1
    whole &= _sums(moves, length) >= _LEAST_MOVING * length
    at = np.flatnonzero(whole)
    return hashed[at], at


def _sums(mask: Mask, length: int) -> NDArray[np.int64]:
    """How many are true in each window of that length."""
    total = np.concatenate([[0], np.cumsum(mask)])
    return total[length:] - total[:-length]


def missing_code_spans(reading: Reading, settings: CheckSettings) -> pd.DataFrame:
    """One exact value that comes far too often, and by jumps: a code for no value.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and thresholds.

    Returns
    -------
    DataFrame
        Spans of rule ``missing_code``; the measure is the value in the library's unit. If it is
        a code, its text belongs into ``missing`` of the station.

    Notes
    -----
    A code stands ``code_count`` times or more, ``code_excess`` times as often as the values next
    to it in size, and is mostly reached from a value further away than nine tenths of all steps.
    The floor of a cup is reached in small steps and is no code.
    """
    tables = []
    for channel in reading.settings.channels:
        if channel.statistic == "sd":
            continue  # a spread piles up at zero and at one digit, rightly
        values = values_of(reading, channel)
        known = np.isfinite(values)
        distinct, counts = np.unique(values[known], return_counts=True)
        if len(distinct) < 2 * _NEIGHBOURS:
            continue
        steps = np.abs(np.diff(values))
        usual = np.nanquantile(steps, 0.9)
        around = _neighbour_mean(counts)
        for at in np.flatnonzero(
            (counts >= settings.code_count) & (counts > settings.code_excess * around)
        ):
            mask = values == distinct[at]
            entries = np.flatnonzero(mask[1:] & ~mask[:-1] & known[:-1])
            if len(entries) < _FEWEST_ENTRIES or np.median(steps[entries]) <= usual:
                continue
            tables.append(
                spans_of(
                    mask,
                    index_of(reading),
                    reading.interval,
                    channel=channel.name,
                    rule="missing_code",
                    reason=f"this one value stands {counts[at]} times, values near it "
                    f"{around[at]:.3g} times, and it is reached by jumps",
                    threshold=settings.code_excess,
                    measure=values,
                )
            )
    return joined(tables)


def _neighbour_mean(counts: NDArray[np.int64]) -> Values:
    """Mean count of the values next in size, the value itself left out."""
    width = 2 * _NEIGHBOURS + 1
    total = np.convolve(counts, np.ones(width), mode="same")
    there = np.convolve(np.ones(len(counts)), np.ones(width), mode="same")
    return (total - counts) / np.maximum(there - 1, 1)
