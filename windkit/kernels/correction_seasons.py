"""Long-term correction by month or season of the year.

Here is `BySeason`, which fits a copy of any method for each calendar month and joins months that
are thin with their neighbours, so that it fits whole seasons where a year was measured and single
months where many years were. Sectors stand in `correction`; both can be nested.
"""

from __future__ import annotations

from typing import Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from windkit.kernels.correction import VarianceRatio
from windkit.kernels.estimator import SiteEstimator, copy_of, merged_neighbours

__all__ = ["BySeason"]

MONTHS = 12


class BySeason(SiteEstimator):
    """One copy of an estimator for each month of the year, thin months joined with neighbours.

    Its `X` has the calendar month, 1 to 12, as its last column: (n, 2) of speed and month, or
    (n, 3) of speed, direction and month. The columns before it go to the inner estimator, so a
    `BySector` may stand inside.

    Parameters
    ----------
    estimator : SiteEstimator, optional
        What is fitted in each month; left as it is, copies are fitted. A `VarianceRatio` if left
        out.
    min_count : int
        Fewest pairs a month is fitted on [1]. A month with fewer takes in its neighbours on both
        sides, December next to January, one pair of months more at a time; if all months hold too
        few, it is fitted on all pairs.

    Attributes
    ----------
    month_pair_count_ : ndarray of int, shape (12,)
        Pairs within each month before neighbours are taken in, January first.
    merged_neighbours_ : ndarray of int, shape (12,)
        Neighbours taken in on each side; 1 makes a season of three months round this one.
    estimators_ : list
        The fitted copies, January first.

    Raises
    ------
    ValueError
        If `X` has no column of months.

    Notes
    -----
    The estimator of a month holds for that month only, so neighbouring months share most of their
    pairs but change gradually: there is no step from one season to the next.
    """

    def __init__(self, estimator: SiteEstimator | None = None, *, min_count: int = 200) -> None:
        self.estimator = estimator
        self.min_count = min_count

    def fit(self, X: ArrayLike, y: ArrayLike) -> Self:
        base = VarianceRatio() if self.estimator is None else self.estimator
        inner, month = _split_month(X)
        site = np.asarray(y, dtype=float)
        if site.shape != month.shape:
            raise ValueError(
                f"reference and site must have the same length, got {month.shape} and "
                f"{site.shape}; join the two series on their time index first"
            )
        kept = np.isfinite(inner[:, 0]) & np.isfinite(site)
        inner, month, site = inner[kept], month[kept], site[kept]
        self.pair_count_ = site.size
        count = np.bincount(month - 1, minlength=MONTHS)
        self.month_pair_count_ = count
        self.merged_neighbours_ = merged_neighbours(count, self.min_count)
        self.estimators_: list[SiteEstimator] = []
        whole: SiteEstimator | None = None
        for centre, reach in enumerate(self.merged_neighbours_):
            if 2 * reach + 1 >= MONTHS:
                whole = whole or copy_of(base).fit(inner, site)
                self.estimators_.append(whole)
                continue
            half = MONTHS // 2
            distance = np.abs((month - 1 - centre + half) % MONTHS - half)
            near = distance <= reach
            self.estimators_.append(copy_of(base).fit(inner[near], site[near]))
        return self

    def predict(self, X: ArrayLike) -> NDArray[np.float64]:
        inner, month = _split_month(X)
        predicted = np.full(month.size, np.nan)
        for index, fitted in enumerate(self.estimators_):
            inside = month == index + 1
            if inside.any():
                predicted[inside] = fitted.predict(inner[inside])
        return predicted


def _split_month(X: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Columns for the inner estimator, and the month of each row."""
    X = np.asarray(X, dtype=float)
    if X.ndim != 2 or X.shape[1] not in (2, 3):
        raise ValueError(
            "BySeason needs X of shape (n, 2) or (n, 3) with the calendar month as its last "
            f"column, got {X.shape}; stack the reference's speed, its direction if there is one, "
            "and the month"
        )
    month = X[:, -1]
    wrong = ~np.isin(month, np.arange(1, MONTHS + 1))
    if wrong.any():
        raise ValueError(
            f"the last column of X must hold calendar months 1 to {MONTHS}, but "
            f"{np.count_nonzero(wrong)} of {month.size} rows hold something else, the first "
            f"{month[wrong][0]:g}; a direction goes before the month"
        )
    return X[:, :-1], month.astype(np.int64)
