"""Site and references on one clock, checked, before a long-term correction.

Here the series are joined on their time index, impossible values are set aside and counted, and
what cannot be answered is refused with the reason. No statistics beyond daily means.
"""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.blend import fill_gaps
from windkit.study.errors import StudyError
from windkit.study.long_term_clock import as_records, on_one_clock

__all__ = ["LEAST_LENGTH_RATIO", "Inputs", "prepare_inputs"]

Array = NDArray[np.float64]

#: Highest mean speed taken for real [m/s]; the highest gust on record is 113 m/s (WMO, Barrow
#: Island 1996), and a mean of an hour or a day stays far below.
HIGHEST_SPEED = 75.0
#: Fewest concurrent days a correction is attempted on [day]; our choice.
LEAST_DAYS = 14.0
#: Least share of the campaign a reference must be measured in to be used [1]; our choice.
LEAST_OVERLAP = 0.5
#: Least share of the whole period a reference must be measured in [1]; our choice.
LEAST_RECOVERY = 0.2
#: How many times longer than the campaign the references' period must be [1]; our choice.
LEAST_LENGTH_RATIO = 1.5
#: One value that stands for so long is no wind [day] and at least so many values [1]; our choice.
STUCK_DAYS, STUCK_VALUES = 15.0, 15
#: Most values of a record that may be exactly 0 [1], and least mean speed [m/s]: below, it is an
#: instrument or a code rather than wind. Our choice.
MOST_ZEROS, LEAST_MEAN = 0.6, 0.3
#: Rms distance of two records over their means [1] below which one is a copy; our choice.
COPY_DISTANCE = 2e-3
#: Fewer references than this at a time are called few [1]; our choice.
THIN_REFERENCES = 3


@dataclass(frozen=True)
class Inputs:
    """Series joined on the references' clock, and their daily means.

    Attributes
    ----------
    times : DatetimeIndex, length n
    site : ndarray, shape (n,)
        [m/s], NaN where not measured.
    references : DataFrame, shape (n, m)
        The references in use as they came, NaN allowed [m/s].
    filled : ndarray, shape (n, m)
        With their gaps filled, for comparing means.
    steps_per_day : int
    days : DatetimeIndex, length d
    site_day, weight_day : ndarray, shape (d,)
        Daily mean of the site [m/s] and share of the day it was measured [1].
    reference_day, measured_day : ndarray, shape (d, m)
        Daily means [m/s], and share of the day measured [1].
    concurrent_day : ndarray, shape (d, m)
        Daily means over the steps at which the site was measured [m/s].
    set_aside : dict of str to str
        References not used, and why.
    notes : list of str
    """

    times: pd.DatetimeIndex
    site: Array
    references: pd.DataFrame
    filled: Array
    steps_per_day: int
    days: pd.DatetimeIndex
    site_day: Array
    weight_day: Array
    reference_day: Array
    measured_day: Array
    concurrent_day: Array
    set_aside: dict[str, str]
    notes: list[str]

    @property
    def campaign(self) -> slice:
        """Days from the first to the last the site was measured on."""
        seen = np.flatnonzero(self.weight_day > 0)
        return slice(int(seen[0]), int(seen[-1]) + 1)


def prepare_inputs(site: pd.Series, references: pd.DataFrame) -> Inputs:
    """Join, check and reduce to days.

    Raises
    ------
    StudyError
        If an index is not of times, a record has repeated stamps, site and references do not
        overlap or too little, the site is constant, the references are no longer than the
        campaign, or no reference can be used.
    """
    site, references, step, notes = on_one_clock(*as_records(site, references))
    site = _without_impossible(site.to_frame("the site"), notes)["the site"]
    references = _without_impossible(references, notes).dropna(how="all")
    if references.empty:
        raise StudyError.of(
            key="references",
            met="no reference holds a value",
            rule="a correction needs at least one",
            remedy="check the column and the missing-value code",
        )
    times = pd.date_range(references.index[0], references.index[-1], freq=step)
    references = references.reindex(times)
    spans = _span(site.dropna()), _span(references)
    joined = site.reindex(times)
    _check_site(site.dropna(), joined.dropna(), spans, step)
    constant = [name for name, values in references.items() if not values.max() > values.min()]
    joined = _without_stuck(joined.to_frame("the site"), step, notes)["the site"]
    references = _without_stuck(references, step, notes, but=constant)
    _check_site(joined.dropna(), joined.dropna(), spans, step)
    measured_days = float(joined.notna().sum() * step / pd.Timedelta(days=1))
    campaign = pd.DatetimeIndex(joined.dropna().index)
    if (times[-1] - times[0] + step) < LEAST_LENGTH_RATIO * (campaign[-1] - campaign[0] + step):
        raise StudyError.of(
            key="references",
            met=f"they cover {spans[1]} and the campaign {_span(joined.dropna())}",
            rule=f"the references must be at least {LEAST_LENGTH_RATIO:g} times as long as the "
            "campaign, or there is no longer term to correct to",
            remedy="bring longer references, or take the campaign's own mean with its yearly "
            "variability as the uncertainty",
        )
    if joined.notna().sum() < site.notna().sum():
        notes.append(
            f"{site.notna().sum() - joined.notna().sum()} values of the site lie outside the "
            "references' period or clock and were not used."
        )
    if measured_days < 330:
        notes.append(
            f"The campaign holds {measured_days:.0f} days of data, less than a year: the season "
            "is part of the uncertainty."
        )
    set_aside = _unusable(joined, references)
    set_aside |= _copies(joined, references.drop(columns=list(set_aside)))
    used = references.drop(columns=list(set_aside))
    if used.shape[1] == 0:
        reasons = "; ".join(f"{name}: {why}" for name, why in set_aside.items())
        raise StudyError.of(
            key="references",
            met=f"none of {len(set_aside)} can be used ({reasons})",
            rule="a correction needs at least one reference beside the campaign",
            remedy="bring another reference, or check the clock and the missing-value code",
        )
    _note_thin_years(used, notes)
    return _by_day(times, joined.to_numpy(), used, step, set_aside, notes)


def _by_day(
    times: pd.DatetimeIndex,
    site: Array,
    used: pd.DataFrame,
    step: pd.Timedelta,
    set_aside: dict[str, str],
    notes: list[str],
) -> Inputs:
    filled, measured = fill_gaps(used.to_numpy())
    day_start = times.floor("D")
    first = np.flatnonzero(np.r_[True, np.diff(day_start.asi8) != 0])
    length = np.diff(np.r_[first, times.size])[:, None]
    seen = np.isfinite(site)
    hours_seen = np.add.reduceat(seen, first, dtype=float)
    known = np.maximum(hours_seen, 1.0)
    by_day = np.add.reduceat(filled, first, axis=0) / length
    concurrent = np.add.reduceat(filled * seen[:, None], first, axis=0) / known[:, None]
    steps_per_day = max(round(pd.Timedelta(days=1) / step), 1)
    return Inputs(
        times=times,
        site=site,
        references=used,
        filled=filled,
        steps_per_day=steps_per_day,
        days=pd.DatetimeIndex(day_start[first]),
        site_day=np.add.reduceat(np.where(seen, site, 0.0), first) / known,
        weight_day=hours_seen / steps_per_day,
        reference_day=by_day,
        measured_day=np.add.reduceat(measured, first, axis=0, dtype=float) / length,
        concurrent_day=np.where(hours_seen[:, None] > 0, concurrent, by_day),
        set_aside=set_aside,
        notes=notes,
    )


def _without_impossible(data: pd.DataFrame, notes: list[str]) -> pd.DataFrame:
    bad = (data < 0) | (data > HIGHEST_SPEED)
    for column in data.columns[bad.any()]:
        count, worst = int(bad[column].sum()), data[column][bad[column]].iloc[0]
        text = (
            f"{column}: {count} value{'s' if count > 1 else ''} below 0 or above "
            f"{HIGHEST_SPEED:g} m/s set aside, the first {worst:.4g} m/s on "
            f"{data.index[bad[column]][0]}."
        )
        notes.append(text)
        warnings.warn(text, stacklevel=4)
    return data.mask(bad)


def _without_stuck(
    data: pd.DataFrame, step: pd.Timedelta, notes: list[str], *, but: Sequence[object] = ()
) -> pd.DataFrame:
    """Runs of one and the same value set aside: an instrument that stands, or a filled gap."""
    least = max(STUCK_VALUES, round(STUCK_DAYS * pd.Timedelta(days=1) / step))
    kept = data.copy()
    for name in data.columns.difference(list(but), sort=False):
        values = data[name].dropna()
        run = (values.diff() != 0).cumsum()
        stuck = run.groupby(run).transform("size") >= least
        if not stuck.any():
            continue
        first = values[stuck].index[0]
        text = (
            f"{name}: {int(stuck.sum())} values set aside because one value stands for "
            f"{STUCK_DAYS:g} days or more, the first {values[first]:.4g} m/s from {first:%Y-%m-%d}."
        )
        notes.append(text)
        warnings.warn(text, stacklevel=4)
        kept.loc[stuck.index[stuck], name] = np.nan
    return kept


def _check_site(
    site: pd.Series, joined: pd.Series, spans: tuple[str, str], step: pd.Timedelta
) -> None:
    days = len(joined) * step / pd.Timedelta(days=1)
    if days < LEAST_DAYS:
        raise StudyError.of(
            key="site",
            met=f"site and references share {days:.0f} days; the site covers {spans[0]}, the "
            f"references {spans[1]}",
            rule=f"a correction needs at least {LEAST_DAYS:g} concurrent days",
            remedy="bring references that cover the campaign, check both clocks, or measure on",
        )
    if np.ptp(site.to_numpy()) == 0:
        raise StudyError.of(
            key="site",
            met=f"all {len(site)} values are {site.iloc[0]:g} m/s",
            rule="a measured wind speed varies",
            remedy="check for a stuck sensor, a wrong column or a missing-value code",
        )
    calm = float(np.mean(site.to_numpy() == 0))
    if calm > MOST_ZEROS or site.mean() < LEAST_MEAN:
        raise StudyError.of(
            key="site",
            met=f"{calm:.0%} of its values are 0 and their mean is {site.mean():.2g} m/s",
            rule=f"a correction needs a mean of at least {LEAST_MEAN:g} m/s and at most "
            f"{MOST_ZEROS:.0%} zeros",
            remedy="check the unit, the sensor and whether 0 stands for a missing value",
        )


def _unusable(site: pd.Series, references: pd.DataFrame) -> dict[str, str]:
    seen = site.notna().to_numpy()
    reasons: dict[str, str] = {}
    for name in references.columns:
        values = references[name].to_numpy()
        there = np.isfinite(values)
        overlap = float(np.mean(there[seen]))
        zeros = float(np.mean(values[there] == 0)) if there.any() else 0.0
        if not there.any():
            reasons[name] = "holds no value"
        elif overlap < LEAST_OVERLAP:
            reasons[name] = f"measured in only {overlap:.0%} of the campaign"
        elif np.unique(values[there & seen]).size < 2:
            reasons[name] = "constant during the campaign"
        elif there.mean() < LEAST_RECOVERY:
            reasons[name] = f"measured in only {there.mean():.0%} of the references' period"
        elif zeros > MOST_ZEROS:
            reasons[name] = f"{zeros:.0%} of its values are 0"
        elif min(values[there].mean(), values[there & seen].mean()) < LEAST_MEAN:
            reasons[name] = f"its mean is {values[there].mean():.2g} m/s: check its unit"
    return reasons


def _copies(site: pd.Series, references: pd.DataFrame) -> dict[str, str]:
    """References that repeat another's values, perhaps scaled: two of them are one witness."""
    values = references.to_numpy()
    during = values[site.notna().to_numpy()]
    reasons: dict[str, str] = {}

    def alike(first: Array, second: Array) -> bool:
        both = np.isfinite(first) & np.isfinite(second)
        if both.sum() < LEAST_DAYS:
            return False
        a, b = first[both] / first[both].mean(), second[both] / second[both].mean()
        return bool(np.sqrt(np.mean((a - b) ** 2)) < COPY_DISTANCE)

    names = list(references.columns)
    for k, name in enumerate(names):
        for j in range(k):
            twin = names[j] not in reasons and alike(during[:, j], during[:, k])
            if twin and alike(values[:, j], values[:, k]):
                reasons[name] = f"has the same values as {names[j]}"
                break
    return reasons


def _note_thin_years(used: pd.DataFrame, notes: list[str]) -> None:
    """Say how much of the period rests on few of the references."""
    times = pd.DatetimeIndex(used.index)
    measured = used.notna().groupby(np.asarray(times.year * 12 + times.month)).any()
    years = float((measured.sum(axis=1) < min(THIN_REFERENCES, used.shape[1])).sum() / 12)
    if years >= 1:
        notes.append(
            f"In {years:.1f} years of the period fewer than {THIN_REFERENCES} references were "
            "measuring; the long-term mean of those years rests on them alone."
        )


def _span(data: pd.Series | pd.DataFrame) -> str:
    if len(data) == 0:
        return "nothing"
    return f"{data.index[0]:%Y-%m-%d} to {data.index[-1]:%Y-%m-%d}"
