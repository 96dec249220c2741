"""Site and references as numbers on one clock, before a long-term correction.

Here tables become floats indexed by time, zones and steps are brought together, and what cannot be
read as such is refused in words. Which values are believed is decided in `long_term_inputs`.
"""

from __future__ import annotations

from datetime import tzinfo

import numpy as np
import pandas as pd

from windkit.study.errors import StudyError

__all__ = ["as_records", "direction_on_clock", "on_one_clock"]

DAY = pd.Timedelta(days=1)
#: Least share of a coarser step's values for its mean to count [1], our choice.
LEAST_SHARE_OF_STEP = 5 / 6


def as_records(site: object, references: object) -> tuple[pd.Series, pd.DataFrame]:
    """Both as floats in time order.

    Raises
    ------
    StudyError
        If they are no table of pandas, an index is not of times or holds a stamp twice, a column
        stands twice, or a value is no number.
    """
    if isinstance(site, pd.DataFrame) and site.shape[1] == 1:
        site = site.iloc[:, 0]
    if isinstance(references, pd.Series):
        name = "reference" if references.name is None else references.name
        references = pd.DataFrame({name: references})
    for data, kind, who in ((site, pd.Series, "site"), (references, pd.DataFrame, "references")):
        if not isinstance(data, kind):
            shape = f" of {data.shape[1]} columns" if isinstance(data, pd.DataFrame) else ""
            raise StudyError.of(
                key=who,
                met=f"it is a {type(data).__name__}{shape}",
                rule="the site is a pandas Series, the references a DataFrame, one column each",
                remedy="pass speeds [m/s] with a DatetimeIndex",
            )
        _check_index(data.index, who)
    assert isinstance(site, pd.Series)
    assert isinstance(references, pd.DataFrame)
    repeated = references.columns[references.columns.duplicated()]
    if len(repeated) or references.columns.nlevels > 1:
        raise StudyError.of(
            key="references",
            met=f"the name {repeated[0]!r} stands over several columns"
            if len(repeated)
            else f"the columns have {references.columns.nlevels} levels of names",
            rule="each reference has a name of its own",
            remedy="rename the columns",
        )
    columns = {name: _numbers(references[name], name) for name in references.columns}
    table = pd.DataFrame(columns, index=references.index, columns=references.columns)
    return _numbers(site, "site").sort_index(), table.sort_index()


def on_one_clock(
    site: pd.Series, references: pd.DataFrame
) -> tuple[pd.Series, pd.DataFrame, pd.Timedelta, list[str]]:
    """Both at the coarser of their steps, which must divide a day; and notes.

    A value counts to the step its stamp lies in. Days are those of the daily record's own clock;
    finer records are brought to UTC if they carry a zone.
    """
    zones = site.index.tz, references.index.tz  # type: ignore[attr-defined]
    if (zones[0] is None) != (zones[1] is None):
        raise StudyError.of(
            key="site",
            met="one of site and references carries a time zone and the other does not",
            rule="both must be on one clock",
            remedy="convert both to UTC",
        )
    own = [_step(site, "site"), _step(references, "references")]
    step = max(own)
    if step > DAY or DAY % step != pd.Timedelta(0):
        raise StudyError.of(
            key="site" if own[0] > own[1] else "references",
            met=f"the step of the records is {step}",
            rule="hourly or daily means are needed, or a step that divides a day",
            remedy="bring hourly or daily means",
        )
    day_zone = zones[0] if own[0] == DAY else zones[1]
    notes: list[str] = []

    def placed(data: pd.Series | pd.DataFrame, its: pd.Timedelta, who: str) -> pd.DataFrame:
        table = _zoned(
            data.to_frame() if isinstance(data, pd.Series) else data, its, step, day_zone
        )
        label = pd.DatetimeIndex(table.index).floor(step)
        if its < step:
            least = int(np.ceil(LEAST_SHARE_OF_STEP * (step / its)))
            grouped = table.groupby(label)
            return grouped.mean().where(grouped.count() >= least)
        if label.equals(table.index):
            return table
        if label.has_duplicates:
            notes.append(f"{who}: values within one step of {step} were averaged.")
            return table.groupby(label).mean()
        if its < DAY:
            notes.append(
                f"{who}: stamps beside the step of {step} (the first {table.index[0]}) were "
                "counted to the step they lie in."
            )
        return table.set_axis(label, axis=0)

    return (
        placed(site, own[0], "site").iloc[:, 0],
        placed(references, own[1], "references"),
        step,
        notes,
    )


def direction_on_clock(direction: pd.Series, times: pd.DatetimeIndex, who: str) -> np.ndarray:
    """Directions [deg] at the instants `times` of the joined records, NaN where there is none."""
    if not isinstance(direction, pd.Series):
        raise StudyError.of(
            key=who,
            met=f"it is a {type(direction).__name__}",
            rule="directions are indexed like the speeds",
            remedy="pass degrees [deg] with a DatetimeIndex",
        )
    _check_index(direction.index, who)
    direction = _numbers(direction, who).sort_index()
    zones = direction.index.tz, times.tz  # type: ignore[attr-defined]
    if (zones[0] is None) != (zones[1] is None):
        raise StudyError.of(
            key=who,
            met="one of speed and direction carries a time zone and the other does not",
            rule="both must be on one clock",
            remedy="convert both to UTC",
        )
    step = times[1] - times[0]
    its = _step(direction, who)
    table = _zoned(direction.to_frame(), its, step, zones[0]).iloc[:, 0]
    if its == step:
        label = pd.DatetimeIndex(table.index).floor(step)
        table = table.set_axis(label)[~label.duplicated()]
    return np.asarray(table.reindex(times), dtype=float)


def _zoned(
    table: pd.DataFrame, its: pd.Timedelta, step: pd.Timedelta, day_zone: tzinfo | None
) -> pd.DataFrame:
    """UTC, or for days the date on the daily record's wall, called UTC too."""
    index = pd.DatetimeIndex(table.index)
    if index.tz is None:
        return table
    if step < DAY:
        return table.set_axis(index.tz_convert("UTC"), axis=0)
    wall = index if its == DAY else index.tz_convert(day_zone)
    return table.set_axis(wall.tz_localize(None).tz_localize("UTC"), axis=0)


def _check_index(index: pd.Index, who: str) -> None:
    if not isinstance(index, pd.DatetimeIndex):
        raise StudyError.of(
            key=who,
            met=f"its index is a {type(index).__name__}",
            rule="both must be indexed by time",
            remedy="set a DatetimeIndex, the start of each interval in UTC",
        )
    if index.hasnans:
        raise StudyError.of(
            key=who,
            met=f"{int(np.count_nonzero(index.isna()))} stamps of its index are missing (NaT)",
            rule="every value stands at an instant",
            remedy="drop those rows, or look for stamps that could not be read",
        )
    if index.has_duplicates:
        repeated = index[index.duplicated()]
        raise StudyError.of(
            key=who,
            met=f"{len(repeated)} stamps are repeated, the first {repeated[0]}",
            rule="each instant stands once",
            remedy="find out which row is right; often a clock change or a file read twice",
        )


def _numbers(values: pd.Series, who: object) -> pd.Series:
    read = pd.to_numeric(values, errors="coerce")
    lost = read.isna() & values.notna()
    if lost.any() or read.dtype == bool or np.iscomplexobj(read):
        met = (
            f"{int(lost.sum())} values are no numbers, the first {values[lost].iloc[0]!r} on "
            f"{values.index[lost][0]}"
            if lost.any()
            else f"its values are of type {read.dtype}"
        )
        raise StudyError.of(
            key=str(who),
            met=met,
            rule="a speed is a number [m/s], or missing (NaN)",
            remedy="put NaN for words and missing-value codes",
        )
    return pd.Series(read.to_numpy(dtype=float, na_value=np.nan), values.index, name=values.name)


def _step(data: pd.Series | pd.DataFrame, who: str) -> pd.Timedelta:
    """The commonest distance of stamps: a record with many rows left out keeps its step."""
    if len(data) < 3:
        raise StudyError.of(
            key=who,
            met=f"it has {len(data)} rows",
            rule="a record has many",
            remedy="check the file and its period",
        )
    apart, count = np.unique(
        np.diff(pd.DatetimeIndex(data.index).as_unit("ns").asi8), return_counts=True
    )
    return pd.Timedelta(int(apart[np.argmax(count)]), unit="ns")
