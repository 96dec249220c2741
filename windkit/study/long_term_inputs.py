"""Site and references on one clock, checked, before a long-term correction.

Here the series are joined on their time index, impossible values are set aside and counted, and
what cannot be answered is refused with the reason. No statistics beyond daily means.
"""

from __future__ import annotations

import warnings
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.blend import fill_gaps
from windkit.study.errors import StudyError

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
    if isinstance(references, pd.Series):
        references = references.to_frame(references.name or "reference")
    _check_index(site, "site")
    _check_index(references, "references")
    site, references = _same_zone(site.sort_index(), references.sort_index())
    site, references, step = _same_step(site.astype(float), references.astype(float))
    notes: list[str] = []
    site = _without_impossible(site.to_frame("the site"), notes)["the site"]
    references = _without_impossible(references, notes)
    references = references.dropna(how="all")
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
    used = references.drop(columns=list(set_aside))
    if used.shape[1] == 0:
        reasons = "; ".join(f"{name}: {why}" for name, why in set_aside.items())
        raise StudyError.of(
            key="references",
            met=f"none of {len(set_aside)} can be used ({reasons})",
            rule="a correction needs at least one reference beside the campaign",
            remedy="bring another reference, or check the clock and the missing-value code",
        )
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


def _check_index(data: pd.Series | pd.DataFrame, who: str) -> None:
    if not isinstance(data.index, pd.DatetimeIndex):
        raise StudyError.of(
            key=who,
            met=f"its index is a {type(data.index).__name__}",
            rule="both must be indexed by time",
            remedy="set a DatetimeIndex, the start of each interval in UTC",
        )
    if data.index.has_duplicates:
        repeated = data.index[data.index.duplicated()]
        raise StudyError.of(
            key=who,
            met=f"{len(repeated)} stamps are repeated, the first {repeated[0]}",
            rule="each instant stands once",
            remedy="find out which row is right; often a clock change or a file read twice",
        )


def _same_zone(site: pd.Series, references: pd.DataFrame) -> tuple[pd.Series, pd.DataFrame]:
    zones = site.index.tz, references.index.tz  # type: ignore[attr-defined]
    if (zones[0] is None) != (zones[1] is None):
        raise StudyError.of(
            key="site",
            met="one of site and references carries a time zone and the other does not",
            rule="both must be on one clock",
            remedy="convert both to UTC",
        )
    if zones[0] is not None:
        return site.tz_convert("UTC"), references.tz_convert("UTC")
    return site, references


def _same_step(
    site: pd.Series, references: pd.DataFrame
) -> tuple[pd.Series, pd.DataFrame, pd.Timedelta]:
    """Both at the coarser of their steps, which must divide a day."""
    steps = []
    for data, who in ((site, "site"), (references, "references")):
        if len(data) < 3:
            raise StudyError.of(
                key=who,
                met=f"it has {len(data)} rows",
                rule="a record has many",
                remedy="check the file and its period",
            )
        stamps = pd.DatetimeIndex(data.index).as_unit("ns").asi8
        steps.append(pd.Timedelta(int(np.median(np.diff(stamps))), unit="ns"))
    step = max(steps)
    if step > pd.Timedelta(days=1) or pd.Timedelta(days=1) % step != pd.Timedelta(0):
        raise StudyError.of(
            key="references",
            met=f"the step of the records is {step}",
            rule="hourly or daily means are needed, or a step that divides a day",
            remedy="bring hourly or daily means",
        )
    if steps[0] < step:  # an hour or day counts from five sixths of its values on
        least = int(np.ceil(5 / 6 * (step / steps[0])))
        site = site.resample(step).mean().where(site.resample(step).count() >= least)
    if steps[1] < step:
        least = int(np.ceil(5 / 6 * (step / steps[1])))
        references = (
            references.resample(step).mean().where(references.resample(step).count() >= least)
        )
    return site, references, step


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


def _unusable(site: pd.Series, references: pd.DataFrame) -> dict[str, str]:
    seen = site.notna().to_numpy()
    reasons: dict[str, str] = {}
    for name in references.columns:
        values = references[name].to_numpy()
        there = np.isfinite(values)
        overlap = float(np.mean(there[seen]))
        if not there.any():
            reasons[name] = "holds no value"
        elif overlap < LEAST_OVERLAP:
            reasons[name] = f"measured in only {overlap:.0%} of the campaign"
        elif np.unique(values[there & seen]).size < 2:
            reasons[name] = "constant during the campaign"
        elif there.mean() < LEAST_RECOVERY:
            reasons[name] = f"measured in only {there.mean():.0%} of the references' period"
    return reasons


def _span(data: pd.Series | pd.DataFrame) -> str:
    if len(data) == 0:
        return "nothing"
    return f"{data.index[0]:%Y-%m-%d} to {data.index[-1]:%Y-%m-%d}"
