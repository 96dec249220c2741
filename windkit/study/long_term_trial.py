"""References on trial before any answer is seen.

Here each reference is described and judged on its own record and on its likeness to the site:
overlap, correlation by averaging time, lag, seasons, trend, breaks against the others. The ranking
and its reasons come from this alone, never from the corrected mean.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.breaks import (
    critical_value,
    cusum,
    lag_one_autocorrelation,
    mann_kendall,
    pettitt,
    snht,
)
from windkit.kernels.homogeneity import Homogeneity, compare_references
from windkit.study.long_term_inputs import Inputs

__all__ = ["Trial", "try_references"]

Array = NDArray[np.float64]

#: Correlation of daily means below which a reference is called weak [1]; our choice.
WEAK_CORRELATION = 0.5
#: Lags scanned on either side [h]; common practice looks for a clock that is off by a zone.
LAG_HOURS = 12
#: Chance of a false alarm in one test of one reference [1].
TEST_LEVEL = 0.05
#: The same for breaks that are listed: a study runs one search a reference.
BREAK_LEVEL = 0.01


@dataclass(frozen=True)
class Trial:
    """What was found of the references.

    Attributes
    ----------
    table : DataFrame
        One row a reference, best first, those set aside last.
    breaks : DataFrame
        reference, date, earliest, latest, size.
    homogeneity : Homogeneity
    month_of_day : ndarray of int, shape (d,)
        Row of the monthly table each day belongs to.
    notes : list of str
    """

    table: pd.DataFrame
    breaks: pd.DataFrame
    homogeneity: Homogeneity
    month_of_day: NDArray[np.int64]
    notes: list[str]


def try_references(inputs: Inputs) -> Trial:
    """Describe, test and rank the references.

    Critical values are simulated with a seed of their own, so that a verdict does not hang on the
    seed of the study.
    """
    month_of_day, months = _months(inputs.days)
    weight = np.bincount(month_of_day)
    monthly = np.column_stack(
        [np.bincount(month_of_day, column) / weight for column in inputs.reference_day.T]
    )
    homogeneity = compare_references(monthly, level=BREAK_LEVEL)
    names = list(inputs.references.columns)
    breaks = pd.DataFrame(
        [
            {
                "reference": names[b.reference],
                "date": months[b.month],
                "earliest": months[b.earliest],
                "latest": months[min(b.latest, len(months) - 1)],
                "size": b.size,
            }
            for b in homogeneity.breaks
        ],
        columns=["reference", "date", "earliest", "latest", "size"],
    )
    notes = []
    if len(names) == 1:
        notes.append(
            "There is one reference only: its breaks cannot be told from the wind's own changes, "
            "so the interval rests on an assumption and is wide."
        )
    elif not homogeneity.attributed and len(breaks):
        breaks["reference"] = " or ".join(map(str, names))
        notes.append("Two references disagree in time, and two cannot tell whose the break is.")
    rows = [_one(inputs, index, monthly, homogeneity, months) for index in range(len(names))]
    table = pd.DataFrame(rows, index=pd.Index(names, name="reference"))
    table = table.sort_values("rank_score", ascending=False)
    if inputs.set_aside:
        aside = pd.DataFrame(
            [{"verdict": "set aside", "reason": why} for why in inputs.set_aside.values()],
            index=pd.Index(list(inputs.set_aside), name="reference"),
        )
        # Counts and flags have no value there, so the columns that hold them become objects
        table = pd.concat([table.astype(object), aside.astype(object)]).infer_objects()
    table.insert(0, "rank", range(1, len(table) + 1))
    return Trial(table, breaks, homogeneity, month_of_day, notes)


def _one(
    inputs: Inputs,
    index: int,
    monthly: Array,
    homogeneity: Homogeneity,
    months: pd.DatetimeIndex,
) -> dict[str, object]:
    seen = inputs.weight_day > 0
    site, reference = inputs.site_day[seen], inputs.concurrent_day[seen, index]
    days = inputs.days[seen]
    row: dict[str, object] = {
        "verdict": "used",
        "reason": "",
        "overlap_days": float(np.sum(inputs.weight_day[seen] * inputs.measured_day[seen, index])),
        "recovery": float(inputs.references.iloc[:, index].notna().mean()),
        "seasons_covered": int(np.unique(np.asarray(days.month) % 12 // 3).size),
        "correlation_hourly": _hourly_correlation(inputs, index),
        "correlation_daily": _correlation(site, reference),
        "correlation_weekly": _grouped_correlation(site, reference, days, 7),
        "correlation_monthly": _grouped_correlation(site, reference, days, 30),
    }
    row["lag_steps"] = _best_lag(inputs, index)
    years = monthly[: monthly.shape[0] // 12 * 12, index].reshape(-1, 12).mean(axis=1)
    if years.size >= 8:
        trend = mann_kendall(years)
        limit = critical_value(
            "mann_kendall", years.size, lag_one_autocorrelation(years), level=TEST_LEVEL
        )
        row["trend_per_decade"] = 10 * trend.slope / float(years.mean())
        row["trend_significant"] = bool(abs(trend.z) > limit)
    else:
        row["trend_per_decade"], row["trend_significant"] = np.nan, False
    row |= _tests(monthly, index)
    own = [b for b in homogeneity.breaks if b.reference == index] if homogeneity.attributed else []
    row["break_count"] = len(own)
    row["homogeneous_from"] = months[max((b.month for b in own), default=0)]
    broken = float(np.sum([abs(b.size) for b in own]))
    row["rank_score"] = float(str(row["correlation_daily"])) / (1 + 5 * broken)
    row["reason"] = _reason(row, own, months)
    return row


def _tests(monthly: Array, index: int) -> dict[str, object]:
    """Each single-break test against the middle of the others, over its critical value."""
    if monthly.shape[1] < 2 or monthly.shape[0] < 24:
        return dict.fromkeys(("snht_ratio", "pettitt_ratio", "cusum_ratio"), np.nan)
    logarithm = np.log(np.maximum(monthly, 1e-3))
    others = np.delete(logarithm, index, axis=1)
    apart = logarithm[:, index] - np.median(others - others.mean(axis=0), axis=1)
    phi = lag_one_autocorrelation(apart, [snht(apart).position])
    found: dict[str, object] = {}
    for name, test in (("snht", snht), ("pettitt", pettitt), ("cusum", cusum)):
        limit = critical_value(name, apart.size, phi, level=TEST_LEVEL)
        found[f"{name}_ratio"] = test(apart).statistic / limit
    return found


def _reason(row: dict[str, object], own: list, months: pd.DatetimeIndex) -> str:
    daily = float(str(row["correlation_daily"]))
    parts = [f"daily correlation {daily:.2f}" + (", weak" if daily < WEAK_CORRELATION else "")]
    if own:
        listed = ", ".join(f"{b.size:+.0%} from {months[b.month]:%Y-%m}" for b in own)
        parts.append(f"breaks against the others: {listed}")
    if row["trend_significant"]:
        parts.append(f"trend {float(str(row['trend_per_decade'])):+.1%} a decade")
    if row["lag_steps"]:
        parts.append(f"best at a lag of {row['lag_steps']} steps: check the clock")
    if float(str(row["recovery"])) < 0.9:
        parts.append(f"{float(str(row['recovery'])):.0%} of its period measured")
    return "; ".join(parts)


def _months(days: pd.DatetimeIndex) -> tuple[NDArray[np.int64], pd.DatetimeIndex]:
    """Calendar months; a first or last stump of under ten days goes with its neighbour."""
    label = np.asarray(days.year * 12 + days.month)
    number = label - label[0]
    count = np.bincount(number)
    if count.size > 1 and count[0] < 10:
        number = np.maximum(number - 1, 0)
    if count.size > 2 and count[-1] < 10:
        number = np.minimum(number, number.max() - 1)
    first = np.flatnonzero(np.r_[True, np.diff(number) > 0])
    return number.astype(np.int64), pd.DatetimeIndex(days[first])


def _correlation(first: Array, second: Array) -> float:
    if first.size < 3 or np.ptp(first) == 0 or np.ptp(second) == 0:
        return np.nan
    return float(np.corrcoef(first, second)[0, 1])


def _grouped_correlation(
    site: Array, reference: Array, days: pd.DatetimeIndex, width: int
) -> float:
    group = np.asarray((days - days[0]) // pd.Timedelta(days=width))
    count = np.bincount(group)
    kept = count >= 0.7 * width
    if kept.sum() < 5:
        return np.nan
    means = [np.bincount(group, v)[kept] / count[kept] for v in (site, reference)]
    return _correlation(means[0], means[1])


def _hourly_correlation(inputs: Inputs, index: int) -> float:
    if inputs.steps_per_day < 24:
        return np.nan
    values = inputs.references.iloc[:, index].to_numpy()
    both = np.isfinite(inputs.site) & np.isfinite(values)
    return _correlation(inputs.site[both], values[both])


def _best_lag(inputs: Inputs, index: int) -> int:
    """Steps the site is best shifted by; 0 unless another lag is clearly better."""
    if inputs.steps_per_day < 24:
        return 0
    reach = round(LAG_HOURS * inputs.steps_per_day / 24)
    values = inputs.references.iloc[:, index].to_numpy()
    found = {}
    for lag in range(-reach, reach + 1):
        shifted = np.roll(values, lag)
        both = np.isfinite(inputs.site) & np.isfinite(shifted)
        found[lag] = _correlation(inputs.site[both], shifted[both])
    best = max(found, key=lambda lag: found[lag])
    # An hour or two is the weather's travel time; more with a clear gain is a clock.
    return best if abs(best) > reach // 6 and found[best] > found[0] + 0.02 else 0
