"""Checks of channels against each other at one time: order, gust, pairs, heights, vanes.

Each function takes a reading and thresholds and gives spans. Slow changes between sensors are in
`drift` and `north`; the mast's shadow is in `shadow`.
"""

from __future__ import annotations

import itertools

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.circular import direction_difference, mean_direction
from windkit.study.checks.comparing import (
    MOVING_SPEED,
    index_of,
    intervals_in,
    long_runs,
    nearest_speed,
    siblings,
    speed_pairs,
    spread,
    values_of,
)
from windkit.study.checks.shadow import Shadow, free_of_shadow
from windkit.study.checks.spans import joined, spans_of
from windkit.study.checks.thresholds import CheckSettings
from windkit.study.reading import Reading
from windkit.study.stations import ChannelSettings

__all__ = ["gust_spans", "height_spans", "order_spans", "pair_spans", "vane_pair_spans"]

#: A vane that turns less than this share of the other does not follow the wind.
_STUCK_SHARE = 0.25
#: A pause of light wind within one event [min].
_PAUSE_MIN = 360.0
#: Rounding of the file that an order may be off by [m/s or K].
_ROUNDING = 0.11


def order_spans(reading: Reading, settings: CheckSettings) -> pd.DataFrame:
    """Smallest above mean, or largest below mean: two columns that do not belong together.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and thresholds.

    Returns
    -------
    DataFrame
        Spans of rule ``order`` on the channel of the extreme; the measure is extreme less mean.
    """
    tables = []
    for channel in reading.settings.channels:
        if channel.is_direction or channel.statistic in {"mean", "sd"}:
            continue
        for mean in siblings(reading.settings, channel):
            if mean.statistic != "mean" or mean.quantity == "wind_speed_of_gust":
                continue
            difference = values_of(reading, channel) - values_of(reading, mean)
            wrong = (
                difference < -_ROUNDING if channel.statistic == "max" else difference > _ROUNDING
            )
            tables.append(
                spans_of(
                    wrong,
                    index_of(reading),
                    reading.interval,
                    channel=channel.name,
                    rule="order",
                    reason=f"{channel.statistic} on the wrong side of {mean.name}",
                    threshold=_ROUNDING,
                    measure=difference,
                )
            )
    return joined(tables)


def gust_spans(reading: Reading, settings: CheckSettings) -> pd.DataFrame:
    """Gusts larger than a multiple of their mean.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and thresholds.

    Returns
    -------
    DataFrame
        Spans of rule ``gust`` on the gust's channel; the measure is gust over mean.

    References
    ----------
    .. [1] Bailey et al. 1997, NREL/SR-440-22223, relational tests (MEA-8).
    """
    tables = []
    for channel in reading.settings.channels:
        is_gust = channel.quantity == "wind_speed_of_gust" or channel.statistic == "max"
        if not is_gust or channel.quantity not in {"wind_speed", "wind_speed_of_gust"}:
            continue
        mean = next((c for c in siblings(reading.settings, channel) if c.is_mean_speed), None)
        if mean is None:
            continue
        speed = values_of(reading, mean)
        known = speed >= settings.gust_mean_speed_m_s
        factor = values_of(reading, channel) / np.where(known, speed, np.nan)
        tables.append(
            spans_of(
                factor > settings.highest_gust_factor,
                index_of(reading),
                reading.interval,
                channel=channel.name,
                rule="gust",
                reason=f"gust over {mean.name} is large",
                threshold=settings.highest_gust_factor,
                measure=factor,
            )
        )
    return joined(tables)


def pair_spans(
    reading: Reading, settings: CheckSettings, shadows: list[Shadow] | None = None
) -> pd.DataFrame:
    """Two cups at one height that disagree, outside the mast's shadow.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and thresholds.
    shadows : list of Shadow, optional
        The mast's shadows, if they are at hand.

    Returns
    -------
    DataFrame
        Spans of rule ``pair`` on the cup that is further from the rest of the mast (the lower
        one if there is no other); the measure is its difference from the other [m/s].

    Notes
    -----
    The threshold is the handbook's, or what the site's own data teach (``learned_spreads`` times
    the robust spread), whichever is larger; the reason shows both.

    References
    ----------
    .. [1] Bailey et al. 1997, NREL/SR-440-22223, relational tests (MEA-8).
    """
    tables = []
    free = free_of_shadow(reading, settings, shadows)
    for one, other in speed_pairs(reading.settings, settings.pair_height_m):
        usable = free[one.name] & free[other.name]
        tables += _disagreement(
            reading, settings, one, other, usable, settings.pair_difference_m_s, "pair"
        )
    return joined(tables)


def height_spans(
    reading: Reading, settings: CheckSettings, shadows: list[Shadow] | None = None
) -> pd.DataFrame:
    """Cups at neighbouring heights that differ by more than a profile does.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and thresholds.
    shadows : list of Shadow, optional
        The mast's shadows, if they are at hand.

    Returns
    -------
    DataFrame
        Spans of rule ``heights``, as in `pair_spans`; the handbook's threshold grows with the
        difference of height.

    References
    ----------
    .. [1] Bailey et al. 1997, NREL/SR-440-22223, relational tests (MEA-8).
    """
    tables = []
    cups = reading.settings.mean_speeds
    free = free_of_shadow(reading, settings, shadows)
    for at, upper in enumerate(cups):
        below = [c for c in cups[at + 1 :] if upper.height_m - c.height_m > settings.pair_height_m]
        if not below:
            continue
        lower = below[0]
        limit = settings.height_difference_m_s_per_m * (upper.height_m - lower.height_m)
        usable = free[upper.name] & free[lower.name]
        tables += _disagreement(reading, settings, upper, lower, usable, limit, "heights")
    return joined(tables)


def _disagreement(
    reading: Reading,
    settings: CheckSettings,
    one: ChannelSettings,
    other: ChannelSettings,
    usable: NDArray[np.bool_],
    handbook: float,
    rule: str,
) -> list[pd.DataFrame]:
    first, second = values_of(reading, one), values_of(reading, other)
    known = usable & np.isfinite(first) & np.isfinite(second)
    moving = known & (np.fmax(first, second) >= MOVING_SPEED)
    both = moving & (np.fmin(first, second) > 0)
    if not both.any():
        return []
    ratio = float(np.median(first[both] / second[both]))
    difference = np.where(moving, first - ratio * second, np.nan)
    learned = settings.learned_spreads * spread(difference)
    limit = max(handbook, learned)
    apart = long_runs(
        np.abs(difference) > limit, intervals_in(reading, settings.shortest_relation_min)
    )
    if not apart.any():
        return []
    blame_one = _blamed(reading, settings, one, other, difference)
    return [
        spans_of(
            apart & blamed,
            index_of(reading),
            reading.interval,
            channel=channel.name,
            rule=rule,
            reason=f"differs from {partner.name} (handbook {handbook:.3g} m/s, this site's own "
            f"{learned:.3g} m/s)",
            threshold=limit,
            measure=sign * difference,
        )
        for channel, partner, blamed, sign in (
            (one, other, blame_one, 1.0),
            (other, one, ~blame_one, -1.0),
        )
    ]


def _blamed(
    reading: Reading,
    settings: CheckSettings,
    one: ChannelSettings,
    other: ChannelSettings,
    difference: NDArray[np.float64],
) -> NDArray[np.bool_]:
    """Where the first of two is the suspect: further from a third cup, or else reading low."""
    reads_low = difference < 0
    thirds = [cup for cup in reading.settings.mean_speeds if cup.name not in {one.name, other.name}]
    if not thirds:
        return reads_low
    middle = 0.5 * (one.height_m + other.height_m)
    third = values_of(reading, min(thirds, key=lambda cup: abs(cup.height_m - middle)))
    away = []
    for cup in (one, other):
        values = values_of(reading, cup)
        both = (values >= MOVING_SPEED) & (third >= MOVING_SPEED)
        level = float(np.median(values[both] / third[both])) if both.any() else 1.0
        away.append(np.abs(values - level * third))
    known = np.isfinite(away[0]) & np.isfinite(away[1])
    return np.where(known, away[0] > away[1], reads_low)


def vane_pair_spans(reading: Reading, settings: CheckSettings) -> pd.DataFrame:
    """Vanes that disagree for a while, their steady difference taken out.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and thresholds.

    Returns
    -------
    DataFrame
        Spans of rule ``vane_pair`` on the vane that hardly turns while they disagree, or that
        jumped as they parted; the measure is its difference from the other [deg].

    References
    ----------
    .. [1] Bailey et al. 1997, NREL/SR-440-22223, relational tests (MEA-8).
    """
    tables = []
    vanes = reading.settings.directions
    needed = intervals_in(reading, settings.shortest_relation_min)
    for upper, lower in itertools.pairwise(vanes):
        cup = nearest_speed(reading.settings, upper.height_m)
        moving = values_of(reading, cup) >= settings.vane_moves_above_m_s
        first, second = values_of(reading, upper), values_of(reading, lower)
        difference = np.where(moving, direction_difference(first, second), np.nan)
        level = float(mean_direction(difference % 360.0))
        if not np.isfinite(level):
            continue
        difference = direction_difference(difference, level)
        apart = long_runs(np.abs(difference) > settings.vane_difference_deg, needed)
        pause = intervals_in(reading, _PAUSE_MIN)
        upper_one = _blamed_vane(
            first, second, difference, apart, pause, settings.vane_difference_deg
        )
        for vane, partner, mask, sign in (
            (upper, lower, apart & upper_one, 1.0),
            (lower, upper, apart & ~upper_one, -1.0),
        ):
            tables.append(
                spans_of(
                    mask,
                    index_of(reading),
                    reading.interval,
                    channel=vane.name,
                    rule="vane_pair",
                    reason=f"differs from {partner.name} by more than their usual {level:.3g} deg",
                    threshold=settings.vane_difference_deg,
                    measure=sign * difference,
                )
            )
    return joined(tables)


def _blamed_vane(
    first: NDArray[np.float64],
    second: NDArray[np.float64],
    difference: NDArray[np.float64],
    apart: NDArray[np.bool_],
    pause: int,
    limit: float,
) -> NDArray[np.bool_]:
    """Where the first of two vanes is the suspect, event by event.

    The one that hardly turns is stuck; if both turn, the one that turned more from when they last
    agreed. Runs with no more than a pause of light wind between them are one event.
    """
    blamed = np.zeros(len(first), dtype=bool)
    turns = [np.concatenate([[0.0], np.abs(np.nan_to_num(_turn(v)))]) for v in (first, second)]
    agreed = np.flatnonzero(np.abs(difference) <= limit)
    at = np.flatnonzero(apart)
    events = np.split(at, np.flatnonzero(np.diff(at) > pause) + 1) if len(at) else []
    for event in events:
        start, stop = int(event[0]), int(event[-1]) + 1
        within = [float(turn[start + 1 : stop].sum()) for turn in turns]
        if min(within) < _STUCK_SHARE * max(within):
            blamed[start:stop] = within[0] < within[1]
            continue
        before = agreed[: np.searchsorted(agreed, start)]
        last = int(before[-1]) if len(before) else max(start - 1, 0)
        jump = [abs(float(direction_difference(v[start], v[last]))) for v in (first, second)]
        blamed[start:stop] = jump[0] > jump[1]
    return blamed


def _turn(direction: NDArray[np.float64]) -> NDArray[np.float64]:
    return direction_difference(direction[1:], direction[:-1])
