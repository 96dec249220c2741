"""The fit/predict convention that every method of long-term correction keeps.

Here are the base class and what the methods share: pairs without NaN, sectors and their merging.
scikit-learn is not imported, yet its `clone`, splitters and scorers work on what is built here.
The methods themselves stand in `correction` and `correction_methods`.
"""

from __future__ import annotations

import inspect
from typing import Any, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

# The sectors of a fit are those of every table; the short name reads better beside a fit.
from windkit.kernels.frequency import sector_index as sector_of

__all__ = [
    "LEAST_PAIRS",
    "SiteEstimator",
    "concurrent_pairs",
    "copy_of",
    "merged_neighbours",
    "refuse_constant",
    "sector_of",
    "speed_and_direction",
]

#: Fewest concurrent pairs for which a line has a meaning [1]: two points draw one exactly.
LEAST_PAIRS = 3


class SiteEstimator:
    """What all estimators here share: parameters by name, pairs without NaN, a score.

    `X` is the reference: its speed [m/s] as (n,) or (n, 1), or speed and direction [deg] as
    (n, 2). `y` is the site's speed [m/s] at the same instants. Pairs in which a speed is NaN are
    left out of a fit and counted in `pair_count_`; a NaN speed predicts NaN.
    """

    def get_params(self, deep: bool = True) -> dict[str, Any]:
        """Constructor arguments by name; with `deep`, those of a nested estimator too."""
        names = [
            name
            for name, parameter in inspect.signature(type(self).__init__).parameters.items()
            if name != "self"
            and parameter.kind is not inspect.Parameter.VAR_POSITIONAL
            and parameter.kind is not inspect.Parameter.VAR_KEYWORD
        ]
        found: dict[str, Any] = {}
        for name in names:
            value = getattr(self, name)
            found[name] = value
            if deep and hasattr(value, "get_params") and not isinstance(value, type):
                found.update({f"{name}__{k}": v for k, v in value.get_params(True).items()})
        return found

    def set_params(self, **params: Any) -> Self:
        """Set constructor arguments by name; `outer__inner` reaches into a nested estimator."""
        known = self.get_params(deep=False)
        for name, value in params.items():
            outer, nested, inner = name.partition("__")
            if outer not in known:
                raise ValueError(
                    f"{type(self).__name__} has no parameter {outer!r}; it has {sorted(known)}"
                )
            if nested:
                getattr(self, outer).set_params(**{inner: value})
            else:
                setattr(self, outer, value)
        return self

    def fit(self, X: ArrayLike, y: ArrayLike) -> Self:
        """Fit on concurrent reference `X` and site speed `y`."""
        raise NotImplementedError

    def predict(self, X: ArrayLike) -> NDArray[np.float64]:
        """Site speed [m/s] for reference `X`."""
        raise NotImplementedError

    def score(self, X: ArrayLike, y: ArrayLike) -> float:
        """Coefficient of determination of `predict(X)` against `y` [1]."""
        observed = np.asarray(y, dtype=float)
        predicted = self.predict(X)
        kept = np.isfinite(observed) & np.isfinite(predicted)
        residual = observed[kept] - predicted[kept]
        return float(1.0 - np.mean(residual**2) / np.var(observed[kept]))

    def __repr__(self) -> str:
        inside = ", ".join(f"{k}={v!r}" for k, v in self.get_params(deep=False).items())
        return f"{type(self).__name__}({inside})"

    def __sklearn_tags__(self) -> Any:
        # Only scikit-learn calls this, so only then is it there to be imported.
        from sklearn.utils import (  # type: ignore[import-untyped]
            InputTags,
            RegressorTags,
            Tags,
            TargetTags,
        )

        return Tags(
            estimator_type="regressor",
            target_tags=TargetTags(required=True),
            regressor_tags=RegressorTags(),
            input_tags=InputTags(allow_nan=True),
        )


def speed_and_direction(
    X: ArrayLike,
) -> tuple[NDArray[np.float64], NDArray[np.float64] | None]:
    """Speed [m/s] and, if there is a second column, direction [deg] of an estimator's `X`."""
    X = np.asarray(X, dtype=float)
    if X.ndim == 1:
        return X, None
    if X.ndim == 2 and X.shape[1] in (1, 2):
        return X[:, 0], X[:, 1] if X.shape[1] == 2 else None
    raise ValueError(
        f"X must be (n,), (n, 1) or (n, 2) with speed and direction as columns, got {X.shape}"
    )


def concurrent_pairs(
    X: ArrayLike, y: ArrayLike, *, least: int = LEAST_PAIRS
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Reference and site speeds [m/s] of the pairs in which neither is NaN."""
    x, _ = speed_and_direction(X)
    y = np.asarray(y, dtype=float)
    if x.shape != y.shape:
        raise ValueError(
            f"reference and site must have the same length, got {x.shape} and {y.shape}; join "
            "the two series on their time index first"
        )
    kept = np.isfinite(x) & np.isfinite(y)
    if np.count_nonzero(kept) < least:
        raise ValueError(
            f"reference and site share {np.count_nonzero(kept)} values; a fit needs at least "
            f"{least}"
        )
    return x[kept], y[kept]


def merged_neighbours(count: ArrayLike, min_count: int) -> NDArray[np.int64]:
    """Neighbours each sector takes in on both sides to hold `min_count` pairs.

    `count` holds the pairs of each sector, in order round the circle. Where the whole circle
    holds too few, the answer reaches round it.
    """
    pairs: NDArray[np.int64] = np.asarray(count, dtype=np.int64)
    sector_count = pairs.size
    reach = np.full(sector_count, sector_count // 2, dtype=np.int64)
    for step in range(sector_count // 2, -1, -1):
        total = np.sum([np.roll(pairs, shift) for shift in range(-step, step + 1)], axis=0)
        reach[total >= min_count] = step
    return reach


def copy_of(estimator: SiteEstimator) -> SiteEstimator:
    """An unfitted copy with the same parameters, nested ones copied too."""
    params = {
        name: copy_of(value) if isinstance(value, SiteEstimator) else value
        for name, value in estimator.get_params(deep=False).items()
    }
    return type(estimator)(**params)


def refuse_constant(values: NDArray[np.float64], who: str) -> None:
    """Raise if all concurrent speeds of one side are equal."""
    if np.ptp(values) == 0:
        raise ValueError(
            f"the {who} is constant at {values[0]:g} m/s over the {values.size} concurrent pairs, "
            "so no line can be fitted; check the file for a stuck sensor or a missing-value code"
        )
