"""Methods of long-term correction on trial by blocked hold-out, and the series of the best.

Every method is fitted on all blocks of the campaign but one and predicts that one: whole months, or
weeks if the campaign is short. It is scored on what a study needs (mean speed, mean cube,
distribution, energy), beside doing nothing. The blend of references stands in `long_term_blend`.
"""

from __future__ import annotations

from collections.abc import Callable
from contextlib import AbstractContextManager

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.circular import direction_difference
from windkit.kernels.correction import BySector, LinearRegression, RatioOfMeans, VarianceRatio
from windkit.kernels.correction_methods import (
    ConditionalDistributions,
    QuantileMapping,
    SectorVeer,
    TotalLeastSquares,
    WeibullParameterScaling,
)
from windkit.kernels.correction_seasons import BySeason
from windkit.kernels.estimator import SiteEstimator, copy_of

__all__ = ["method_estimators", "method_scores", "method_series"]

Array = NDArray[np.float64]
Power = Callable[[Array], Array]

#: Most blocks held out in turn [1], our choice: enough for all seasons of a year.
MOST_BLOCKS = 12
#: Fewest pairs in a sector of its own, as a share of all pairs [1] and at least: our choice.
SECTOR_SHARE, LEAST_IN_SECTOR = 0.03, 40
#: Calendar months a campaign must have seen for its methods to be fitted by season [1], and the
#: fewest pairs of a season as a share of all pairs [1]: three months of a year. Our choice.
MONTHS_FOR_SEASONS, SEASON_SHARE = 10, 0.2
#: Methods whose series has not the site's spread and must not feed energy: a regression has too
#: little, a line through both errors too much wherever the site is the noisier record.
WITHOUT_SPREAD = (
    "linear regression",
    "linear regression by sector",
    "total least squares",
    "boosted trees",
)


def method_estimators(
    pair_count: int, with_direction: bool, with_seasons: bool, seed: int
) -> dict[str, SiteEstimator]:
    """The methods by name, unfitted; those by season take the month as the last column of X."""
    plain: dict[str, SiteEstimator] = {
        "ratio of means": RatioOfMeans(),
        "linear regression": LinearRegression(),
        "regression with scatter": LinearRegression(restore_scatter=True, seed=seed),
        "variance ratio": VarianceRatio(),
        "total least squares": TotalLeastSquares(),
        "quantile mapping": QuantileMapping(),
        "conditional distributions": ConditionalDistributions(seed=seed),
        "Weibull-parameter scaling": WeibullParameterScaling(),
    }
    found = dict(plain)
    if with_direction:
        least = max(LEAST_IN_SECTOR, round(SECTOR_SHARE * pair_count))
        # A line through both errors has no meaning in a sector where the two do not rise together.
        split = {k: e for k, e in plain.items() if k != "total least squares"}
        found |= {f"{k} by sector": BySector(e, min_count=least) for k, e in split.items()}
    if with_seasons:
        season = max(LEAST_IN_SECTOR, round(SEASON_SHARE * pair_count))
        found |= {
            f"{k} by season": BySeason(plain[k], min_count=season)
            for k in ("ratio of means", "variance ratio")
        }
    return found


def method_scores(
    site: Array,
    reference: Array,
    direction: Array | None,
    times: pd.DatetimeIndex,
    *,
    site_direction: Array | None = None,
    power: Power | None = None,
    seed: int = 0,
) -> pd.DataFrame:
    """Score table of all methods on one reference, best first.

    Parameters
    ----------
    site, reference : ndarray, shape (n,)
        Concurrent speeds [m/s], no NaN.
    direction, site_direction : ndarray, shape (n,), optional
        [deg]; NaN where there is none.
    times : DatetimeIndex, length n
    power : callable, optional
        Power [W] of an array of speeds [m/s].

    Returns
    -------
    DataFrame
        Index the method. mean_error, cube_error, energy_error: rms over the held-out blocks,
        relative [1]; distribution_error: mean distance of the quantiles over the mean [1];
        from_winter, from_summer: error of the year's mean if fitted on half of it [1];
        score: the lower the better; keeps_spread.
    """
    X = reference if direction is None else np.column_stack([reference, direction])
    blocks = _blocks(times)
    months = np.asarray(times.month)
    estimators = method_estimators(site.size, direction is not None, _whole_year(months), seed)
    rows: dict[str, dict[str, float]] = {}
    learner = _boosted_trees(seed)
    for name, estimator in estimators.items():
        its = _columns(estimator, X, months)
        rows[name] = _held_out(copy_of(estimator), its, site, blocks, power)
        rows[name] |= _season_halves(copy_of(estimator), its, site, times)
    if learner is not None and site.size >= 200:
        filled = X if X.ndim == 2 else X[:, None]
        with _one_thread():
            rows["boosted trees"] = _held_out(learner, filled, site, blocks, power)
    rows["doing nothing"] = _held_out(_Nothing(), X, site, blocks, power)
    table = pd.DataFrame.from_dict(rows, orient="index")
    table.index.name = "method"
    if site_direction is not None and direction is not None:
        table["direction_error_deg"] = _direction_error(direction, site_direction, blocks)
    # The cube weighs a third: an error of the mean comes back in it threefold.
    table["score"] = table["mean_error"] + table["cube_error"] / 3 + table["distribution_error"]
    table["keeps_spread"] = [
        name not in WITHOUT_SPREAD and name != "doing nothing" for name in table.index
    ]
    return table.sort_values("score")


def method_series(
    method: str,
    site: Array,
    X: Array,
    X_long: Array,
    mean_speed: float,
    *,
    months: NDArray[np.int64],
    months_long: NDArray[np.int64],
    seed: int = 0,
) -> Array:
    """Long-term speeds [m/s] by one method, not below zero, with the given mean.

    `X` and `months` are of the concurrent pairs, `X_long` and `months_long` of the long record.
    """
    estimator = method_estimators(site.size, X.ndim == 2, _whole_year(months), seed)[method]
    estimator.fit(_columns(estimator, X, months), site)
    predicted = np.maximum(estimator.predict(_columns(estimator, X_long, months_long)), 0.0)
    return np.asarray(predicted * (mean_speed / np.nanmean(predicted)))


def _whole_year(months: NDArray[np.int64]) -> bool:
    return len(np.unique(months)) >= MONTHS_FOR_SEASONS


def _columns(estimator: SiteEstimator, X: Array, months: NDArray[np.int64]) -> Array:
    """What an estimator's X is made of: by season, speed and month."""
    if not isinstance(estimator, BySeason):
        return X
    return np.column_stack([X if X.ndim == 1 else X[:, 0], months])


class _Nothing(SiteEstimator):
    """The campaign itself, as if the wind did not vary: its sorted speeds laid out evenly."""

    def fit(self, X: object, y: Array) -> _Nothing:  # type: ignore[override]
        self._speeds = np.sort(y)
        return self

    def predict(self, X: Array) -> Array:  # type: ignore[override]
        at = (np.arange(len(X)) + 0.5) / len(X) * self._speeds.size
        return np.asarray(self._speeds[at.astype(int)])


def _blocks(times: pd.DatetimeIndex) -> NDArray[np.int64]:
    month = times.year * 12 + times.month
    if len(np.unique(month)) >= 5:
        label = np.asarray(month)
    else:
        label = np.asarray((times - times[0]) // pd.Timedelta(days=7))
    order = np.unique(label, return_inverse=True)[1]
    return np.asarray(order % MOST_BLOCKS)


def _held_out(
    estimator: SiteEstimator, X: Array, y: Array, blocks: NDArray[np.int64], power: Power | None
) -> dict[str, float]:
    found = []
    for block in np.unique(blocks):
        out = blocks == block
        try:
            predicted = np.maximum(estimator.fit(X[~out], y[~out]).predict(X[out]), 0.0)
        except ValueError:  # a method that cannot be fitted to this much data is not scored
            return {"mean_error": np.nan, "cube_error": np.nan, "distribution_error": np.nan}
        truth = y[out]
        row = [
            predicted.mean() / truth.mean() - 1,
            np.mean(predicted**3) / np.mean(truth**3) - 1,
            np.mean(np.abs(np.sort(predicted) - np.sort(truth))) / truth.mean(),
        ]
        if power is not None:
            known = float(np.mean(power(truth)))
            row.append(float(np.mean(power(predicted))) / known - 1 if known > 0 else np.nan)
        found.append(row)
    errors = np.array(found)
    scores = {
        "mean_error": float(np.sqrt(np.mean(errors[:, 0] ** 2))),
        "cube_error": float(np.sqrt(np.mean(errors[:, 1] ** 2))),
        "distribution_error": float(np.mean(errors[:, 2])),
    }
    if power is not None:
        scores["energy_error"] = float(np.sqrt(np.nanmean(errors[:, 3] ** 2)))
    return scores


def _season_halves(
    estimator: SiteEstimator, X: Array, y: Array, times: pd.DatetimeIndex
) -> dict[str, float]:
    """Signed error of the campaign's mean if only its winter or summer half had been measured."""
    winter = np.asarray((times.month >= 10) | (times.month <= 3))
    if min(winter.sum(), (~winter).sum()) < 0.3 * winter.size:
        return {"from_winter": np.nan, "from_summer": np.nan}
    found = {}
    for name, half in (("from_winter", winter), ("from_summer", ~winter)):
        try:
            found[name] = float(estimator.fit(X[half], y[half]).predict(X).mean() / y.mean() - 1)
        except ValueError:
            found[name] = np.nan
    return found


def _direction_error(reference: Array, site: Array, blocks: NDArray[np.int64]) -> float:
    """Mean size of the held-out direction error [deg]."""
    sizes = []
    for block in np.unique(blocks):
        out = blocks == block
        predicted = SectorVeer().fit(reference[~out], site[~out]).predict(reference[out])
        sizes.append(np.abs(np.asarray(direction_difference(predicted, site[out]))))
    joined = np.concatenate(sizes)
    return float(np.nanmean(joined)) if np.isfinite(joined).any() else np.nan


def _one_thread() -> AbstractContextManager[object]:
    """Small fits in many threads wait for each other longer than they work."""
    from threadpoolctl import threadpool_limits  # type: ignore[import-untyped]

    limits: AbstractContextManager[object] = threadpool_limits(1)
    return limits


def _boosted_trees(seed: int) -> SiteEstimator | None:
    """The yardstick: scikit-learn's gradient boosting, where that library is installed."""
    try:
        from sklearn.ensemble import (  # type: ignore[import-untyped]
            HistGradientBoostingRegressor,
        )
    except ImportError:
        return None
    learner: SiteEstimator = HistGradientBoostingRegressor(
        max_iter=60, max_leaf_nodes=15, random_state=seed, early_stopping=False
    )
    return learner
