"""Spans: runs of suspect values of one channel, the common result of every check.

Here the table is made and turned from and into masks. What makes a value suspect is in the
modules beside this one.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

__all__ = ["SPAN_COLUMNS", "instants", "joined", "no_spans", "one_span", "runs", "spans_of"]

SPAN_COLUMNS = ("channel", "from", "to", "count", "measure", "threshold", "reason", "rule")


def no_spans() -> pd.DataFrame:
    """A table of spans without rows."""
    return _typed(pd.DataFrame(columns=list(SPAN_COLUMNS)))


def joined(tables: list[pd.DataFrame]) -> pd.DataFrame:
    """One table of all spans, in the order of time, then channel and rule."""
    filled = [table for table in tables if len(table)]
    if not filled:
        return no_spans()
    whole = pd.concat(filled, ignore_index=True)
    return whole.sort_values(["from", "channel", "rule", "to"], kind="stable", ignore_index=True)


def instants(index: pd.DatetimeIndex) -> NDArray[np.datetime64]:
    """An index with a zone as plain instants; without the type it would become objects."""
    return index.to_numpy(dtype="datetime64[ns]")


def runs(
    mask: NDArray[np.bool_], index: pd.DatetimeIndex, interval: pd.Timedelta
) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """First and behind-last positions of the runs in a mask, split where intervals are absent."""
    if not mask.any():
        return np.empty(0, np.intp), np.empty(0, np.intp)
    at = np.flatnonzero(mask)
    stamps = instants(index)
    new = np.ones(len(at), dtype=bool)
    new[1:] = np.diff(stamps[at]) != interval.to_timedelta64()
    first = np.flatnonzero(new)
    last = np.append(first[1:], len(at)) - 1
    return at[first], at[last] + 1


def spans_of(
    mask: NDArray[np.bool_],
    index: pd.DatetimeIndex,
    interval: pd.Timedelta,
    *,
    channel: str,
    rule: str,
    reason: str,
    threshold: float,
    measure: NDArray[np.float64] | None = None,
) -> pd.DataFrame:
    """The runs of a mask as spans.

    Parameters
    ----------
    mask : ndarray of bool
        Suspect values.
    index : DatetimeIndex
        Starts of the intervals.
    interval : Timedelta
        Length of an interval; a span ends where the next interval is absent.
    channel, rule, reason : str
        What is suspect, by which check, in words.
    threshold : float
        What the check compares with.
    measure : ndarray of float, optional
        What was compared, one value per interval; a span shows the one furthest from zero.
        Without it a span shows its count.

    Returns
    -------
    DataFrame
        Columns `SPAN_COLUMNS`; ``from`` is the start of the first interval and ``to`` the end
        of the last.
    """
    first, behind = runs(mask, index, interval)
    if not len(first):
        return no_spans()
    if measure is None:
        shown = (behind - first).astype(float)
    else:
        # Pairs of first and behind-last positions; every second piece lies between the runs.
        edges = np.column_stack([first, behind]).ravel()
        padded = np.append(measure, np.nan)
        largest = np.fmax.reduceat(padded, edges)[::2]
        smallest = np.fmin.reduceat(padded, edges)[::2]
        shown = np.where(np.abs(largest) >= np.abs(smallest), largest, smallest)
    return _typed(
        pd.DataFrame(
            {
                "channel": channel,
                "from": index[first],
                "to": index[behind - 1] + interval,
                "count": behind - first,
                "measure": shown,
                "threshold": threshold,
                "reason": reason,
                "rule": rule,
            },
            columns=list(SPAN_COLUMNS),
        )
    )


def one_span(
    start: int,
    stop: int,
    index: pd.DatetimeIndex,
    interval: pd.Timedelta,
    *,
    channel: str,
    rule: str,
    reason: str,
    threshold: float,
    measure: float,
    count: int,
) -> pd.DataFrame:
    """One span over positions `start` to `stop`, whatever outages it runs through.

    For a lasting fault, such as a turned vane; `count` is the values it touches. The rest is as
    in `spans_of`.
    """
    if stop <= start or count == 0:
        return no_spans()
    row = (
        channel,
        index[start],
        index[stop - 1] + interval,
        count,
        measure,
        threshold,
        reason,
        rule,
    )
    return _typed(pd.DataFrame([row], columns=list(SPAN_COLUMNS)))


def _typed(table: pd.DataFrame) -> pd.DataFrame:
    for name in ("from", "to"):
        table[name] = pd.to_datetime(table[name], utc=True).dt.as_unit("ns")
    for name in ("measure", "threshold"):
        table[name] = table[name].astype(float)
    table["count"] = table["count"].astype(np.int64)
    for name in ("channel", "reason", "rule"):
        table[name] = table[name].astype(object)
    return table
