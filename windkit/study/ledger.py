"""The ledger: every decision about values, as rows that can be replayed.

Here rows are read, written, checked and applied. A value is masked, never deleted; the raw file
never changes; replaying the same rows on the same reading gives the same record. Which spans the
checks find is their own business.

A row covers the interval starts t with from <= t < to on one channel, or on all with ``*``.
Rows act in their order: an accepted row masks for its rule, a rejected one lifts what that rule
(or, with ``*``, any rule) masked before it within its span. A value stays masked while any rule
masks it.
"""

from __future__ import annotations

import csv
import difflib
import io
from collections.abc import Iterable
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from pandas.api.typing import NaTType

from windkit.study.checks import RULES
from windkit.study.errors import StudyError

__all__ = [
    "ALL",
    "AUTOMATIC",
    "LEDGER_COLUMNS",
    "apply_ledger",
    "decision_row",
    "empty_ledger",
    "human_rows",
    "ledger_of",
    "masked_by",
    "read_ledger",
    "refuse_rows_outside",
    "rows_in",
    "values_in",
    "write_ledger",
]

LEDGER_COLUMNS = (
    "channel",
    "from",
    "to",
    "count",
    "rule",
    "reason",
    "threshold",
    "decision",
    "who",
    "when",
)
#: Who decided, where a check did.
AUTOMATIC = "automatic"
#: Stands for every channel, and in a rejected row for every rule.
ALL = "*"
#: Rule of a span that no check but a person found.
MANUAL = "manual"
#: Where `read_ledger` leaves the line of each row, for what is said of it later.
_LINES = "lines"
_DECISIONS = ("accepted", "rejected")
_STAMP = "%Y-%m-%dT%H:%M:%SZ"


def empty_ledger() -> pd.DataFrame:
    """A ledger without rows."""
    return ledger_of([])


def ledger_of(rows: Iterable[dict[str, object]]) -> pd.DataFrame:
    """A ledger of the given rows, its columns typed and in order."""
    frame = pd.DataFrame(list(rows), columns=list(LEDGER_COLUMNS))
    for name in ("from", "to"):
        frame[name] = pd.to_datetime(frame[name], utc=True).dt.as_unit("ns")
    frame["count"] = frame["count"].astype(np.int64)
    for name in ("channel", "rule", "reason", "threshold", "decision", "who", "when"):
        frame[name] = frame[name].astype(object)
    return frame


def read_ledger(path: Path) -> pd.DataFrame:
    """Read a ledger file; a file that is not there is an empty ledger.

    Parameters
    ----------
    path : Path
        ``ledger.csv`` of the study: the columns of `LEDGER_COLUMNS`, stamps in UTC as
        ``2026-01-31T04:10:00Z``.

    Returns
    -------
    DataFrame
        The rows in the file's order; ``from`` and ``to`` as UTC timestamps.

    Raises
    ------
    StudyError
        If a column is missing, a stamp cannot be read, a span is empty, a decision is neither
        accepted nor rejected, no check has the rule's name, or a person's row has no name or
        reason.
    """
    if not path.is_file():
        return empty_ledger()
    try:
        text = path.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError as error:
        raise StudyError.of(
            file=path.name,
            met=f"byte {error.start} is not UTF-8 text",
            rule="the ledger is text in UTF-8",
            remedy="save it again as UTF-8",
        ) from error
    _refuse_other_separator(text, path.name)
    reader = csv.DictReader(io.StringIO(text, newline=""))
    header = reader.fieldnames or []
    if text.strip() and list(header) != list(LEDGER_COLUMNS):
        raise StudyError.of(
            file=path.name,
            line=1,
            met=f"the columns are {', '.join(header)}",
            rule=f"a ledger has the columns {','.join(LEDGER_COLUMNS)}",
            remedy="write this header",
        )
    rows, lines = [], []
    for row in reader:
        rows.append(_checked(row, path.name, reader.line_num))
        lines.append(reader.line_num)
    ledger = ledger_of(rows)
    ledger.attrs[_LINES] = lines
    return ledger


def _refuse_other_separator(text: str, file: str) -> None:
    """Refuse lines whose fields are set apart by semicolons or tabs, as some spreadsheets do."""
    for line, written in enumerate(text.splitlines(), start=1):
        for sign, word in ((";", "semicolons"), ("\t", "tabs")):
            if written.count(sign) >= len(LEDGER_COLUMNS) - 1 > written.count(","):
                raise StudyError.of(
                    file=file,
                    line=line,
                    met=f"the fields are set apart by {word}",
                    rule="fields of the ledger are set apart by commas",
                    remedy="save it again as CSV with commas; a spreadsheet asks for the separator "
                    "when it exports, or takes it from the list separator of its language",
                )


def _checked(row: dict[str, str | None], file: str, line: int) -> dict[str, object]:
    def refuse(met: str, rule: str, remedy: str) -> StudyError:
        return StudyError.of(file=file, line=line, met=met, rule=rule, remedy=remedy)

    if None in row or None in row.values():
        raise refuse(
            "the row has another number of fields than the header",
            "each row has a field for each column",
            "put a reason with a comma between quotation marks",
        )
    fields = {name: (text or "").strip() for name, text in row.items()}
    checked: dict[str, object] = dict(fields)
    for name in ("from", "to"):
        stamp = pd.to_datetime(fields[name], utc=True, errors="coerce", format="ISO8601")
        if stamp is pd.NaT or not fields[name].endswith(("Z", "+00:00")):
            raise refuse(
                f"{name} is '{fields[name]}'",
                "spans are given in UTC, with a Z behind them",
                _in_utc(fields[name], stamp),
            )
        checked[name] = stamp
    if not checked["from"] < checked["to"]:  # type: ignore[operator]
        raise refuse(
            f"the span from {fields['from']} to {fields['to']} is empty",
            "from is the first interval's start and to is the end of the last",
            "correct one of them",
        )
    if fields["decision"] not in _DECISIONS:
        raise refuse(
            f"decision is '{fields['decision']}'",
            "a decision is accepted or rejected",
            "write accepted to leave the values out, rejected to keep them",
        )
    for name in ("channel", "rule", "who"):
        if not fields[name]:
            raise refuse(
                f"{name} is empty", "each row says what, which rule and who", f"fill in {name}"
            )
    known = (*RULES, MANUAL, ALL)
    if fields["rule"] not in known:
        near = difflib.get_close_matches(fields["rule"].lower(), known, n=1)
        raise refuse(
            f"there is no rule '{fields['rule']}'",
            f"a row names the check it decides on ({', '.join(RULES)}), {MANUAL} for a span a "
            f"person found, or {ALL} for whatever masked it",
            f"write {near[0]}" if near else f"write {MANUAL} if a person found the span",
        )
    if fields["who"] != AUTOMATIC and not fields["reason"]:
        raise refuse("a person's decision has no reason", "a reviewer reads why", "fill in reason")
    try:
        checked["count"] = int(fields["count"] or 0)
    except ValueError as error:
        raise refuse(
            f"count is '{fields['count']}'", "count is a whole number", "write 0 if unknown"
        ) from error
    return checked


def _in_utc(written: str, stamp: pd.Timestamp | NaTType) -> str:
    """How a stamp that does not end in Z has to be written."""
    if not isinstance(stamp, pd.Timestamp):
        return "write it as 2026-01-31T04:10:00Z"
    if pd.Timestamp(written).tzinfo is not None:
        return f"write {stamp.strftime(_STAMP)}, which is the same time"
    return f"write {stamp.strftime(_STAMP)} if it is UTC; take the clock's offset off if it is not"


def write_ledger(ledger: pd.DataFrame, path: Path) -> None:
    """Write a ledger file; reading it gives the same rows, and the same rows the same bytes."""
    path.write_text(_text_of(ledger), encoding="utf-8", newline="\n")


def _text_of(ledger: pd.DataFrame) -> str:
    out = ledger.loc[:, list(LEDGER_COLUMNS)].copy()
    for name in ("from", "to"):
        out[name] = out[name].dt.strftime(_STAMP)
    return out.to_csv(index=False, lineterminator="\n")


def decision_row(
    *,
    channel: str,
    start: pd.Timestamp,
    stop: pd.Timestamp,
    rule: str,
    reason: str,
    decision: str,
    who: str,
    when: str,
    count: int = 0,
    threshold: str = "",
) -> pd.DataFrame:
    """A ledger of one person's decision, to be put behind the rows there are.

    Parameters
    ----------
    channel : str
        Channel name, or ``*`` for all.
    start, stop : Timestamp
        First interval's start, and end of the last, both with a zone.
    rule : str
        Check whose span is decided on, ``manual`` for a span a person found, or, to reject,
        ``*`` for whatever masked it.
    reason : str
        Why, for the reviewer.
    decision : {"accepted", "rejected"}
        Leave the values out, or keep them.
    who, when : str
        Name, and the date or stamp of the decision.
    count : int
        Values concerned.
    threshold : str
        Threshold the check used, if one did.

    Raises
    ------
    StudyError
        As `read_ledger`.
    """
    row: dict[str, str | None] = {
        "channel": channel,
        "from": pd.Timestamp(start).tz_convert("UTC").strftime(_STAMP),
        "to": pd.Timestamp(stop).tz_convert("UTC").strftime(_STAMP),
        "count": str(count),
        "rule": rule,
        "reason": reason,
        "threshold": threshold,
        "decision": decision,
        "who": who,
        "when": when,
    }
    return ledger_of([_checked(row, "ledger.csv", 0)])


def human_rows(ledger: pd.DataFrame) -> pd.DataFrame:
    """The rows persons decided, in their order."""
    return ledger[ledger["who"] != AUTOMATIC].reset_index(drop=True)


def values_in(frame: pd.DataFrame, spans: pd.DataFrame) -> list[int]:
    """Values of a frame within each span; of a span on all channels those of all.

    Parameters
    ----------
    frame : DataFrame
        Channels on an index of interval starts.
    spans : DataFrame
        With columns channel, from and to; a ledger is one.

    Returns
    -------
    list of int
        One count a row.
    """
    known = frame.notna()
    known[ALL] = known.sum(axis=1)
    below = {name: np.append(0, np.cumsum(known[name].to_numpy())) for name in known.columns}
    starts = frame.index.searchsorted(pd.DatetimeIndex(spans["from"]))
    stops = frame.index.searchsorted(pd.DatetimeIndex(spans["to"]))
    return [
        int(below[channel][stop] - below[channel][start])
        for channel, start, stop in zip(spans["channel"], starts, stops, strict=True)
    ]


def refuse_rows_outside(
    index: pd.DatetimeIndex, interval: pd.Timedelta, ledger: pd.DataFrame
) -> None:
    """Refuse a person's row whose span has nothing in common with the record's period.

    Parameters
    ----------
    index : DatetimeIndex
        Interval starts of the record.
    interval : Timedelta
        Length of its intervals.
    ledger : DataFrame
        Rows as read.

    Raises
    ------
    StudyError
        At the first such row, with both periods.
    """
    first, end = index[0], index[-1] + interval
    outside = (ledger["from"] >= end) | (ledger["to"] <= first)
    outside &= ledger["who"] != AUTOMATIC
    if not outside.any():
        return
    at = int(outside.to_numpy().argmax())
    lines = ledger.attrs.get(_LINES, [])
    row = ledger.iloc[at]
    raise StudyError.of(
        file="ledger.csv",
        line=lines[at] if len(lines) == len(ledger) else None,
        met=f"a row on {row['channel']} goes from {row['from']:{_STAMP}} to {row['to']:{_STAMP}}, "
        f"but the record from {first:{_STAMP}} to {end:{_STAMP}}",
        rule="a decision concerns values of the record",
        remedy="correct the dates (they are UTC), or take the row out if those values are gone",
    )


def rows_in(index: pd.DatetimeIndex, start: pd.Timestamp, stop: pd.Timestamp) -> slice:
    """Positions of the interval starts t with start <= t < stop."""
    return slice(int(index.searchsorted(start)), int(index.searchsorted(stop)))


def masked_by(frame: pd.DataFrame, ledger: pd.DataFrame) -> dict[str, NDArray[np.bool_]]:
    """Which values the ledger masks, rule by rule.

    Parameters
    ----------
    frame : DataFrame
        Channels on an index of interval starts.
    ledger : DataFrame
        Rows in the order they act.

    Returns
    -------
    dict of str to ndarray of bool
        For each rule an array in the frame's shape, True where the rule masks a value.

    Raises
    ------
    StudyError
        If a row names a channel that the frame has not got.
    """
    assert isinstance(frame.index, pd.DatetimeIndex)
    columns = {str(name): at for at, name in enumerate(frame.columns)}
    masks: dict[str, NDArray[np.bool_]] = {}
    starts = frame.index.searchsorted(pd.DatetimeIndex(ledger["from"]))
    stops = frame.index.searchsorted(pd.DatetimeIndex(ledger["to"]))
    rows = zip(ledger["channel"], ledger["rule"], ledger["decision"], starts, stops, strict=True)
    for channel, rule, decision, start, stop in rows:
        if channel != ALL and channel not in columns:
            raise StudyError.of(
                file="ledger.csv",
                met=f"a row of rule '{rule}' names the channel '{channel}'",
                rule=f"the channels are {', '.join(columns)}, or {ALL} for all",
                remedy="correct the name, or take the row out if the channel is gone",
            )
        across = slice(None) if channel == ALL else columns[channel]
        if decision == "accepted":
            mask = masks.setdefault(rule, np.zeros(frame.shape, dtype=bool))
            mask[start:stop, across] = True
        else:
            for name in list(masks) if rule == ALL else [rule]:
                if name in masks:
                    masks[name][start:stop, across] = False
    return masks


def apply_ledger(frame: pd.DataFrame, ledger: pd.DataFrame) -> pd.DataFrame:
    """The frame with the ledger's values masked (NaN); rows are never dropped.

    Parameters
    ----------
    frame, ledger : DataFrame
        As in `masked_by`. Neither is changed.

    Returns
    -------
    DataFrame
        A new frame of the same shape.
    """
    masks = masked_by(frame, ledger)
    if not masks:
        return frame.copy()
    return frame.mask(np.logical_or.reduce(list(masks.values())))
