"""The checked record: a reading, masked through its ledger, with every value accounted for.

Here checks, ledger and reading come together; the record can be replayed from the reading and
the ledger alone. Hourly means and recovery are taken here. The checks themselves are in `checks`.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.circular import mean_direction
from windkit.study.checks import CheckSettings, run_checks
from windkit.study.errors import StudyError
from windkit.study.ledger import AUTOMATIC, apply_ledger, empty_ledger, human_rows, ledger_of
from windkit.study.reading import Reading
from windkit.study.stations import ChannelSettings, StationSettings

__all__ = [
    "LEAST_SHARE_OF_HOUR",
    "Record",
    "automatic_rows",
    "build_record",
    "calm_hours",
    "hourly_means",
    "replay",
    "without_calm_directions",
]

#: Least share of an hour's intervals that an hourly mean stands on: five of six ten-minute
#: values (common practice).
LEAST_SHARE_OF_HOUR = 5 / 6


@dataclass(frozen=True)
class Record:
    """A station's checked record.

    Attributes
    ----------
    reading : Reading
        What was read; ``reading.frame`` holds the values before any masking.
    frame : DataFrame
        Values that count: masked through the ledger, and directions of calms taken out.
    ledger : DataFrame
        Automatic rows first, then the rows of persons, in the order they act.
    spans : DataFrame
        Everything the checks found, whether it masks or only waits for a decision.
    recovery : DataFrame
        For each ``channel``, ``height`` and ``month``: ``expected`` intervals, ``before`` and
        ``after`` masking as shares of them.
    counts : DataFrame
        For each channel: ``expected`` = ``absent`` + ``no_value`` + ``masked`` + ``kept``, and
        ``calm`` directions among the kept.
    """

    reading: Reading
    frame: pd.DataFrame
    ledger: pd.DataFrame
    spans: pd.DataFrame
    recovery: pd.DataFrame
    counts: pd.DataFrame

    @property
    def settings(self) -> StationSettings:
        """What the study says about the station."""
        return self.reading.settings

    @property
    def raw(self) -> pd.DataFrame:
        """Values before masking."""
        return self.reading.frame

    @property
    def interval(self) -> pd.Timedelta:
        """Length of the averaging interval."""
        return self.reading.interval

    @property
    def masked(self) -> pd.DataFrame:
        """Values masked through the ledger, calms still with their direction."""
        return apply_ledger(self.raw, self.ledger)

    @property
    def suspects(self) -> pd.DataFrame:
        """Spans of checks that mask nothing, waiting for a person's decision."""
        automatic = set(self.ledger.loc[self.ledger["who"] == AUTOMATIC, "rule"])
        return self.spans[~self.spans["rule"].isin(automatic)].reset_index(drop=True)

    def hourly(self, min_share: float = LEAST_SHARE_OF_HOUR) -> pd.DataFrame:
        """Hourly values; see `hourly_means`."""
        return hourly_means(self.masked, self.settings, min_share=min_share)


def build_record(
    reading: Reading,
    check_settings: CheckSettings | None = None,
    ledger: pd.DataFrame | None = None,
    *,
    references: Sequence[Reading] = (),
    elevation: float = 0.0,
) -> Record:
    """Check a reading, add what persons decided, and mask.

    Parameters
    ----------
    reading : Reading
        The record as read.
    check_settings : CheckSettings, optional
        Thresholds, and which checks mask.
    ledger : DataFrame, optional
        Rows of persons. Automatic rows in it are left out and found anew, so that a changed
        threshold takes effect.
    references : sequence of Reading
        Long records from near the site, for the checks of north and clock.
    elevation : float
        Of the ground above the sea [m], for the marks of pressure.

    Returns
    -------
    Record
        The checked record.

    Raises
    ------
    StudyError
        If the ledger names an unknown channel, or nothing is left of the main wind speed.
    """
    check_settings = check_settings or CheckSettings()
    spans = run_checks(reading, check_settings, references=references, elevation=elevation)
    decided = human_rows(ledger) if ledger is not None else empty_ledger()
    automatic = automatic_rows(spans, check_settings)
    parts = [part for part in (automatic, decided) if len(part)]
    whole = pd.concat(parts, ignore_index=True) if parts else empty_ledger()
    masked = apply_ledger(reading.frame, whole)
    main = reading.settings.main_wind_speed
    if masked[main].isna().all():
        raise StudyError.of(
            met=f"{reading.settings.name}: nothing is left of {main} after the checks",
            rule="a record has a main wind speed",
            remedy="look at the spans of this channel; correct its unit, its limits or the "
            "decisions in the ledger",
        )
    frame = without_calm_directions(masked, reading.settings)
    return Record(
        reading=reading,
        frame=frame,
        ledger=whole,
        spans=spans,
        recovery=_recovery(reading, masked),
        counts=_counts(reading, masked, frame),
    )


def automatic_rows(spans: pd.DataFrame, check_settings: CheckSettings) -> pd.DataFrame:
    """Ledger rows of the spans whose checks mask."""
    acting = spans[spans["rule"].isin(check_settings.masking_rules)]
    return ledger_of(
        {
            "channel": span.channel,
            "from": span[2],
            "to": span.to,
            "count": span[4],
            "rule": span.rule,
            "reason": f"{span.reason} ({span.measure:.6g})",
            "threshold": f"{span.threshold:.6g}",
            "decision": "accepted",
            "who": AUTOMATIC,
            "when": "",
        }
        for span in acting.itertuples()
    )


def replay(reading: Reading, ledger: pd.DataFrame) -> pd.DataFrame:
    """The record's frame from the reading and its whole ledger, without running a check."""
    return without_calm_directions(apply_ledger(reading.frame, ledger), reading.settings)


def calm_hours(
    frame: pd.DataFrame, direction: ChannelSettings, settings: StationSettings
) -> NDArray[np.bool_]:
    """Intervals that are calm where a vane hangs.

    Parameters
    ----------
    frame : DataFrame
        Channels of the station.
    direction : ChannelSettings
        The vane's channel; the mean speed nearest in height decides.
    settings : StationSettings
        The calm rule.

    Returns
    -------
    ndarray of bool
        True where that speed is below ``calm_below_m_s``; a missing speed is not calm.
    """
    speeds = settings.mean_speeds
    nearest = min(speeds, key=lambda speed: abs(speed.height_m - direction.height_m))
    calm: NDArray[np.bool_] = frame[nearest.name].to_numpy() < settings.calm_below_m_s
    return calm


def without_calm_directions(frame: pd.DataFrame, settings: StationSettings) -> pd.DataFrame:
    """The frame with directions of calms taken out: a calm has none, and still counts."""
    out = frame.copy()
    for channel in settings.channels:
        if channel.is_direction:
            out.loc[calm_hours(frame, channel, settings), channel.name] = np.nan
    return out


def hourly_means(
    frame: pd.DataFrame, settings: StationSettings, *, min_share: float = LEAST_SHARE_OF_HOUR
) -> pd.DataFrame:
    """Hourly values from a frame of shorter intervals.

    Parameters
    ----------
    frame : DataFrame
        Channels on starts of intervals, masked; directions of calms still in.
    settings : StationSettings
        Interval, calm rule, and what each channel holds.
    min_share : float
        Least share of an hour's intervals that must have a value [1].

    Returns
    -------
    DataFrame
        Channels on every hour from first to last, NaN where too few values stand. Means are
        means; a spread is the root of the mean square (the spread between the intervals is
        left out); extremes are extremes; a direction is the mean of unit vectors, each interval
        equal, over intervals that are not calm.

    Raises
    ------
    StudyError
        If `min_share` is not a share, or an hour is not a whole number of intervals.

    Notes
    -----
    An interval belongs to the hour its middle lies in. A calm counts as observed when the share
    of a direction is taken. Intervals of one hour keep their value; longer ones are refused.
    """
    if not 0 < min_share <= 1:
        raise StudyError.of(
            key="samples_per_hour_share",
            met=f"the share is {min_share:g}",
            rule="it is above 0 and no more than 1",
            remedy="write 0.8333 for five of six intervals",
        )
    per_hour = round(60.0 / settings.interval_min)
    if not math.isclose(per_hour * settings.interval_min, 60.0, rel_tol=1e-9):
        raise StudyError.of(
            key="interval_min",
            met=f"{settings.name}: intervals last {settings.interval_min:g} minutes",
            rule="an hourly mean needs a whole number of intervals in an hour",
            remedy="use the record at its own interval",
        )
    assert isinstance(frame.index, pd.DatetimeIndex)
    half = pd.Timedelta(minutes=settings.interval_min / 2)
    hour = pd.Timedelta(hours=1)
    middles = frame.index + half
    first, last = middles[0].floor("h"), middles[-1].floor("h")
    hours = pd.date_range(first, last, freq="h", name="time").as_unit("ns")
    at = ((middles - first) // hour).to_numpy().astype(np.intp)
    slot = ((middles - first - at * hour) // (2 * half)).to_numpy().astype(np.intp)
    needed = math.ceil(min_share * per_hour - 1e-3)  # 0.8333 of six is five
    columns = {}
    for channel in settings.channels:
        grid = np.full((len(hours), per_hour), np.nan)
        grid[at, slot] = frame[channel.name].to_numpy()
        observed = np.isfinite(grid).sum(axis=1)
        if channel.is_direction:
            calm = np.zeros((len(hours), per_hour), dtype=bool)
            calm[at, slot] = calm_hours(frame, channel, settings)
            grid[calm] = np.nan
        enough = (observed >= needed) & np.isfinite(grid).any(axis=1)
        values = np.full(len(hours), np.nan)
        values[enough] = _of_each_hour(grid[enough], channel)
        columns[channel.name] = values
    return pd.DataFrame(columns, index=hours)


def _of_each_hour(grid: NDArray[np.float64], channel: ChannelSettings) -> NDArray[np.float64]:
    if channel.is_direction:
        return mean_direction(grid, axis=1)
    if channel.statistic == "sd":
        return np.sqrt(np.nanmean(grid**2, axis=1))
    if channel.statistic == "max" or channel.quantity == "wind_speed_of_gust":
        return np.nanmax(grid, axis=1)
    if channel.statistic == "min":
        return np.nanmin(grid, axis=1)
    return np.nanmean(grid, axis=1)


def _recovery(reading: Reading, masked: pd.DataFrame) -> pd.DataFrame:
    """Shares of expected intervals by channel and calendar month (UTC)."""
    first, last = reading.frame.index[0], reading.frame.index[-1]
    grid = pd.date_range(first, last, freq=reading.interval)
    expected = pd.Series(1, index=grid.strftime("%Y-%m")).groupby(level=0).sum()
    month = reading.frame.index.strftime("%Y-%m")  # type: ignore[attr-defined]
    before = reading.frame.notna().groupby(month).sum().reindex(expected.index, fill_value=0)
    after = masked.notna().groupby(month).sum().reindex(expected.index, fill_value=0)
    tables = [
        pd.DataFrame(
            {
                "channel": channel.name,
                "height": channel.height_m,
                "month": expected.index,
                "expected": expected.to_numpy(),
                "before": (before[channel.name] / expected).to_numpy(),
                "after": (after[channel.name] / expected).to_numpy(),
            }
        )
        for channel in reading.settings.channels
    ]
    return pd.concat(tables, ignore_index=True)


def _counts(reading: Reading, masked: pd.DataFrame, frame: pd.DataFrame) -> pd.DataFrame:
    names = [channel.name for channel in reading.settings.channels]
    had = reading.frame[names].notna().sum().to_numpy()
    kept = masked[names].notna().sum().to_numpy()
    table = pd.DataFrame(
        {
            "channel": names,
            "expected": reading.expected_count,
            "absent": reading.expected_count - reading.rows_kept,
            "no_value": reading.rows_kept - had,
            "masked": had - kept,
            "kept": kept,
            "calm": kept - frame[names].notna().sum().to_numpy(),
        }
    )
    whole = table["absent"] + table["no_value"] + table["masked"] + table["kept"]
    assert (whole == table["expected"]).all()
    return table
