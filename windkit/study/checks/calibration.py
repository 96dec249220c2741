"""Faults of a known factor: a column that changes its unit, a certificate applied twice.

The level of a cup against another tells them from wear, because the factor is one of a few. Each
function takes a reading and thresholds and gives spans.
"""

from __future__ import annotations

import itertools
import math

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.units import UNITS
from windkit.study.checks.comparing import (
    day_numbers,
    expected_speed,
    index_of,
    levels,
    median_by,
    middle,
    values_of,
)
from windkit.study.checks.shadow import Shadow, free_of_shadow
from windkit.study.checks.spans import joined, one_span
from windkit.study.checks.thresholds import CheckSettings
from windkit.study.reading import Reading
from windkit.study.stations import ChannelSettings

__all__ = ["calibration_twice_spans", "unit_change_spans"]

Values = NDArray[np.float64]

#: Fewest intervals of a day that give a daily ratio.
_FEWEST_A_DAY = 6
#: A level within this share of a unit's factor is that unit.
_NEAR_FACTOR = 0.04


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
        middles = [middle(ratio[part]) for part in parts]
        lengths = [part.stop - part.start for part in parts]
        home = middles[int(np.argmax(lengths))]
        declared = factors[cup.unit]
        for part, level in zip(parts, middles, strict=True):
            factor = math.exp(level - home)
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
        centre = middle(ratio), middle(beside)
        near = np.abs(ratio - centre[0]) < np.abs(beside - centre[1])
        ratio = np.where(
            np.isfinite(beside), np.where(near, ratio, beside - centre[1] + centre[0]), ratio
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


def calibration_twice_spans(
    reading: Reading, settings: CheckSettings, shadows: list[Shadow] | None = None
) -> pd.DataFrame:
    """Cups whose certificate was applied twice: off by the very factor it corrects.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and thresholds.
    shadows : list of Shadow, optional
        The mast's shadows, if they are at hand.

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
    free = free_of_shadow(reading, settings, shadows)
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
