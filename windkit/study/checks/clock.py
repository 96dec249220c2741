"""Steps of a clock: the lag of a record against a reference, window by window.

Weather passes a mast and a reference nearby at nearly the same time. Here the lag at which the two
agree best is taken for every fortnight; a lag that differs from the usual one marks a logger whose
clock was reset, or a file with another zone.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.study.checks.comparing import index_of, values_of
from windkit.study.checks.spans import instants, joined, one_span
from windkit.study.checks.thresholds import CheckSettings
from windkit.study.reading import Reading

__all__ = ["clock_step_spans", "lag_windows"]

Values = NDArray[np.float64]

#: Longest lag looked for [h]; a zone and a daylight hour are less.
_LONGEST_LAG = 14
#: Least correlation at the best lag that says anything.
_LEAST_CORRELATION = 0.4
#: Share of a window's hours that must be known in both.
_LEAST_SHARE = 0.4


def lag_windows(reading: Reading, reference: Reading, *, window_days: float = 15.0) -> pd.DataFrame:
    """Lag of a record against a reference in windows, by cross-correlation of hourly speeds.

    Parameters
    ----------
    reading : Reading
        The record.
    reference : Reading
        A long record from near the site.
    window_days : float
        Length of a window [day].

    Returns
    -------
    DataFrame
        ``from``, ``to``, ``lag`` [h, positive where the record is late], ``correlation`` at that
        lag, ``at_zero`` (correlation without lag) and ``hours`` known in both. Windows with too
        little data are left out.

    Notes
    -----
    The mean day is taken out of both, or the sea breeze of one and the mountain wind of the
    other would be the lag. Between whole hours the lag is that of the parabola through the best
    three.
    """
    own, other, start = _hourly(reading, reference)
    length = round(24 * window_days)
    rows = []
    for first in range(0, len(own) - length // 2, length):
        window = slice(first, min(first + length, len(own)))
        lag = _best_lag(own, other, window)
        if lag is None:
            continue
        stamp = start + pd.Timedelta(hours=first)
        end = start + pd.Timedelta(hours=window.stop)
        rows.append((stamp, end, *lag))
    table = pd.DataFrame(rows, columns=["from", "to", "lag", "correlation", "at_zero", "hours"])
    for name in ("from", "to"):
        table[name] = pd.to_datetime(table[name], utc=True).dt.as_unit("ns")
    return table


def clock_step_spans(
    reading: Reading, settings: CheckSettings, references: Sequence[Reading] = ()
) -> pd.DataFrame:
    """Windows in which the record's clock stands off its usual lag.

    Parameters
    ----------
    reading, settings : Reading, CheckSettings
        The record as read, and the lag that counts.
    references : sequence of Reading
        Long records from near the site; the one that agrees best is used.

    Returns
    -------
    DataFrame
        Spans of rule ``clock_step`` on every channel (``*``); the measure is the lag [h] less
        the usual one. Empty without references.
    """
    best: pd.DataFrame | None = None
    name = ""
    for reference in references:
        table = lag_windows(reading, reference, window_days=settings.clock_window_days)
        if len(table) >= 3 and (
            best is None or table["correlation"].median() > best["correlation"].median()
        ):
            best, name = table, reference.settings.name
    if best is None:
        return joined([])
    usual = float(best["lag"].median())
    off = _is_off((best["lag"] - usual).to_numpy(), settings.clock_lag_h)
    tables = []
    stamps = index_of(reading)
    for start, stop, lag in _edges(reading, best, off, usual, references, name):
        first, behind = stamps.searchsorted(start), stamps.searchsorted(stop)
        tables.append(
            one_span(
                int(first),
                int(behind),
                stamps,
                reading.interval,
                channel="*",
                rule="clock_step",
                reason=f"lags {name} by {lag - usual:+.1f} h more than usual",
                threshold=settings.clock_lag_h,
                measure=lag - usual,
                count=int(reading.frame.iloc[first:behind].notna().to_numpy().sum()),
            )
        )
    return joined(tables)


def _is_off(difference: Values, limit: float) -> NDArray[np.bool_]:
    """Windows off by the limit; one alone is chance unless it is off by twice as much."""
    far = np.abs(difference) >= limit
    beside = np.zeros(len(far), dtype=bool)
    same = np.sign(difference[1:]) == np.sign(difference[:-1])
    beside[1:] |= far[:-1] & same
    beside[:-1] |= far[1:] & same
    off: NDArray[np.bool_] = (far & beside) | (np.abs(difference) >= 2.0 * limit)
    return off


def _edges(
    reading: Reading,
    windows: pd.DataFrame,
    off: NDArray[np.bool_],
    usual: float,
    references: Sequence[Reading],
    name: str,
) -> list[tuple[pd.Timestamp, pd.Timestamp, float]]:
    """Runs of windows that are off, their edges moved to where the hours agree best."""
    reference = next(each for each in references if each.settings.name == name)
    own, other, start = _hourly(reading, reference)
    found = []
    at = np.flatnonzero(off)
    groups = np.split(at, np.flatnonzero(np.diff(at) > 1) + 1) if len(at) else []
    for group in groups:
        lag = float(windows["lag"].iloc[group].median())
        first, last = windows["from"].iloc[group[0]], windows["to"].iloc[group[-1]]
        bounds = []
        for edge, enters in ((first, True), (last, False)):
            hour = int((edge - start) / pd.Timedelta(hours=1))
            bounds.append(start + pd.Timedelta(hours=_turn(own, other, hour, usual, lag, enters)))
        found.append((bounds[0], bounds[1], lag))
    return found


def _turn(own: Values, other: Values, hour: int, usual: float, lag: float, enters: bool) -> int:
    """The hour near a window's edge from which (or up to which) the other lag fits better."""
    reach = 24 * 20
    a, b = max(hour - reach, 0), min(hour + reach, len(own))
    at = np.arange(a, b)
    misfit = []
    for shift in (round(usual), round(lag)):
        source = at - shift
        inside = (source >= 0) & (source < len(other))
        seen = np.where(inside, other[np.clip(source, 0, len(other) - 1)], np.nan)
        misfit.append((own[at] - seen) ** 2)
    # Positive where the other lag fits better.
    gain = np.nan_to_num(misfit[0] - misfit[1])
    total = np.concatenate([[0.0], np.cumsum(gain)])
    # Entering: what lies after should gain, what lies before should not.
    score = (total[-1] - total) - total if enters else total - (total[-1] - total)
    return int(a + np.argmax(score))


def _hourly(reading: Reading, reference: Reading) -> tuple[Values, Values, pd.Timestamp]:
    """Standardised hourly speeds of both on common hours, their mean day taken out."""
    series = []
    for each in (reading, reference):
        cup = each.settings.channel(each.settings.main_wind_speed)
        values = values_of(each, cup)
        middles = instants(index_of(each)) + (each.interval / 2).to_timedelta64()
        hour = middles.astype("datetime64[h]")
        known = np.isfinite(values)
        series.append((hour[known], values[known]))
    first = max(series[0][0].min(), series[1][0].min() - np.timedelta64(_LONGEST_LAG, "h"))
    last = min(series[0][0].max(), series[1][0].max() + np.timedelta64(_LONGEST_LAG, "h"))
    count = int((last - first) / np.timedelta64(1, "h")) + 1
    if count < 24:
        nothing = np.full(1, np.nan)
        return nothing, nothing, pd.Timestamp(first, tz="UTC")
    out = []
    for hour, values in series:
        at = ((hour - first) / np.timedelta64(1, "h")).astype(int)
        inside = (at >= 0) & (at < count)
        total = np.bincount(at[inside], weights=values[inside], minlength=count)
        seen = np.bincount(at[inside], minlength=count)
        mean = np.divide(total, seen, out=np.full(count, np.nan), where=seen > 0)
        # Square roots, because gusty hours would decide alone.
        mean = np.sqrt(np.maximum(mean, 0.0))
        hours = (int(first.astype("datetime64[h]").astype(np.int64)) + np.arange(count)) % 24
        for hour_of_day in range(24):
            mean[hours == hour_of_day] -= np.nanmean(mean[hours == hour_of_day])
        out.append(mean / np.nanstd(mean))
    return out[0], out[1], pd.Timestamp(first, tz="UTC")


def _best_lag(own: Values, other: Values, window: slice) -> tuple[float, float, float, int] | None:
    lags = np.arange(-_LONGEST_LAG, _LONGEST_LAG + 1)
    at = np.arange(window.start, window.stop)
    correlation = np.full(len(lags), np.nan)
    for number, shift in enumerate(lags):
        source = at - shift
        inside = (source >= 0) & (source < len(other))
        x, y = own[at[inside]], other[source[inside]]
        both = np.isfinite(x) & np.isfinite(y)
        if both.sum() < _LEAST_SHARE * len(at):
            continue
        x, y = x[both] - x[both].mean(), y[both] - y[both].mean()
        scale = math.sqrt(float(x @ x) * float(y @ y))
        correlation[number] = float(x @ y) / scale if scale > 0 else np.nan
    if not np.isfinite(correlation).any():
        return None
    best = int(np.nanargmax(correlation))
    if correlation[best] < _LEAST_CORRELATION:
        return None
    lag = float(lags[best])
    if 0 < best < len(lags) - 1:
        left, peak, right = correlation[best - 1 : best + 2]
        bend = left - 2 * peak + right
        if np.isfinite(bend) and bend < 0:
            lag += 0.5 * (left - right) / bend
    zero = float(correlation[_LONGEST_LAG])
    hours = int(np.isfinite(own[at]).sum())
    return lag, float(correlation[best]), zero, hours
