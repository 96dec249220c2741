"""The checked record: a reading, masked through its ledger, with every value accounted for.

Here checks, ledger and reading come together; the record can be replayed from the reading and
the ledger alone. Recovery is counted here; hourly means are in `hourly`, the checks in `checks`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.study.checks import CheckSettings, run_checks
from windkit.study.errors import StudyError
from windkit.study.hourly import (
    LEAST_SHARE_OF_HOUR,
    calm_hours,
    hourly_means,
    hourly_weighted_directions,
    without_calm_directions,
)
from windkit.study.ledger import (
    ALL,
    AUTOMATIC,
    apply_ledger,
    empty_ledger,
    human_rows,
    ledger_of,
    refuse_rows_outside,
    values_in,
)
from windkit.study.reading import Reading
from windkit.study.stations import StationSettings

__all__ = [
    "LEAST_SHARE_OF_HOUR",
    "Record",
    "automatic_rows",
    "build_record",
    "calm_hours",
    "hourly_means",
    "hourly_weighted_directions",
    "replay",
    "without_calm_directions",
]


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
        Automatic rows first, then the rows of persons, in the order they act; ``count`` of the
        latter is what the reading holds, whatever was written.
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
        """Spans of checks that mask nothing and that no person has decided on."""
        automatic = set(self.ledger.loc[self.ledger["who"] == AUTOMATIC, "rule"])
        left = self.spans[~self.spans["rule"].isin(automatic)].reset_index(drop=True)
        waiting = pd.Series(True, index=left.index)
        for row in human_rows(self.ledger).to_dict("records"):
            decided = left["rule"].isin([row["rule"]]) if row["rule"] != ALL else True
            if row["channel"] != ALL:
                decided &= left["channel"] == row["channel"]
            waiting &= ~(decided & (left["from"] >= row["from"]) & (left["to"] <= row["to"]))
        return left[waiting].reset_index(drop=True)

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
        If the ledger names an unknown channel or a span outside the record, or nothing is
        left of the main wind speed.
    """
    check_settings = check_settings or CheckSettings()
    spans = run_checks(reading, check_settings, references=references, elevation=elevation)
    decided = human_rows(ledger) if ledger is not None else empty_ledger()
    automatic = automatic_rows(spans, check_settings)
    parts = [part for part in (automatic, decided) if len(part)]
    whole = pd.concat(parts, ignore_index=True) if parts else empty_ledger()
    masked = apply_ledger(reading.frame, whole)  # refuses an unknown channel
    index = reading.frame.index
    assert isinstance(index, pd.DatetimeIndex)
    if ledger is not None:
        refuse_rows_outside(index, reading.interval, ledger)
    if len(decided):
        counted = values_in(reading.frame, decided)
        whole["count"] = [*automatic["count"], *counted]
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


def _recovery(reading: Reading, masked: pd.DataFrame) -> pd.DataFrame:
    """Shares of expected intervals by channel and calendar month (UTC)."""
    index = reading.frame.index
    assert isinstance(index, pd.DatetimeIndex)
    grid = pd.date_range(index[0], index[-1], freq=reading.interval)
    start = index[0].year * 12 + index[0].month - 1

    def months(stamps: pd.DatetimeIndex) -> NDArray[np.int64]:
        return np.asarray(stamps.year * 12 + stamps.month - 1 - start, dtype=np.int64)

    expected = np.bincount(months(grid))
    at = months(index)

    def share(values: pd.Series) -> NDArray[np.float64]:
        known = np.isfinite(values.to_numpy())
        counts = np.bincount(at[known], minlength=len(expected))
        return np.divide(counts, expected, out=np.zeros(len(expected)), where=expected > 0)

    labels = [f"{(start + n) // 12:04d}-{(start + n) % 12 + 1:02d}" for n in range(len(expected))]
    tables = [
        pd.DataFrame(
            {
                "channel": channel.name,
                "height": channel.height_m,
                "month": labels,
                "expected": expected,
                "before": share(reading.frame[channel.name]),
                "after": share(masked[channel.name]),
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
