"""The clock of a file: stamps as written become starts of intervals in UTC.

Here stamps are read, held against what the study declares (zone, interval, order, period) and
moved once. Nothing is guessed and nothing is mended: what does not fit is refused with the lines,
or set aside where the study says so. Values are the business of `reading`.
"""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Callable, Sequence

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

from windkit.study.clock_changes import Seam, repeated_hours, skipped_hours
from windkit.study.errors import StudyError
from windkit.study.file_order import (
    LONGEST_SEAM,
    file_parts,
    refuse_overlaps,
    shown_stamp,
    written_runs,
)
from windkit.study.stations import StationSettings
from windkit.study.text_files import RawTable, has_digits, listed

__all__ = ["EARLIEST_YEAR", "interval_of", "on_the_clock", "read_stamps", "to_starts"]

#: Stamps before this year are refused; the longest open reanalyses begin in 1836.
EARLIEST_YEAR = 1836
#: A block of stamps this far from the rest [days] ...
_FAR_DAYS = 366
#: ... with no more than this share of the rows comes from a clock that was not set.
_FAR_SHARE = 0.05

_ZONE = re.compile(r"(Z|UTC|[+-][01]\d:?\d{2}|(?<=:\d{2})[+-][01]\d)$")
_ZONE_ARROW = r"\d\d:\d\d.*(Z|UTC|[+-][01]\d(:?\d\d)?)$"
_MICROSECONDS_PER_MINUTE = 60_000_000

Stamps = NDArray[np.datetime64]


def interval_of(settings: StationSettings) -> pd.Timedelta:
    """Length of the station's averaging interval."""
    return pd.Timedelta(round(settings.interval_min * 60_000), unit="ms")


def read_stamps(table: RawTable, settings: StationSettings) -> Stamps:
    """Stamps of one file on the file's own clock, without a zone.

    Parameters
    ----------
    table : RawTable
        Rows of the file.
    settings : StationSettings
        Format of the stamps and the declared offset from UTC.

    Returns
    -------
    ndarray of datetime64[us]
        One stamp per row, as the logger's clock showed it.

    Raises
    ------
    StudyError
        If a stamp cannot be read, carries a zone other than the declared one, or lies before
        `EARLIEST_YEAR` or in the future.
    """
    stamps = table.stamps
    if pa.types.is_timestamp(stamps.type):
        local = _typed(table, settings)
    elif settings.time_format is None and (plain := _plain_iso(stamps)) is not None:
        local = plain
    else:
        stamps = pc.utf8_trim_whitespace(stamps)
        time_format = settings.time_format
        zoned = pc.match_substring_regex(stamps, _ZONE_ARROW)
        if (time_format is None or "%z" in time_format) and pc.any(zoned).as_py():
            stamps = _without_zone(table, stamps, settings)
            time_format = time_format and time_format.replace("%z", "").strip()
        local = _parsed(stamps, time_format)
    unreadable = np.flatnonzero(np.isnat(local))
    if len(unreadable):
        lines = table.line_numbers()
        texts = [f"{table.unit_of_rows} {lines[at]} '{stamps[int(at)]}'" for at in unreadable]
        expected = (
            f"stamps have the declared format {settings.time_format}"
            if settings.time_format
            else "stamps without a time_format are ISO 8601, such as 2026-03-29 01:50"
        )
        raise StudyError.of(
            file=table.file,
            line=int(lines[unreadable[0]]),
            met=f"{len(unreadable)} of {len(local)} stamps cannot be read: {listed(texts)}",
            rule=expected,
            remedy=_under_header(table, unreadable, settings)
            + 'write time_format as the file has it, such as "%d/%m/%Y %H:%M"; if only '
            "these rows are damaged, correct them in a copy of the file",
        )
    _refuse_impossible(table, local, settings)
    return local


def _under_header(table: RawTable, unreadable: NDArray[np.intp], settings: StationSettings) -> str:
    """What to do if the only unreadable stamps are texts in the first rows, such as units."""
    texts = [str(table.stamps[int(at)]) for at in unreadable]
    first = np.array_equal(unreadable, np.arange(len(unreadable)))
    if not first or len(texts) == len(table.stamps) or any(has_digits(text) for text in texts):
        return ""
    lines = settings.skip_rows_after_header + len(texts)
    return f"if these are lines of units, write skip_rows_after_header = {lines}; if not, "


def _typed(table: RawTable, settings: StationSettings) -> Stamps:
    """Stamps of a file that has a type for them; a zone in the type must be the declared one."""
    zone = table.stamps.type.tz
    if zone is not None:
        hours = 0.0 if zone.upper() in {"UTC", "Z", "GMT"} else _zone_hours(zone)
        if hours != settings.utc_offset_h:
            raise StudyError.of(
                file=table.file,
                key="utc_offset_h",
                met=f"the time column has the zone {zone}, utc_offset_h is "
                f"{settings.utc_offset_h:g}",
                rule="a zone in the file is one fixed offset, the declared one",
                remedy="write the offset of that zone; store the file in UTC if it follows "
                "local clock changes",
            )
    instants = np.asarray(
        table.stamps.cast(pa.timestamp("us", tz=zone)).cast(pa.int64()).fill_null(_NAT)
    )
    shift = round((settings.utc_offset_h if zone is not None else 0.0) * 3_600_000_000)
    instants = np.where(instants == _NAT, _NAT, instants + shift)
    return instants.view("datetime64[us]")


_NAT = np.iinfo(np.int64).min


def _plain_iso(stamps: pa.Array) -> Stamps | None:
    """ISO 8601 stamps without a zone, by far the fastest way; None if any is otherwise."""
    try:
        cast = pc.cast(stamps, pa.timestamp("us"))
    except pa.ArrowInvalid:
        return None
    return np.asarray(cast.cast(pa.int64()).fill_null(_NAT)).view("datetime64[us]")


def _parsed(stamps: pa.Array, time_format: str | None) -> Stamps:
    if time_format is None:
        plain = _plain_iso(stamps)
        if plain is not None:
            return plain
        time_format = "ISO8601"
    text = pd.Series(stamps.to_pandas(), dtype=object)
    parsed = pd.to_datetime(text, format=time_format, errors="coerce")
    if not pd.api.types.is_datetime64_dtype(parsed.dtype):
        return np.full(len(text), _NAT).view("datetime64[us]")
    return parsed.to_numpy().astype("datetime64[us]")


def _zone_hours(text: str) -> float | None:
    """Hours east of UTC of a zone as written behind a stamp; None if it is a zone's name."""
    if text in {"Z", "UTC"}:
        return 0.0
    match = re.fullmatch(r"([+-])(\d{2}):?(\d{2})?", text)
    if match is None:
        return None
    sign, hours, minutes = match.groups()
    return (-1.0 if sign == "-" else 1.0) * (int(hours) + int(minutes or 0) / 60)


def _without_zone(table: RawTable, stamps: pa.Array, settings: StationSettings) -> pa.Array:
    """Stamps with their zone cut off, after checking that it is the declared one everywhere."""
    texts = stamps.to_pylist()
    zones = [match.group(1) if (match := _ZONE.search(text)) else "" for text in texts]
    wrong = [
        at
        for at, zone in enumerate(zones)
        if not zone or _zone_hours(zone) != settings.utc_offset_h
    ]
    if wrong:
        lines = table.line_numbers()
        kinds = ", ".join(sorted({zone or "no zone" for zone in zones}))
        found = [f"{table.unit_of_rows} {lines[at]} '{texts[at]}'" for at in wrong]
        raise StudyError.of(
            file=table.file,
            line=int(lines[wrong[0]]),
            met=f"stamps carry the zones {kinds}, utc_offset_h is {settings.utc_offset_h:g}: "
            f"{listed(found)}",
            rule="a zone behind a stamp is one fixed offset, the declared one",
            remedy="write that offset as utc_offset_h; split the file or store it in UTC if the "
            "zone changes within it",
        )
    cut = [text[: len(text) - len(zone)].rstrip() for text, zone in zip(texts, zones, strict=True)]
    return pa.array(cut, type=pa.string())


def _refuse_impossible(table: RawTable, local: Stamps, settings: StationSettings) -> None:
    # The machine's clock decides about the future only; no result depends on it.
    latest = np.datetime64(dt.datetime.now() + dt.timedelta(days=2), "us")
    earliest = np.datetime64(f"{EARLIEST_YEAR}-01-01", "us")
    wrong = np.flatnonzero((local < earliest) | (local > latest))
    wrong = wrong[_in_period(local[wrong], settings)]
    if len(wrong):
        lines = table.line_numbers()
        found = [f"{table.unit_of_rows} {lines[at]} has {shown_stamp(local[at])}" for at in wrong]
        raise StudyError.of(
            file=table.file,
            line=int(lines[wrong[0]]),
            met=f"{len(wrong)} stamps cannot be: {listed(found)}",
            rule=f"measurements lie between {EARLIEST_YEAR} and today",
            remedy="correct time_format if it swaps parts of the date; write use_from and "
            "use_until to set rows of a clock that was not set aside",
        )


def _in_period(local: Stamps, settings: StationSettings) -> NDArray[np.bool_]:
    inside = np.ones(len(local), dtype=bool)
    if settings.use_from is not None:
        inside &= local >= np.datetime64(settings.use_from, "us")
    if settings.use_until is not None:
        inside &= local < np.datetime64(settings.use_until, "us")
    return inside


def on_the_clock(
    local: Stamps,
    settings: StationSettings,
    place: Callable[[int], str],
    *,
    files: Sequence[tuple[str, int]] = (),
) -> tuple[NDArray[np.intp], list[tuple[int, str]]]:
    """Which rows stand on the station's clock, in which order, and which are set aside.

    Parameters
    ----------
    local : ndarray of datetime64[us]
        Stamps of all files in the order read, on the file's own clock.
    settings : StationSettings
        Interval, period to use, and what to do with unsorted and repeated stamps.
    place : callable
        Gives file and line of a row for messages.
    files : sequence of (str, int)
        Name and number of rows of each file, in the order read; one file if left out.

    Returns
    -------
    kept : ndarray of int
        Rows kept, in the order of time.
    set_aside : list of (int, str)
        Rows left out, each with its reason. Together with `kept` these are all rows.

    Raises
    ------
    StudyError
        If stamps are unsorted or repeated and the study does not say what to do, if the clock
        followed daylight saving, if stamps do not stand on the declared interval, or if a few
        of them lie far from the rest.
    """
    inside = _in_period(local, settings)
    set_aside = [(int(at), "outside use_from to use_until") for at in np.flatnonzero(~inside)]
    kept = np.flatnonzero(inside)
    _refuse_too_few(kept, local, settings)
    seams_matter = settings.daylight_saving_seams == "refuse"
    step, ends = interval_of(settings).to_timedelta64(), settings.stamp == "end"
    parts = file_parts(kept, files or [(settings.name, len(local))])
    if settings.unsorted_stamps == "refuse":
        refuse_overlaps(local[kept], parts, settings, least=LONGEST_SEAM)
    if seams_matter:
        again = [
            (first + at, custom)
            for first, stop in written_runs(local[kept], parts)
            for at, custom in repeated_hours(local[kept[first:stop]], step)
        ]
        _refuse_seams(again, "an hour again", local, kept, settings, place)
    steps = np.diff(local[kept])
    backward = np.flatnonzero(steps < np.timedelta64(0, "us"))
    if len(backward):
        if settings.unsorted_stamps == "refuse":
            refuse_overlaps(local[kept], parts, settings, least=np.timedelta64(0, "us"))
            found = [
                f"{place(int(kept[at + 1]))} has {shown_stamp(local[kept[at + 1]])} after "
                f"{shown_stamp(local[kept[at]])}"
                for at in backward
            ]
            raise StudyError.of(
                met=f"{settings.name}: stamps run backward {len(backward)} times: {listed(found)}",
                rule="stamps rise from row to row, file after file",
                remedy="put files in the order of time; if rows are only out of order, write "
                'unsorted_stamps = "sort"',
            )
        kept = kept[np.argsort(local[kept], kind="stable")]
        steps = np.diff(local[kept])
    repeated = np.flatnonzero(steps == np.timedelta64(0, "us"))
    if len(repeated):
        if settings.repeated_stamps == "refuse":
            found = [
                f"{place(int(kept[at + 1]))} has {shown_stamp(local[kept[at + 1]])} again"
                for at in repeated
            ]
            raise StudyError.of(
                met=f"{settings.name}: {len(repeated)} stamps stand twice: {listed(found)}",
                rule="each interval stands once",
                remedy='write repeated_stamps = "keep_first" to set the later rows aside and '
                "have them listed, after checking that they do not differ",
            )
        set_aside += [(int(kept[at + 1]), "stamp stands twice, first row kept") for at in repeated]
        kept = np.delete(kept, repeated + 1)
        _refuse_too_few(kept, local, settings)
    if seams_matter:
        left_out = skipped_hours(local[kept], step, ends=ends)
        _refuse_seams(left_out, "an hour left out", local, kept, settings, place)
    _refuse_far_blocks(local, kept, settings, place)
    _refuse_off_grid(local, kept, settings, place)
    return kept, set_aside


def _refuse_too_few(kept: NDArray[np.intp], local: Stamps, settings: StationSettings) -> None:
    if len(kept) < 2:
        raise StudyError.of(
            met=f"{settings.name}: {len(kept)} of {len(local)} rows are left to use",
            rule="a record has at least two rows, or its interval cannot be checked",
            remedy="check that files holds the whole record, and use_from and use_until",
        )


def _refuse_seams(
    seams: list[Seam],
    what: str,
    local: Stamps,
    kept: NDArray[np.intp],
    settings: StationSettings,
    place: Callable[[int], str],
) -> None:
    if not seams:
        return
    found = [
        f"{place(int(kept[at]))} has {shown_stamp(local[kept[at]])} ({custom} custom)"
        for at, custom in seams
    ]
    raise StudyError.of(
        met=f"{settings.name}: the stamps have {what} where clocks change: {listed(found)}",
        rule="a record keeps one offset from UTC; with daylight saving nobody can tell which "
        "hour is which",
        remedy="export the file again with a fixed offset; write daylight_saving_seams = "
        '"accept" only if the logger\'s settings show that its clock did not change',
    )


def _refuse_far_blocks(
    local: Stamps,
    kept: NDArray[np.intp],
    settings: StationSettings,
    place: Callable[[int], str],
) -> None:
    """A few rows years away from the rest were stamped by a clock that was not set."""
    times = local[kept]
    gaps = np.flatnonzero(np.diff(times) > np.timedelta64(_FAR_DAYS, "D"))
    for at in gaps:
        before, after = at + 1, len(times) - at - 1
        if min(before, after) > _FAR_SHARE * len(times):
            continue
        few = f"{min(before, after)} rows lie {'before' if before < after else 'after'} a gap"
        raise StudyError.of(
            met=f"{settings.name}: {few} from {shown_stamp(times[at])} ({place(int(kept[at]))}) to "
            f"{shown_stamp(times[at + 1])} ({place(int(kept[at + 1]))})",
            rule="a record has no few rows more than a year from the rest; a logger whose clock "
            "is not set stamps them so",
            remedy=f"write use_from or use_until to leave them out, such as use_from = "
            f"{shown_stamp(times[at + 1])[:10]}",
        )


def _refuse_off_grid(
    local: Stamps,
    kept: NDArray[np.intp],
    settings: StationSettings,
    place: Callable[[int], str],
) -> None:
    times = local[kept].astype(np.int64)
    interval = round(settings.interval_min * _MICROSECONDS_PER_MINUTE)
    steps, counts = np.unique(np.diff(times), return_counts=True)
    common = int(steps[np.argmax(counts)])
    phases, counts = np.unique(times % interval, return_counts=True)
    off = np.flatnonzero(times % interval != phases[np.argmax(counts)])
    if common != interval and (len(off) or common % interval == 0):
        raise StudyError.of(
            key="interval_min",
            met=f"{settings.name}: interval_min is {settings.interval_min:g}, but the commonest "
            f"step between stamps is {common / _MICROSECONDS_PER_MINUTE:g} minutes",
            rule="stamps are one interval apart, save for gaps",
            remedy=f"write interval_min = {common / _MICROSECONDS_PER_MINUTE:g} if that is the "
            "record's interval",
        )
    if len(off):
        found = [f"{place(int(kept[at]))} has {shown_stamp(local[kept[at]])}" for at in off]
        raise StudyError.of(
            met=f"{settings.name}: {len(off)} of {len(times)} stamps lie between the steps of "
            f"{settings.interval_min:g} minutes: {listed(found)}",
            rule="stamps lie whole intervals apart",
            remedy="a logger that was reset by hand leaves such rows: ask for its log; correct "
            "the stamps in a copy of the file, or leave them out with use_from or use_until",
        )


def to_starts(local: Stamps, settings: StationSettings) -> pd.DatetimeIndex:
    """Starts of the intervals in UTC, from stamps on the file's own clock."""
    shift = pd.Timedelta(round(settings.utc_offset_h * 3600), unit="s")
    if settings.stamp == "end":
        shift = shift + interval_of(settings)
    index = pd.DatetimeIndex(local, name="time") - shift
    return index.as_unit("ns").tz_localize("UTC")
