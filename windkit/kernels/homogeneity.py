"""References held against each other: whose breaks are whose, and records with them taken out.

Here several references are compared month by month. A break shows in the log ratio of a reference
to the middle of the others; the clearest is adjusted first and the comparison made anew, so that
one station's break is not laid to its neighbours. The tests themselves stand in `breaks`.

Two references that disagree cannot say which is at fault, and one has nothing to be held against:
then breaks are listed (two) or not looked for (one), and nothing is adjusted.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from windkit.kernels.break_dates import break_range
from windkit.kernels.breaks import LEAST_SEGMENT, find_breaks, lag_one_autocorrelation

__all__ = ["FoundBreak", "Homogeneity", "compare_references"]

Array = NDArray[np.float64]

#: Most adjustments a reference [1], a stop for the loop; our choice.
MOST_ADJUSTMENTS = 6


@dataclass(frozen=True)
class FoundBreak:
    """A break laid to one reference.

    Attributes
    ----------
    reference : int
        Its column.
    month : int
        Index of the first month after the break.
    earliest, latest : int
        Months between which it lies with a chance of 90 % or more, as `month` is counted.
    size : float
        Mean after over mean before, less one [1].
    """

    reference: int
    month: int
    earliest: int
    latest: int
    size: float


@dataclass(frozen=True)
class Homogeneity:
    """What the comparison found.

    Attributes
    ----------
    breaks : list of FoundBreak
    factors : ndarray, shape (months, m)
        What to multiply each month with to bring a reference to the level of its last stretch [1].
    attributed : bool
        Whether there were references enough (three) to say whose a break is.
    """

    breaks: list[FoundBreak]
    factors: Array
    attributed: bool


def compare_references(monthly: Array, *, level: float = 0.05, seed: int = 0) -> Homogeneity:
    """Find each reference's breaks against the others, and the factors that take them out.

    Parameters
    ----------
    monthly : ndarray, shape (months, m)
        Monthly means [m/s], January of some year or any month first, no NaN.
    level : float
        Chance of a false alarm in one homogeneous reference [1].
    seed : int
        Of the simulated critical values.

    Returns
    -------
    Homogeneity

    References
    ----------
    .. [1] Alexandersson 1986, J. Climatol. 6:661 (the test on ratios to neighbours).
    """
    months, count = monthly.shape
    logarithm = np.log(np.maximum(monthly, 1e-3))
    logarithm = logarithm - _season(logarithm)
    if count < 2 or months < 2 * LEAST_SEGMENT:
        return Homogeneity([], np.ones_like(monthly), attributed=False)
    if count == 2:
        apart = logarithm[:, 0] - logarithm[:, 1]
        pair = find_breaks(apart, level=level, seed=seed)
        both = _dated(0, apart, [b.position for b in pair], [b.size for b in pair])
        return Homogeneity(both, np.ones_like(monthly), attributed=False)

    current = logarithm.copy()
    positions: list[set[int]] = [set() for _ in range(count)]
    dirty = set(range(count))
    found: dict[int, tuple[float, int, float]] = {}
    for _ in range(MOST_ADJUSTMENTS * count):
        for row in dirty:
            breaks = find_breaks(_against_others(current, row), level=level, seed=seed)
            fresh = [b for b in breaks if b.position not in positions[row]]
            found[row] = max(((b.statistic, b.position, b.size) for b in fresh), default=(0, 0, 0))
        row = max(found, key=lambda r: found[r][0])
        strength, position, size = found[row]
        if strength == 0 or len(positions[row]) >= MOST_ADJUSTMENTS:
            if strength == 0:
                break
            found[row] = (0, 0, 0)
            dirty = set()
            continue
        current[:position, row] += size
        positions[row].add(position)
        dirty = set(range(count))
    return _settled(logarithm, current, positions)


def _settled(logarithm: Array, current: Array, positions: list[set[int]]) -> Homogeneity:
    """Sizes worked out anew, all breaks of a reference together, against adjusted others."""
    months, count = logarithm.shape
    factors = np.zeros_like(logarithm)
    breaks: list[FoundBreak] = []
    for row in range(count):
        edges = [0, *sorted(positions[row]), months]
        mixed = current.copy()
        mixed[:, row] = logarithm[:, row]
        ratio = _against_others(mixed, row)
        level = [float(np.mean(ratio[start:end])) for start, end in pairwise(edges)]
        for (start, end), stretch in zip(pairwise(edges), level, strict=True):
            factors[start:end, row] = level[-1] - stretch
        breaks += _dated(row, ratio, edges[1:-1], np.diff(level).tolist())
    return Homogeneity(breaks, np.exp(factors), attributed=True)


def _dated(row: int, ratio: Array, at: list[int], steps: list[float]) -> list[FoundBreak]:
    """Breaks of one reference with the ranges of their dates; steps are logarithms."""
    edges = [0, *at, ratio.size]
    memory = lag_one_autocorrelation(ratio, at)
    found = []
    for before, month, after, step in zip(edges[:-2], at, edges[2:], steps, strict=True):
        first, last = before, after
        if after - before > 2 * LEAST_SEGMENT:
            first, last = (before + k for k in break_range(ratio[before:after], memory))
        size = float(np.expm1(step))
        found.append(FoundBreak(row, month, min(first, month), max(last, month), size))
    return found


def _against_others(logarithm: Array, row: int) -> Array:
    others = np.delete(logarithm, row, axis=1)
    return np.asarray(logarithm[:, row] - np.median(others - others.mean(axis=0), axis=1))


def _season(logarithm: Array) -> Array:
    """Mean yearly cycle of each column (twelve months), where there are two years or more."""
    months = logarithm.shape[0]
    if months < 24:
        return np.zeros_like(logarithm)
    calendar = np.arange(months) % 12
    cycle = np.array([np.median(logarithm[calendar == m], axis=0) for m in range(12)])
    return np.asarray((cycle - cycle.mean(axis=0))[calendar])
