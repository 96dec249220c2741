"""Slow or lasting changes of a cup against the others: wear, calibration twice, another unit.

A cup is held against its pair, or against a profile through the other heights, day by day, free of
the mast's shadow. Here changes of level and trends are found and listed from where they begin.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.units import UNITS
from windkit.study.checks.comparing import (
    Expected,
    day_numbers,
    expected_speed,
    index_of,
    levels,
    median_by,
    spread,
    values_of,
)
from windkit.study.checks.shadow import free_of_shadow
from windkit.study.checks.spans import joined, one_span
from windkit.study.checks.thresholds import CheckSettings
from windkit.study.reading import Reading
from windkit.study.stations import ChannelSettings

__all__ = [
    "Wear",
    "calibration_twice_spans",
    "daily_ratio",
    "drift_spans",
    "find_wear",
    "unit_change_spans",
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
#: A level within this share of a unit's factor is that unit.
_NEAR_FACTOR = 0.04


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


def drift_spans(reading: Reading, settings: CheckSettings) -> pd.DataFrame:
    """Cups whose level changes slowly, or once for good.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and the change that is worth a look.

    Returns
    -------
    DataFrame
        Spans of rule ``drift`` from where the change exceeds ``drift_change`` to the end of the
        record; the measure is the change at the end, as a fraction.
    """
    tables = []
    for wear in find_wear(reading, settings):
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


def find_wear(reading: Reading, settings: CheckSettings) -> list[Wear]:
    """Lasting changes of cups, each charged to the cup that made it.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        As in `drift_spans`.

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
    free = free_of_shadow(reading, settings)
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
            change = float(np.nanmedian(ratio[after]) - np.nanmedian(ratio[before]))
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


def unit_change_spans(reading: Reading, settings: CheckSettings) -> pd.DataFrame:
    """Stretches in which a cup reads a unit's factor more or less than the others mean for it.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and thresholds.

    Returns
    -------
    DataFrame
        Spans of rule ``unit_change``; the measure is the factor met.

    Notes
    -----
    Days are split into levels; a level whose distance from the commonest is the factor of a unit
    of speed (knots, mph, km/h, ft/s and each other's ratios), within four hundredths, is that
    unit. The edges are found to the interval.
    """
    factors = {unit: factor for unit, (factor, _) in UNITS["wind_speed"].items()}
    own: dict[float, str] = {}
    for unit, factor in factors.items():
        own.setdefault(round(factor, 6), unit)
    tables = []
    for cup in reading.settings.mean_speeds:
        ratio = _against_any(reading, cup)
        if ratio is None:
            continue
        days = day_numbers(reading)
        series = median_by(ratio, days, int(days[-1]) + 1, _FEWEST_A_DAY)
        cuts = levels(series, step=0.1, shortest=3)
        if not cuts:
            continue
        edges = [0, *(_edge(ratio, days, cut) for cut in cuts), len(ratio)]
        parts = [slice(a, b) for a, b in itertools.pairwise(edges)]
        middles = [float(np.nanmedian(ratio[part])) for part in parts]
        lengths = [part.stop - part.start for part in parts]
        home = middles[int(np.argmax(lengths))]
        declared = factors[cup.unit]
        for part, middle in zip(parts, middles, strict=True):
            factor = math.exp(middle - home)
            met = next(
                (
                    name
                    for worth, name in own.items()
                    if worth != round(declared, 6)
                    and abs(math.log(factor * worth / declared)) < _NEAR_FACTOR
                ),
                None,
            )
            if met is None:
                continue
            tables.append(
                one_span(
                    part.start,
                    part.stop,
                    index_of(reading),
                    reading.interval,
                    channel=cup.name,
                    rule="unit_change",
                    reason=f"reads {factor:.3g} times what it did: the column holds {met} here "
                    f"and {cup.unit} elsewhere",
                    threshold=_NEAR_FACTOR,
                    measure=factor,
                    count=int(np.isfinite(values_of(reading, cup)[part]).sum()),
                )
            )
    return joined(tables)


def _against_any(reading: Reading, cup: ChannelSettings) -> Values | None:
    """Log ratio to the nearest other cup, light winds too: a changed unit shows anywhere."""
    others = [other for other in reading.settings.mean_speeds if other.name != cup.name]
    if not others:
        return None
    other = min(others, key=lambda each: abs(each.height_m - cup.height_m))
    first, second = values_of(reading, cup), values_of(reading, other)
    usable = (first > 1.5) & (second > 3.0)
    # If the other one changes its unit, a third cup says so: the change is not this cup's.
    thirds = [each for each in others if each.name != other.name]
    ratio = np.log(np.where(usable, first / np.where(usable, second, 1.0), np.nan))
    if thirds:
        third = values_of(reading, min(thirds, key=lambda each: abs(each.height_m - cup.height_m)))
        both = usable & (third > 3.0)
        beside = np.log(np.where(both, first / np.where(both, third, 1.0), np.nan))
        middle = np.nanmedian(ratio), np.nanmedian(beside)
        near = np.abs(ratio - middle[0]) < np.abs(beside - middle[1])
        ratio = np.where(
            np.isfinite(beside), np.where(near, ratio, beside - middle[1] + middle[0]), ratio
        )
    return ratio


def _edge(ratio: Values, days: NDArray[np.int64], cut: int) -> int:
    """The interval at which a level changes, within a day or two of the day it was found on."""
    start, stop = np.searchsorted(days, [cut - 3, cut + 3])
    part = ratio[start:stop]
    known = np.flatnonzero(np.isfinite(part))
    values = part[known]
    if len(values) < 4:
        return int(np.searchsorted(days, cut))
    sums = np.cumsum(values)
    left = np.arange(1, len(values))
    change = (sums[-1] - sums[left - 1]) / (len(values) - left) - sums[left - 1] / left
    weight = np.abs(change) * np.sqrt(left * (len(values) - left))
    return int(start + known[left[int(np.argmax(weight))]])


def calibration_twice_spans(reading: Reading, settings: CheckSettings) -> pd.DataFrame:
    """Cups whose certificate was applied twice: off by the very factor it corrects.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and thresholds.

    Returns
    -------
    DataFrame
        Spans of rule ``calibration_twice`` over the whole record; the measure is the level
        against the pair.

    Notes
    -----
    Only cups of a pair whose study recomputes them can be judged: if the level against the pair
    equals certificate over applied slope within a fifth of its distance from one, the logger had
    applied the certificate already.
    """
    free = free_of_shadow(reading, settings)
    tables = []
    for cup in reading.settings.mean_speeds:
        if cup.certificate_slope is None or cup.applied_slope is None:
            continue
        factor = math.log(cup.certificate_slope / cup.applied_slope)
        if abs(factor) < 0.5 * settings.drift_change:
            continue
        expected = expected_speed(reading, cup, pair_height=settings.pair_height_m, free=free)
        if expected is None or expected.basis != "pair":
            continue
        if abs(expected.level - factor) > 0.2 * abs(factor):
            continue
        tables.append(
            one_span(
                0,
                len(reading.frame),
                index_of(reading),
                reading.interval,
                channel=cup.name,
                rule="calibration_twice",
                reason=f"differs from {expected.others[0]} by {100 * expected.level:+.2g} %, "
                "which is what its certificate corrects: the logger may have applied it already",
                threshold=math.exp(factor),
                measure=math.exp(expected.level),
                count=int(np.isfinite(values_of(reading, cup)).sum()),
            )
        )
    return joined(tables)
