"""Tables that sum up a campaign: rows, recovery, profile, pair, turbulence, north, clock.

Each function takes a checked record and gives one table; `measured` puts them together. Nothing
is judged here beyond a count that a figure needs to stand on.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.study.checks import CheckSettings, lag_windows, monthly_north
from windkit.study.ledger import AUTOMATIC
from windkit.study.reading import Reading
from windkit.study.record import Record
from windkit.study.stations import ChannelSettings, StationSettings

__all__ = [
    "channel_counts",
    "checks_table",
    "clock_table",
    "heights_table",
    "monthly_means",
    "north_table",
    "recovery_by_month",
    "rows_table",
    "turbulence_table",
]

#: Fewest days of values for a calendar month to count, our choice: half a month. An hour of it,
#: left by a clock east of UTC, is no month.
LEAST_DAYS_OF_MONTH = 15
#: Fewest intervals for a turbulence figure of a speed bin, our choice.
LEAST_IN_TURBULENCE_BIN = 6
#: Normal quantile of the representative turbulence: the 90 % value of IEC 61400-1.
_REPRESENTATIVE_QUANTILE = 1.28
_MINUTES_PER_DAY = 24 * 60

Mask = NDArray[np.bool_]


def rows_table(record: Record) -> pd.DataFrame:
    """Rows of the files by what became of them; read = kept + set aside."""
    reading = record.reading
    rows = [("read from the files", reading.rows_read), ("kept", reading.rows_kept)]
    rows += [
        (f"set aside: {reason}", int(count))
        for reason, count in reading.set_aside["reason"].value_counts().items()
    ]
    absent = reading.expected_count - reading.rows_kept
    rows.append(("intervals between first and last without a row", absent))
    return pd.DataFrame(rows, columns=["rows", "count"])


def channel_counts(record: Record) -> pd.DataFrame:
    """Every interval of every channel in one column; recovery before and after masking."""
    counts = record.counts.copy()
    heights = {channel.name: channel.height_m for channel in record.settings.channels}
    counts.insert(1, "height_m", [heights[name] for name in counts["channel"]])
    had = counts["expected"] - counts["absent"] - counts["no_value"]
    counts["recovery_before"] = had / counts["expected"]
    counts["recovery_after"] = counts["kept"] / counts["expected"]
    return counts.drop(columns="calm")


def recovery_by_month(record: Record) -> pd.DataFrame:
    """Share of believed values [1], months by channels, for the channels that hold means."""
    means = [channel.name for channel in record.settings.channels if channel.statistic == "mean"]
    table = record.recovery[record.recovery["channel"].isin(means)]
    a_day = _MINUTES_PER_DAY / record.settings.interval_min
    table = table[table["expected"] >= a_day]  # an hour at the seam of two months is no month
    return table.pivot_table(index="month", columns="channel", values="after")[means]


def checks_table(record: Record, settings: CheckSettings) -> pd.DataFrame:
    """What each check found: spans, values, their share, and whether it masks or waits."""
    every = record.counts["expected"].sum()
    rows = []
    for rule, spans in record.spans.groupby("rule", sort=False):
        acts = "masks" if rule in settings.masking_rules else "waits for a decision"
        values = int(spans["count"].sum())
        rows.append((rule, acts, spans["channel"].nunique(), len(spans), values, values / every))
    people = record.ledger[record.ledger["who"] != AUTOMATIC]
    if len(people):
        count = int(people["count"].sum())
        rows.append(
            ("people", "decide", people["channel"].nunique(), len(people), count, count / every)
        )
    return pd.DataFrame(
        rows, columns=["rule", "acts", "channels", "spans", "values", "share_of_all_values"]
    )


def heights_table(
    frame: pd.DataFrame, main: ChannelSettings, settings: StationSettings, free: dict[str, Mask]
) -> pd.DataFrame:
    """Mean speed by height over the intervals in which every height has a believed speed.

    One cup a height: the main one at its own height, else the first that is declared. Intervals
    in which one of them stands behind the mast are left out.
    """
    by_height: dict[float, ChannelSettings] = {main.height_m: main}
    for channel in settings.mean_speeds:
        by_height.setdefault(channel.height_m, channel)
    chosen = [by_height[height] for height in sorted(by_height, reverse=True)]
    names = [channel.name for channel in chosen]
    clear = np.logical_and.reduce([free[name] for name in names])
    shared = frame.loc[clear, names].dropna()
    return pd.DataFrame(
        {
            "channel": names,
            "height_m": [channel.height_m for channel in chosen],
            "mean_speed_m_s": shared.mean().to_numpy(),
            "count": len(shared),
        }
    )


def monthly_means(frame: pd.DataFrame, interval_min: float) -> pd.DataFrame:
    """Mean by calendar month, NaN where there are values for less than half of it."""
    assert isinstance(frame.index, pd.DatetimeIndex)
    by_month = frame.groupby(frame.index.month)
    days = by_month.count() * interval_min / _MINUTES_PER_DAY
    return by_month.mean().where(days >= LEAST_DAYS_OF_MONTH)


def turbulence_table(
    frame: pd.DataFrame, main: ChannelSettings, settings: StationSettings, free: Mask
) -> pd.DataFrame:
    """Standard deviation over mean by whole metre per second of the main cup, free of the mast.

    Columns wind_speed_m_s, mean, representative (mean plus 1.28 standard deviations), count.
    """
    columns = ["wind_speed_m_s", "mean", "representative", "count"]
    spread = next(
        (
            channel
            for channel in settings.channels
            if channel.quantity == "wind_speed"
            and channel.statistic == "sd"
            and channel.height_m == main.height_m
            and channel.boom_bearing_deg == main.boom_bearing_deg
        ),
        None,
    )
    if spread is None:
        return pd.DataFrame(columns=columns, dtype=float)
    both = frame.loc[free, [main.name, spread.name]].dropna()
    both = both[both[main.name] >= 1.0]
    intensity = both[spread.name] / both[main.name]
    by_bin = intensity.groupby(np.floor(both[main.name] + 0.5))
    table = pd.DataFrame({"mean": by_bin.mean(), "sd": by_bin.std(ddof=1), "count": by_bin.size()})
    table = table[table["count"] >= LEAST_IN_TURBULENCE_BIN]
    table["representative"] = table["mean"] + _REPRESENTATIVE_QUANTILE * table["sd"]
    table.index.name = "wind_speed_m_s"
    return table.reset_index()[columns]


def north_table(record: Record, references: list[Reading]) -> pd.DataFrame:
    """Mean difference of each vane from the other and from each reference, over all months [deg].

    Columns vane, against, difference_deg, month_to_month_deg, months.
    """
    columns = ["vane", "against", "difference_deg", "month_to_month_deg", "months"]
    monthly = monthly_north(record.reading, references).dropna(subset="difference")
    if monthly.empty:
        return pd.DataFrame(columns=columns)
    grouped = monthly.groupby(["vane", "against"], sort=False)["difference"]
    table = grouped.agg(["mean", "std", "count"]).reset_index()
    table.columns = pd.Index(columns)
    return table


def clock_table(record: Record, references: list[Reading]) -> pd.DataFrame:
    """Lag against each reference in windows of half a month [h]: median, range, correlation."""
    rows = []
    for reference in references:
        windows = lag_windows(record.reading, reference)
        if len(windows):
            lag = windows["lag"]
            rows.append(
                (
                    reference.settings.name,
                    float(lag.median()),
                    float(lag.min()),
                    float(lag.max()),
                    float(windows["correlation"].median()),
                    len(windows),
                )
            )
    return pd.DataFrame(
        rows,
        columns=[
            "reference", "median_lag_hours", "lowest", "highest", "correlation_at_best_lag",
            "windows",
        ],
    )  # fmt: skip
