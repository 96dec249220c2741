"""Filling gaps of one channel from others of the same mast, as an option, with its effect.

A filled value is an estimate and stays marked as one. Here a speed is filled from the nearest
cup by its ratio in the same sector and part of the day, a direction from the nearest vane by their
mean difference; how well that does is told by hiding known days and filling them. The record is
not changed.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.circular import direction_difference, mean_direction
from windkit.kernels.frequency import sector_index
from windkit.study.checks.comparing import MOVING_SPEED, nearest_vane
from windkit.study.errors import StudyError
from windkit.study.record import Record
from windkit.study.stations import ChannelSettings, StationSettings

__all__ = ["FilledChannel", "fill_gaps"]

Values = NDArray[np.float64]

SECTOR_COUNT = 12
#: Parts of the day (UTC) in which a ratio is taken by itself: shear has a day.
_PARTS = 4
#: Fewest values of a sector and part of the day; below, the ratio of all is used.
_FEWEST = 60
#: Days hidden in turn to try the filling: every so many.
_HIDE_EVERY = 10


@dataclass(frozen=True)
class FilledChannel:
    """A channel with its gaps filled.

    Attributes
    ----------
    series : Series
        Known and filled values on every interval from the first to the last.
    source : Series
        Channel each value was filled from; ``""`` for a measured one or none.
    filled_count, gap_count : int
        Values filled, and intervals without a value before.
    mean_before, mean_after : float
        Mean (a direction: mean of unit vectors) before and after.
    trial : DataFrame
        For each source, on hidden days: ``count``, ``bias`` (filled less measured) and
        ``spread`` (standard deviation), in the channel's unit.
    """

    series: pd.Series
    source: pd.Series
    filled_count: int
    gap_count: int
    mean_before: float
    mean_after: float
    trial: pd.DataFrame


def fill_gaps(record: Record, channel: str, *, sources: list[str] | None = None) -> FilledChannel:
    """Fill the gaps of a mean speed or a direction from the other sensors of the mast.

    Parameters
    ----------
    record : Record
        The checked record.
    channel : str
        What to fill.
    sources : list of str, optional
        From what, the first that is known being used; the others of the kind, nearest in height
        first, if left out.

    Returns
    -------
    FilledChannel
        Values, marks, and the effect.

    Raises
    ------
    StudyError
        If the channel is neither a mean speed nor a direction, or nothing else is of its kind.
    """
    settings = record.settings
    target = _target(settings, channel)
    kind = settings.mean_speeds if target.is_mean_speed else settings.directions
    if sources is None:
        others = [c for c in kind if c.name != channel]
        others.sort(key=lambda c: abs(c.height_m - target.height_m))
        sources = [c.name for c in others]
    unknown = [name for name in sources if name not in {c.name for c in kind} - {channel}]
    if unknown or not sources:
        raise StudyError.of(
            met=f"{settings.name}: {channel} is to be filled from "
            f"{', '.join(unknown) or 'nothing'}",
            rule="a gap is filled from another channel of the same kind",
            remedy="name one of: " + (", ".join(c.name for c in kind if c.name != channel) or "-"),
        )
    grid = pd.date_range(
        record.masked.index[0], record.masked.index[-1], freq=record.interval, name="time"
    )
    frame = (record.masked if target.is_mean_speed else record.frame).reindex(grid)
    before = frame[channel].to_numpy(dtype=float)
    values = before.copy()
    source = np.full(len(grid), "", dtype=object)
    trials = []
    for name in sources:
        estimate = _estimate(frame, settings, target, name, np.isfinite(before))
        trials.append(_trial(frame, settings, target, name))
        gap = np.isnan(values) & np.isfinite(estimate)
        values[gap] = estimate[gap]
        source[gap] = name
    return FilledChannel(
        series=pd.Series(values, index=grid, name=channel),
        source=pd.Series(source, index=grid, name="source"),
        filled_count=int((source != "").sum()),
        gap_count=int(np.isnan(before).sum()),
        mean_before=_mean(before, target),
        mean_after=_mean(values, target),
        trial=pd.DataFrame(trials, columns=["source", "count", "bias", "spread"]),
    )


def _target(settings: StationSettings, channel: str) -> ChannelSettings:
    fillable = {c.name: c for c in [*settings.mean_speeds, *settings.directions]}
    if channel not in fillable:
        raise StudyError.of(
            met=f"{settings.name}: there is no mean speed or direction '{channel}'",
            rule="only these are filled",
            remedy=f"name one of: {', '.join(fillable)}",
        )
    return fillable[channel]


def _mean(values: Values, target: ChannelSettings) -> float:
    return float(mean_direction(values) if target.is_direction else np.nanmean(values))


def _estimate(
    frame: pd.DataFrame,
    settings: StationSettings,
    target: ChannelSettings,
    source: str,
    learn: NDArray[np.bool_],
) -> Values:
    """What a source says the target reads, learnt where `learn` holds."""
    own = np.where(learn, frame[target.name].to_numpy(dtype=float), np.nan)
    other = frame[source].to_numpy(dtype=float)
    if target.is_direction:
        offset = float(mean_direction(direction_difference(own, other) % 360.0))
        return (other + offset) % 360.0
    group = _groups(frame, settings, target)
    usable = (np.minimum(own, other) >= MOVING_SPEED) & np.isfinite(own) & np.isfinite(other)
    if not usable.any():
        return np.full(len(own), np.nan)
    overall = float(own[usable].sum() / other[usable].sum())
    count = np.bincount(group[usable], minlength=SECTOR_COUNT * _PARTS + 1)
    sums = [
        np.bincount(group[usable], weights=v[usable], minlength=SECTOR_COUNT * _PARTS + 1)
        for v in (own, other)
    ]
    # Ratio of sums, not mean of ratios: the filled mean is then unbiased.
    ratio = np.where(count >= _FEWEST, sums[0] / np.maximum(sums[1], 1e-9), overall)
    ratio[-1] = overall
    return other * ratio[group]


def _groups(
    frame: pd.DataFrame, settings: StationSettings, target: ChannelSettings
) -> NDArray[np.intp]:
    """Sector and part of the day of each interval; the last group where no direction is known."""
    vane = nearest_vane(settings, target.height_m)
    assert isinstance(frame.index, pd.DatetimeIndex)
    part = np.asarray(frame.index.hour) * _PARTS // 24
    if vane is None:
        return np.full(len(frame), SECTOR_COUNT * _PARTS, dtype=np.intp)
    direction = frame[vane.name].to_numpy(dtype=float)
    for other in settings.directions:
        direction = np.where(np.isnan(direction), frame[other.name], direction)
    sector = np.asarray(sector_index(direction, SECTOR_COUNT))
    return np.where(sector < 0, SECTOR_COUNT * _PARTS, sector * _PARTS + part).astype(np.intp)


def _trial(
    frame: pd.DataFrame, settings: StationSettings, target: ChannelSettings, source: str
) -> tuple[str, int, float, float]:
    """Hide every tenth day, fill it from the rest, and compare."""
    assert isinstance(frame.index, pd.DatetimeIndex)
    day = (frame.index.floor("D") - frame.index[0].floor("D")).days.to_numpy()
    known = frame[target.name].notna().to_numpy()
    hidden = (day % _HIDE_EVERY == _HIDE_EVERY // 2) & known
    estimate = _estimate(frame, settings, target, source, known & ~hidden)
    own = frame[target.name].to_numpy(dtype=float)
    error = direction_difference(estimate, own) if target.is_direction else estimate - own
    error = error[hidden & np.isfinite(error)]
    if not len(error):
        return source, 0, np.nan, np.nan
    return source, len(error), float(error.mean()), float(error.std())
