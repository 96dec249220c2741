"""Going through suspected spans: which are open, what stands around one, and the decisions.

Here a record's spans are listed with their state, the values around a span are cut out for a
look, and a person's decisions are put into the ledger file or taken out again, whole or not at
all. What a row means is in `ledger`; what finds spans is in `checks`; the buttons are a face's.
"""

from __future__ import annotations

import os
from collections.abc import Hashable, Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from windkit.kernels.circular import mean_direction
from windkit.study.checks import RULES
from windkit.study.checks.comparing import nearest_speed, nearest_vane, siblings
from windkit.study.checks.spans import SPAN_COLUMNS
from windkit.study.errors import StudyError
from windkit.study.ledger import (
    ALL,
    AUTOMATIC,
    LEDGER_COLUMNS,
    decision_row,
    human_rows,
    ledger_of,
    read_ledger,
    values_in,
    write_ledger,
)
from windkit.study.record import Record
from windkit.study.stations import DIRECTION, ChannelSettings

__all__ = [
    "AVERAGED",
    "BULK",
    "COVERED",
    "DECIDED",
    "MASKED",
    "WAITING",
    "add_to_ledger",
    "decision_rows",
    "span_window",
    "spans_to_review",
    "take_from_ledger",
    "with_decisions",
]

#: State of a span that a check masks, and of one that masks nothing before a person says so.
MASKED = "masked"
WAITING = "waiting"
#: States of spans of the second kind that wait no more: a person decided on them or on a wider
#: span; every value of them is masked by another span; the pair's average has dealt with them.
DECIDED = "decided"
COVERED = "already masked"
AVERAGED = "dealt with by averaging"
#: How the reason of a decision begins that was taken on many spans at once.
BULK = "bulk"

#: Shown before and after a span.
_AROUND = pd.Timedelta(days=2)
#: A longer window is shown as daily means: more values are not told apart on a screen.
_LONGEST_AT_INTERVAL = pd.Timedelta(days=45)
#: Sensors shown beside the one in question.
_NEIGHBOURS = 2
#: What tells one span from another.
_KEY = ["channel", "from", "to", "rule"]


def spans_to_review(record: Record, *, averaged: bool = False) -> pd.DataFrame:
    """Everything the checks of a record found, in the order to go through it.

    Parameters
    ----------
    record : Record
        The checked record.
    averaged : bool
        Whether the study's speed is a pair averaged by direction, which leaves nothing to decide
        of the mast's shadow.

    Returns
    -------
    DataFrame
        The columns of a span; ``state``, `MASKED` where the check masks by itself and `WAITING`
        where it only asks, or why it asks no more: `DECIDED`, `AVERAGED`, `COVERED`;
        ``believed``, values of the span that count in the record as it stands; ``decision``, what
        a person said of this span before, or empty text. Spans of one check stand together in the
        order of time, the check with the fewest first: what is rare is not to be found behind a
        thousand ordinary spans.
    """
    spans = record.spans.loc[:, list(SPAN_COLUMNS)].copy()
    acting = set(record.ledger.loc[record.ledger["who"] == AUTOMATIC, "rule"])
    spans["believed"], had = _values_within(record, spans)
    undecided = pd.MultiIndex.from_frame(record.suspects[_KEY])
    spans["state"] = np.select(
        [
            spans["rule"].isin(acting),
            ~pd.MultiIndex.from_frame(spans[_KEY]).isin(undecided),
            (spans["rule"] == "shadow") & averaged,
            (spans["believed"] == 0) & (np.asarray(had) > 0),
        ],
        [MASKED, DECIDED, AVERAGED, COVERED],
        default=WAITING,
    )
    size = spans.groupby("rule")["rule"].transform("size") if len(spans) else 0
    order = spans["rule"].map({rule: at for at, rule in enumerate(RULES)})
    spans = spans.assign(_size=size, _order=order).sort_values(
        ["_size", "_order", "from", "channel", "to"], kind="stable", ignore_index=True
    )
    return with_decisions(spans.drop(columns=["_size", "_order"]), record.ledger)


def with_decisions(spans: pd.DataFrame, ledger: pd.DataFrame) -> pd.DataFrame:
    """The spans with what persons last said of each in a ledger; see `spans_to_review`."""
    last = human_rows(ledger).drop_duplicates(_KEY, keep="last")[[*_KEY, "decision"]]
    bare = spans.drop(columns="decision", errors="ignore")
    told = bare.merge(last, on=_KEY, how="left", validate="many_to_one")
    told["decision"] = told["decision"].astype(object).fillna("")
    return told


def span_window(record: Record, span: Mapping[Hashable, Any] | pd.Series) -> pd.DataFrame:
    """Values as read of a span's channel and of what explains it, two days on both sides.

    Parameters
    ----------
    record : Record
        The checked record.
    span : Series or mapping
        A row of `spans_to_review`.

    Returns
    -------
    DataFrame
        One column a channel: the span's own first (the main wind speed for a span on all
        channels), then at most two of the same quantity and statistic, the nearest in height
        first (so the pair, if there is one), then, where it explains the span, another quantity:
        the vane for a mast shadow, the thermometer for icing, the wind speed for a vane, the
        mean for a spread. NaN where an interval is absent. A window above 45 days holds daily
        means (UTC), of directions the mean of unit vectors.
    """
    shown = _shown_channels(record, str(span["channel"]), str(span["rule"]))
    start, stop = span["from"] - _AROUND, span["to"] + _AROUND
    names = [channel.name for channel in shown]
    values = record.raw.loc[(record.raw.index >= start) & (record.raw.index < stop), names]
    if values.empty:
        return values.copy()
    grid = pd.date_range(values.index[0], values.index[-1], freq=record.interval, name="time")
    values = values.reindex(grid)
    if stop - start <= _LONGEST_AT_INTERVAL:
        return values
    by_day = values.resample("D")
    days = by_day.mean()
    for channel in shown:
        if channel.is_direction:
            days[channel.name] = by_day[channel.name].agg(
                lambda of_day: float(mean_direction(of_day.to_numpy()))
            )
    return days


def decision_rows(
    spans: pd.DataFrame, *, decision: str, reason: str, who: str, when: str, bulk: bool = False
) -> pd.DataFrame:
    """Ledger rows of one person's decision on one or many spans.

    Parameters
    ----------
    spans : DataFrame
        Rows of `spans_to_review`, all decided alike.
    decision, reason, who, when : str
        As in `windkit.study.ledger.decision_row`.
    bulk : bool
        Whether the spans were decided together, without a look at each; the reason then says so.

    Returns
    -------
    DataFrame
        A ledger, one row a span.

    Raises
    ------
    StudyError
        If name or reason is empty, or the name is the one that stands for the checks.
    """
    if who == AUTOMATIC:
        raise StudyError.of(
            met=f"who is '{AUTOMATIC}'",
            rule="this name stands for the checks, whose rows are made anew in each run",
            remedy="write the name of the person who decides",
        )
    if bulk and reason:
        checks = ", ".join(dict.fromkeys(spans["rule"]))
        reason = f"{BULK}, {len(spans)} spans of {checks} at once: {reason}"
    head = spans.iloc[0]
    checked = decision_row(
        channel=head["channel"],
        start=head["from"],
        stop=head["to"],
        rule=head["rule"],
        reason=reason,
        decision=decision,
        who=who,
        when=when,
    ).iloc[0]
    return ledger_of(
        {
            **{str(name): span[name] for name in ("channel", "from", "to", "count", "rule")},
            "threshold": f"{span['threshold']:.6g}",
            **{str(name): checked[name] for name in ("reason", "decision", "who", "when")},
        }
        for span in spans.to_dict("records")
    )


def add_to_ledger(file: Path, rows: pd.DataFrame) -> pd.DataFrame:
    """Put rows behind those of a ledger file, whole or not at all.

    Parameters
    ----------
    file : Path
        The ledger, read anew, so that rows written by others meanwhile stay.
    rows : DataFrame
        See `decision_rows`.

    Returns
    -------
    DataFrame
        The ledger as it stands in the file now.

    Raises
    ------
    StudyError
        If the file is no ledger.
    """
    before = read_ledger(file)
    whole = pd.concat([before, rows], ignore_index=True) if len(before) else rows
    _replace_ledger(file, whole)
    return whole


def take_from_ledger(file: Path, rows: pd.DataFrame) -> pd.DataFrame:
    """Take rows that were added last out of a ledger file again, whole or not at all.

    Parameters
    ----------
    file, rows : Path, DataFrame
        As given to `add_to_ledger`.

    Returns
    -------
    DataFrame
        The ledger as it stands in the file now.

    Raises
    ------
    StudyError
        If the file does not end with these rows any more.
    """
    before = read_ledger(file)
    names = list(LEDGER_COLUMNS)
    tail = before.iloc[max(0, len(before) - len(rows)) :]
    if tail[names].to_numpy().tolist() != rows[names].to_numpy().tolist():
        raise StudyError.of(
            file=file.name,
            met="it does not end with the decision to be undone",
            rule="only what was written last is taken back",
            remedy="take the row out by hand, or decide the span again: the last decision counts",
        )
    whole = before.iloc[: len(before) - len(rows)].reset_index(drop=True)
    _replace_ledger(file, whole)
    return whole


def _replace_ledger(file: Path, ledger: pd.DataFrame) -> None:
    part = file.with_name(f"{file.name}.part")
    try:
        write_ledger(ledger, part)
        os.replace(part, file)
    finally:
        part.unlink(missing_ok=True)


def _values_within(record: Record, spans: pd.DataFrame) -> tuple[list[int], list[int]]:
    """Values within each span that the ledger leaves in, and values there were."""
    return values_in(record.masked, spans), values_in(record.raw, spans)


def _shown_channels(record: Record, name: str, rule: str) -> list[ChannelSettings]:
    settings = record.settings
    own = settings.channel(settings.main_wind_speed if name == ALL else name)
    alike = [
        channel
        for channel in settings.channels
        if (channel.quantity, channel.statistic) == (own.quantity, own.statistic)
        and channel.name != own.name
    ]
    alike.sort(key=lambda channel: abs(channel.height_m - own.height_m))
    other = _explaining(record, own, rule)
    return [own, *alike[:_NEIGHBOURS], *([other] if other is not None else [])]


def _explaining(record: Record, own: ChannelSettings, rule: str) -> ChannelSettings | None:
    """The channel of another kind that says most about a span, if the mast has it."""
    settings = record.settings
    if rule == "shadow":
        return nearest_vane(settings, own.height_m)
    if rule == "icing" and own.quantity != "air_temperature":
        air = [c for c in settings.channels if c.quantity == "air_temperature"]
        air = [c for c in air if c.statistic == "mean"]
        return min(air, key=lambda c: abs(c.height_m - own.height_m)) if air else None
    if own.quantity == DIRECTION:
        return nearest_speed(settings, own.height_m)
    if own.statistic != "mean":
        means = [c for c in siblings(settings, own) if c.statistic == "mean"]
        return means[0] if means else None
    return None
