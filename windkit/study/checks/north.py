"""North of a vane: lasting changes against the second vane and against references.

A vane that is knocked, turned or wrongly aligned keeps a steady difference from every other. Here
daily mean differences are searched for changes of level; a month's table shows the levels.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.circular import direction_difference, mean_direction
from windkit.study.checks.comparing import (
    MOVING_SPEED,
    day_numbers,
    index_of,
    levels,
    nearest_speed,
    values_of,
)
from windkit.study.checks.spans import joined, one_span
from windkit.study.checks.thresholds import CheckSettings
from windkit.study.reading import Reading
from windkit.study.stations import ChannelSettings

__all__ = ["monthly_north", "north_spans"]

Values = NDArray[np.float64]

#: Fewest hours of a day with wind that give a daily difference.
_FEWEST_HOURS = 3.0
#: Fewest days of a level: shorter ones are the business of `vane_pair`.
_SHORTEST_DAYS = 10


def north_spans(
    reading: Reading, settings: CheckSettings, references: Sequence[Reading] = ()
) -> pd.DataFrame:
    """Stretches in which a vane's north is off by more than sensors are.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and the change that counts.
    references : sequence of Reading
        Long records from near the site. With one of them the vane that changed is known; with
        two vanes and no reference both are listed.

    Returns
    -------
    DataFrame
        Spans of rule ``north``; the measure is the change against the vane's commonest level,
        clockwise [deg].

    Notes
    -----
    Daily mean differences (unit vectors, wind of 4 m/s or more) are split into levels of ten
    days or more. The commonest level is taken for right; the edges are found to the interval
    against the second vane. Against a reference a change must be seen too, at half its size and
    of the same sign, or the other vane is charged.
    """
    vanes = reading.settings.directions
    tables = []
    for vane in vanes:
        others = [other for other in vanes if other.name != vane.name]
        if others:
            difference = _difference(reading, vane, values_of(reading, others[0]))
            name, step = others[0].name, settings.north_change_deg
        elif references:
            seen = _reference_direction(reading, references[0])
            if seen is None:
                continue
            difference = _difference(reading, vane, seen)
            name, step = references[0].settings.name, 2.0 * settings.north_change_deg
        else:
            continue
        for part, change in _off_levels(reading, difference, step):
            if others and not _is_charged(reading, vane, others[0], part, change, references):
                continue
            tables.append(
                one_span(
                    part.start,
                    part.stop,
                    index_of(reading),
                    reading.interval,
                    channel=vane.name,
                    rule="north",
                    reason=f"turned by {change:+.0f} deg against {name}",
                    threshold=step,
                    measure=change,
                    count=int(np.isfinite(values_of(reading, vane)[part]).sum()),
                )
            )
    return joined(tables)


def monthly_north(reading: Reading, references: Sequence[Reading] = ()) -> pd.DataFrame:
    """Mean difference of each vane from the second vane and from references, month by month.

    Parameters
    ----------
    reading : Reading
        The record.
    references : sequence of Reading
        Long records from near the site.

    Returns
    -------
    DataFrame
        ``vane``, ``against``, ``month``, ``difference`` [deg, signed] and ``count``.
    """
    month = index_of(reading).strftime("%Y-%m")
    rows = []
    for vane in reading.settings.directions:
        against = {
            other.name: values_of(reading, other)
            for other in reading.settings.directions
            if other.name != vane.name
        }
        for reference in references:
            seen = _reference_direction(reading, reference)
            if seen is not None:
                against[reference.settings.name] = seen
        for name, other in against.items():
            difference = _difference(reading, vane, other)
            for label, part in pd.Series(difference).groupby(np.asarray(month)):
                known = part.dropna().to_numpy()
                level = float(mean_direction(known % 360.0)) if len(known) else math.nan
                signed = (level + 180.0) % 360.0 - 180.0
                rows.append((vane.name, name, label, signed, len(known)))
    return pd.DataFrame(rows, columns=["vane", "against", "month", "difference", "count"])


def _difference(reading: Reading, vane: ChannelSettings, other: Values) -> Values:
    """Signed difference of a vane from other directions, in wind [deg]."""
    moving = values_of(reading, nearest_speed(reading.settings, vane.height_m)) >= MOVING_SPEED
    own = values_of(reading, vane)
    usable = moving & (own >= 0) & (own < 360) & (other >= 0) & (other < 360)
    return np.where(usable, direction_difference(own, other), np.nan)


def _reference_direction(reading: Reading, reference: Reading) -> Values | None:
    """Directions of a reference at the record's intervals, each held for its interval."""
    vanes = reference.settings.directions
    if not vanes:
        return None
    seen = reference.frame[vanes[0].name]
    cup = nearest_speed(reference.settings, vanes[0].height_m)
    seen = seen.where(reference.frame[cup.name] >= reference.settings.calm_below_m_s)
    found = seen.reindex(index_of(reading), method="ffill", tolerance=reference.interval)
    return np.asarray(found, dtype=np.float64)


def _daily(reading: Reading, difference: Values, least: int) -> Values:
    """Mean of unit vectors of each day's differences, unwrapped around their mean [deg]."""
    days = day_numbers(reading)
    known = np.isfinite(difference)
    angle = np.radians(np.where(known, difference, 0.0))
    count = np.bincount(days, weights=known)
    east = np.bincount(days, weights=np.where(known, np.sin(angle), 0.0))
    north = np.bincount(days, weights=np.where(known, np.cos(angle), 0.0))
    daily = np.where(count >= least, np.degrees(np.arctan2(east, north)), np.nan)
    centre = float(mean_direction(daily % 360.0))
    return daily if not math.isfinite(centre) else direction_difference(daily, centre)


def _off_levels(reading: Reading, difference: Values, step: float) -> list[tuple[slice, float]]:
    least = math.ceil(_FEWEST_HOURS * 60.0 / reading.settings.interval_min)
    daily = _daily(reading, difference, least)
    cuts = levels(daily, step=step, shortest=_SHORTEST_DAYS)
    if not cuts:
        return []
    days = day_numbers(reading)
    edges = [0, *(_edge(difference, days, cut) for cut in cuts), len(days)]
    parts = [slice(a, b) for a, b in itertools.pairwise(edges) if b > a]
    middles = [float(mean_direction(difference[part] % 360.0)) for part in parts]
    lengths = [int(np.isfinite(difference[part]).sum()) for part in parts]
    home = middles[int(np.argmax(lengths))]
    changes = [float(direction_difference(middle, home)) for middle in middles]
    return [
        (part, change) for part, change in zip(parts, changes, strict=True) if abs(change) >= step
    ]


def _edge(difference: Values, days: NDArray[np.int64], cut: int) -> int:
    """The interval at which a level changes, near the day it was found on."""
    start, stop = np.searchsorted(days, [cut - 3, cut + 3])
    known = np.flatnonzero(np.isfinite(difference[start:stop]))
    if len(known) < 4:
        return int(np.searchsorted(days, cut))
    angle = np.radians(difference[start:stop][known])
    left = np.arange(1, len(known))
    # Length of the two sums of unit vectors: largest where each side agrees with itself.
    east, north = np.cumsum(np.sin(angle)), np.cumsum(np.cos(angle))
    agreement = np.hypot(east[:-1], north[:-1]) + np.hypot(
        east[-1] - east[:-1], north[-1] - north[:-1]
    )
    return int(start + known[left[int(np.argmax(agreement))]])


def _is_charged(
    reading: Reading,
    vane: ChannelSettings,
    other: ChannelSettings,
    part: slice,
    change: float,
    references: Sequence[Reading],
) -> bool:
    """Whether a change between two vanes is this one's, by the first reference that can tell."""
    inside = np.zeros(len(reading.frame), dtype=bool)
    inside[part] = True
    for reference in references:
        seen = _reference_direction(reading, reference)
        if seen is None:
            continue
        moves = []
        for each in (vane, other):
            difference = _difference(reading, each, seen)
            before = mean_direction(difference[~inside] % 360.0)
            within = mean_direction(difference[inside] % 360.0)
            moves.append(float(direction_difference(within, before)))
        if not all(math.isfinite(move) for move in moves):
            continue
        # The other vane sees the same change with the opposite sign.
        return abs(moves[0] - change) <= abs(moves[1] + change)
    return True
