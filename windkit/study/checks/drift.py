"""Slow or lasting changes of a cup against the others: worn bearings, a wrong cup swapped in.

A cup is held against its pair, or against a profile through the other heights, day by day, free of
the mast's shadow. Here changes of level and trends are found and listed from where they begin.
Faults of a known factor (units, certificates) are in `calibration`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.study.checks.comparing import (
    Expected,
    day_numbers,
    expected_speed,
    index_of,
    median_by,
    middle,
    spread,
    values_of,
)
from windkit.study.checks.shadow import Shadow, free_of_shadow
from windkit.study.checks.spans import joined, one_span
from windkit.study.checks.thresholds import CheckSettings
from windkit.study.reading import Reading
from windkit.study.stations import ChannelSettings

__all__ = [
    "Wear",
    "daily_ratio",
    "drift_spans",
    "find_wear",
]

Values = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Fewest days of a record in which a trend is looked for.
_FEWEST_DAYS = 60
#: Fewest intervals of a day that give a daily ratio.
_FEWEST_A_DAY = 6
#: A trend must explain this many times what noise explains, by the F statistic.
_LEAST_F = 30.0
#: Days on either side of a change of level.
_LEVEL_DAYS = 10
#: Days on either side of a step that are held against a third cup: few, for shear has seasons.
_BESIDE_DAYS = 20


@dataclass(frozen=True)
class Wear:
    """A lasting change of a cup.

    Attributes
    ----------
    channel : str
        The cup.
    first_day : int
        Day of the record on which the change begins.
    change : float
        Change of level from before to the end, as a fraction.
    per_day : float
        Slope, as a fraction per day; zero for a step.
    strength : float
        F statistic of the trend, or step over its standard error squared.
    expected : Expected
        What the cup was held against.
    """

    channel: str
    first_day: int
    change: float
    per_day: float
    strength: float
    expected: Expected


def daily_ratio(reading: Reading, expected: Expected) -> Values:
    """Median of a cup's log ratio for each day of the record, NaN where too little is known."""
    days = day_numbers(reading)
    return median_by(expected.log_ratio, days, int(days[-1]) + 1, _FEWEST_A_DAY)


def drift_spans(
    reading: Reading, settings: CheckSettings, shadows: list[Shadow] | None = None
) -> pd.DataFrame:
    """Cups whose level changes slowly, or once for good.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and the change that is worth a look.
    shadows : list of Shadow, optional
        The mast's shadows, if they are at hand.

    Returns
    -------
    DataFrame
        Spans of rule ``drift`` from where the change exceeds ``drift_change`` to the end of the
        record; the measure is the change at the end, as a fraction.
    """
    tables = []
    for wear in find_wear(reading, settings, shadows):
        days = day_numbers(reading)
        first = wear.first_day
        if wear.per_day:
            first += math.ceil(settings.drift_change / abs(wear.per_day))
        how = (
            f"drifts by {100 * wear.per_day * 365.25:+.2g} % a year"
            if wear.per_day
            else f"changes its level by {100 * wear.change:+.2g} %"
        )
        start = int(np.searchsorted(days, first))
        values = values_of(reading, reading.settings.channel(wear.channel))
        tables.append(
            one_span(
                start,
                len(days),
                index_of(reading),
                reading.interval,
                channel=wear.channel,
                rule="drift",
                reason=f"{how} against {', '.join(wear.expected.others)} ({wear.expected.basis})",
                threshold=settings.drift_change,
                measure=wear.change,
                count=int(np.isfinite(values[start:]).sum()),
            )
        )
    return joined(tables)


def find_wear(
    reading: Reading, settings: CheckSettings, shadows: list[Shadow] | None = None
) -> list[Wear]:
    """Lasting changes of cups, each charged to the cup that made it.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        As in `drift_spans`.
    shadows : list of Shadow, optional
        The mast's shadows, if they are at hand.

    Returns
    -------
    list of Wear
        One for each cup that changes.

    Notes
    -----
    A broken line, level up to a day and straight from there, is fitted to the daily ratios for
    every day; so is a step. The better one counts if it changes the level by ``drift_change``
    and explains far more than noise. A cup that is expected from a cup which changes, seems to
    change too: the ones held against a pair or between heights are believed first, and the
    others are held anew without them.
    """
    free = free_of_shadow(reading, settings, shadows)
    changed: list[Wear] = []
    for basis in ("pair", "between", "beyond"):
        for cup in reading.settings.mean_speeds:
            if cup.name in {wear.channel for wear in changed}:
                continue
            guilty = tuple(wear.channel for wear in changed)
            expected = expected_speed(
                reading, cup, pair_height=settings.pair_height_m, free=free, leave_out=guilty
            )
            if expected is None or expected.basis != basis:
                continue
            wear = _wear(reading, settings, cup, expected)
            if wear is None:
                continue
            if basis == "pair":
                wear = _charged(reading, settings, wear, free)
            if wear.channel not in {other.channel for other in changed}:
                changed.append(wear)
    return changed


def _charged(reading: Reading, settings: CheckSettings, wear: Wear, free: dict[str, Mask]) -> Wear:
    """Of a pair, the cup that steps against a third one, or else the one that falls."""
    one = reading.settings.channel(wear.channel)
    other = reading.settings.channel(wear.expected.others[0])
    thirds = [c for c in reading.settings.mean_speeds if c.name not in {one.name, other.name}]
    sign = 1.0
    # Worn bearings read low; a wrong sensor can read either way.
    own, others = -wear.change, 0.0
    if thirds and not wear.per_day:
        third = min(thirds, key=lambda cup: abs(cup.height_m - one.height_m))
        days = day_numbers(reading)
        before = (days >= wear.first_day - _BESIDE_DAYS) & (days < wear.first_day)
        after = (days >= wear.first_day) & (days < wear.first_day + _BESIDE_DAYS)
        moves = []
        for cup in (one, other):
            ratio = _log_ratio(reading, cup, third, free)
            change = middle(ratio[after]) - middle(ratio[before])
            moves.append(abs(change))
        own, others = moves
    if own < others:
        sign, one, other = -1.0, other, one
    flipped = Expected(
        sign * wear.expected.log_ratio, sign * wear.expected.level, "pair", (other.name,)
    )
    return Wear(
        one.name, wear.first_day, sign * wear.change, sign * wear.per_day, wear.strength, flipped
    )


def _log_ratio(
    reading: Reading, one: ChannelSettings, other: ChannelSettings, free: dict[str, Mask]
) -> Values:
    first, second = values_of(reading, one), values_of(reading, other)
    usable = (first > 4.0) & (second > 4.0) & free[one.name] & free[other.name]
    return np.log(np.where(usable, first / np.where(usable, second, 1.0), np.nan))


def _wear(
    reading: Reading, settings: CheckSettings, cup: ChannelSettings, expected: Expected
) -> Wear | None:
    series = daily_ratio(reading, expected)
    at = np.flatnonzero(np.isfinite(series))
    if len(at) < _FEWEST_DAYS:
        return None
    values = series[at]
    # Odd days (ice, outages) would pull a straight line.
    noise = max(spread(np.diff(values)) / math.sqrt(2.0), 1e-9)
    smooth = pd.Series(values).rolling(9, center=True, min_periods=3).median().to_numpy()
    usable = np.abs(values - smooth) <= 5.0 * noise
    at, values = at[usable], values[usable]
    if len(at) < _FEWEST_DAYS:
        return None
    best = max((_broken_line(at, values), _step(at, values)), key=lambda fit: fit[3])
    first, change, per_day, strength = best
    # Neighbouring days are alike: fewer of them count.
    memory = float(np.corrcoef(values[1:], values[:-1])[0, 1])
    residual_memory = min(max(_residual_memory(at, values, first, per_day, change), 0.0), 0.95)
    effective = strength * (1 - residual_memory) / (1 + residual_memory)
    if not math.isfinite(memory) or abs(change) < settings.drift_change or effective < _LEAST_F:
        return None
    return Wear(cup.name, first, change, per_day, effective, expected)


def _broken_line(at: NDArray[np.intp], values: Values) -> tuple[int, float, float, float]:
    """Best line that is level up to a day and straight from there: day, change, slope, F."""
    best = (0, 0.0, 0.0, -1.0)
    total = float(np.sum((values - values.mean()) ** 2))
    for start in np.linspace(at[0], at[-1] - (at[-1] - at[0]) / 8, 60).astype(int):
        ramp = np.maximum(at - start, 0.0)
        centred = ramp - ramp.mean()
        slope = float(centred @ values / (centred @ centred))
        left = total - slope * float(centred @ values)
        strength = (total - left) / max(left / (len(at) - 3), 1e-18)
        if strength > best[3]:
            best = (int(start), slope * float(at[-1] - start), slope, strength)
    return best


def _step(at: NDArray[np.intp], values: Values) -> tuple[int, float, float, float]:
    """Best single step: day, change, zero, F."""
    count = len(values)
    left = np.arange(_LEVEL_DAYS, count - _LEVEL_DAYS + 1)
    sums = np.cumsum(values)
    change = (sums[-1] - sums[left - 1]) / (count - left) - sums[left - 1] / left
    explained = change**2 * left * (count - left) / count
    total = float(np.sum((values - values.mean()) ** 2))
    strength = explained / np.maximum((total - explained) / (count - 3), 1e-18)
    best = int(np.argmax(strength))
    return int(at[left[best]]), float(change[best]), 0.0, float(strength[best])


def _residual_memory(
    at: NDArray[np.intp], values: Values, first: int, per_day: float, change: float
) -> float:
    fitted = per_day * np.maximum(at - first, 0.0) if per_day else change * (at >= first)
    left = values - fitted
    return float(np.corrcoef(left[1:], left[:-1])[0, 1])
