"""Daylight saving in a file's stamps: found by its seams, and refused.

A clock that follows daylight saving skips an hour in spring and repeats one in autumn, on known
Sundays. Here such seams are found in the stamps alone. A file that has them cannot be put right
by guessing which hour is which; it is exported again, or the gap is declared to be a gap.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

__all__ = ["Seam", "repeated_hours", "skipped_hours"]

_HOUR = np.timedelta64(60, "m")
_NOTHING = np.timedelta64(0, "us")

#: A seam: position of the row behind it, and in which custom the clock changes there.
Seam = tuple[int, str]


def _sunday(year: int, month: int, number: int) -> dt.date:
    """The first, second ... Sunday of a month, or the last for -1."""
    if number > 0:
        first = dt.date(year, month, 1)
        return first + dt.timedelta(days=(6 - first.weekday()) % 7 + 7 * (number - 1))
    after = dt.date(year + month // 12, month % 12 + 1, 1)
    return after - dt.timedelta(days=(after.weekday() - 6) % 7 or 7)


def _customs(year: int) -> Iterator[tuple[str, dt.datetime, dt.datetime]]:
    """Local clock times at which an hour is skipped and at which the repeated hour ends.

    European Union directive 2000/84/EC (01:00 UTC, so 01:00 to 03:00 by zone), US Energy Policy
    Act of 2005, and the customs of south-eastern Australia, New Zealand and Chile; from memory.
    """

    def at(date: dt.date, hour: int) -> dt.datetime:
        return dt.datetime(date.year, date.month, date.day) + dt.timedelta(hours=hour)

    for zone, hour in (("western", 1), ("central", 2), ("eastern", 3)):
        spring, autumn = _sunday(year, 3, -1), _sunday(year, 10, -1)
        yield f"{zone} European", at(spring, hour), at(autumn, hour + 1)
    yield "North American", at(_sunday(year, 3, 2), 2), at(_sunday(year, 11, 1), 2)
    yield "North American (to 2006)", at(_sunday(year, 4, 1), 2), at(_sunday(year, 10, -1), 2)
    yield "Australian", at(_sunday(year, 10, 1), 2), at(_sunday(year, 4, 1), 3)
    yield "New Zealand", at(_sunday(year, 9, -1), 2), at(_sunday(year, 4, 1), 3)
    yield "Chilean", at(_sunday(year, 9, 1), 0), at(_sunday(year, 4, 1), 0)


def skipped_hours(
    local: NDArray[np.datetime64], interval: np.timedelta64, *, ends: bool
) -> list[Seam]:
    """Gaps of exactly the hour that a clock skips in spring.

    Parameters
    ----------
    local : ndarray of datetime64
        Stamps on the file's clock, rising.
    interval : timedelta64
        Length of an interval.
    ends : bool
        Whether the stamps are ends of intervals.

    Returns
    -------
    list of (int, str)
        Position of the first row behind each such gap, and the custom.
    """
    stamps = local.astype("datetime64[us]")
    gaps = np.flatnonzero(np.diff(stamps) == interval + _HOUR)
    # The last interval before the gap ends when the clock jumps; loggers that stamp ends write
    # that end by the old time or by the new.
    jumps = {stamps[at] + interval: int(at) + 1 for at in gaps}
    if ends:
        jumps |= {stamps[at]: int(at) + 1 for at in gaps}
    found: dict[str, list[int]] = {}
    covered: dict[str, int] = {}
    for year in _years(stamps):
        for custom, skipped, _ in _customs(year):
            jump = np.datetime64(skipped, "us")
            covered[custom] = covered.get(custom, 0) + int(stamps[0] <= jump <= stamps[-1])
            if jump in jumps:
                found.setdefault(custom, []).append(jumps[jump])
    # In a record with many gaps one of them falls there by chance; most springs do not.
    sure = {custom for custom, rows in found.items() if 2 * len(rows) >= covered[custom]}
    seams: dict[int, str] = {}
    for custom in sorted(sure):
        for row in found[custom]:
            seams.setdefault(row, custom)
    return sorted(seams.items())


def repeated_hours(local: NDArray[np.datetime64], interval: np.timedelta64) -> list[Seam]:
    """Hours that stand twice where a clock is put back in autumn.

    Parameters
    ----------
    local : ndarray of datetime64
        Stamps on the file's clock, in the order they stand.
    interval : timedelta64
        Length of an interval.

    Returns
    -------
    list of (int, str)
        Position of the first row that stands again in each such hour, and the custom.
    """
    stamps = local.astype("datetime64[us]")
    seams: list[Seam] = []
    if not len(stamps) or (np.diff(stamps) > _NOTHING).all():
        return seams
    least = max(1.0, 0.5 * float(_HOUR / interval))
    seen = set()
    customs = [
        (custom, np.datetime64(end, "us"))
        for year in _years(stamps)
        for custom, _, end in _customs(year)
    ]
    # An hourly stamp at the very end of the hour is looked for after the others.
    for with_end in (False, True):
        for custom, end in customs:
            before = stamps <= end if with_end else stamps < end
            rows = np.flatnonzero((stamps >= end - _HOUR) & before)
            _, first = np.unique(stamps[rows], return_index=True)
            again = np.delete(rows, first)
            if len(again) >= least and int(again[0]) not in seen:
                seams.append((int(again[0]), custom))
                seen.update(again.tolist())
    return sorted(seams)


def _years(stamps: NDArray[np.datetime64]) -> range:
    years = stamps[[int(stamps.argmin()), int(stamps.argmax())]].astype("datetime64[Y]").astype(int)
    return range(int(years[0]) + 1970, int(years[1]) + 1971)
