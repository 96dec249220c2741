"""Several files of one record: which of them overlap, and what a clock wrote in one go.

Here the stamps of files that were read one after the other are held against each other. What is
wrong within a file is the business of `stamps`.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from windkit.study.errors import StudyError
from windkit.study.stations import StationSettings

__all__ = ["LONGEST_SEAM", "Part", "file_parts", "refuse_overlaps", "shown_stamp", "written_runs"]

Stamps = NDArray[np.datetime64]
#: Name of a file, and where its rows begin and end among those that are used.
Part = tuple[str, int, int]

#: A file that begins this long before the end of another overlaps it; within it, the files may
#: also meet at an hour that a clock repeats.
LONGEST_SEAM = np.timedelta64(2, "h")
_NOTHING = np.timedelta64(0, "us")


def file_parts(kept: NDArray[np.intp], files: Sequence[tuple[str, int]]) -> list[Part]:
    """Name of each file with rows to use, and where its rows begin and end among those."""
    ends = np.cumsum([count for _, count in files])
    edges = np.searchsorted(kept, [0, *ends])
    named = zip((name for name, _ in files), edges, edges[1:], strict=False)
    return [(name, int(first), int(stop)) for name, first, stop in named if first < stop]


def written_runs(times: Stamps, parts: list[Part]) -> list[tuple[int, int]]:
    """Rows that a clock wrote one after the other: files, joined where they do not overlap."""
    runs: list[tuple[int, int]] = []
    for _, first, stop in parts:
        if runs and times[first] >= times[first - 1] - LONGEST_SEAM:
            runs[-1] = (runs[-1][0], stop)
        else:
            runs.append((first, stop))
    return runs


def refuse_overlaps(
    times: Stamps,
    parts: list[Part],
    settings: StationSettings,
    *,
    least: np.timedelta64,
) -> None:
    """Refuse files that share more than a time, if each rises by itself."""
    if np.all(np.diff(times) > _NOTHING):
        return
    if any(np.any(np.diff(times[first:stop]) <= _NOTHING) for _, first, stop in parts):
        return
    for (one, *rows), (two, *others) in combinations(parts, 2):
        here, there = times[slice(*rows)], times[slice(*others)]
        begin, end = max(here[0], there[0]), min(here[-1], there[-1])
        if end - begin <= least:
            continue
        shared = len(np.intersect1d(here, there))
        keep = ' and repeated_stamps = "keep_first"' if shared else ""
        raise StudyError.of(
            met=f"{settings.name}: two files overlap from {shown_stamp(begin)} to "
            f"{shown_stamp(end)}: {one} runs from {shown_stamp(here[0])} to "
            f"{shown_stamp(here[-1])}, {two} from {shown_stamp(there[0])} to "
            f"{shown_stamp(there[-1])}, and {shared} stamps stand in both",
            rule="each interval stands in one file",
            remedy=f"compare the two; if they agree there, write "
            f'unsorted_stamps = "sort"{keep}'
            + (f": of a stamp that stands twice the row of {one} is used" if shared else "")
            + ". If not, ask which holds, and cut the overlap from a copy of the other, or by "
            "use_from or use_until if it lies at an end of the record",
        )


def shown_stamp(stamp: np.datetime64) -> str:
    """A stamp as messages show it."""
    text = str(stamp.astype("datetime64[s]")).replace("T", " ")
    return text.removesuffix(":00")
