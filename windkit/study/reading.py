"""From a station's files to columns in the library's units on starts of intervals in UTC.

Here a station's declared files are read, each column is converted once, and every row is kept
or listed as set aside. Files are opened in `text_files` and `table_files`, the clock is in
`stamps`. Nothing
is judged or masked: that is for the checks and the ledger.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.circular import wind_from_components
from windkit.kernels.units import to_si
from windkit.study.errors import StudyError
from windkit.study.paths import file_in_study
from windkit.study.stamps import interval_of, on_the_clock, read_stamps, to_starts
from windkit.study.stations import ChannelSettings, SensorPeriod, StationSettings
from windkit.study.table_files import read_netcdf, read_parquet, read_sheet
from windkit.study.text_files import RawTable, listed, read_text

__all__ = ["Reading", "read_station"]

#: Recorded bearings outside this range are no bearings; they are left for the range check to
#: list instead of being wrapped into a plausible one [deg].
_BEARINGS = (-180.0, 360.0)


@dataclass(frozen=True)
class Reading:
    """A station's record as read: converted, not judged.

    Attributes
    ----------
    settings : StationSettings
        What the study says about the station.
    frame : DataFrame
        Channels as float64 in the library's units, on a UTC index ``time`` of interval starts;
        only intervals that stand in the files.
    rows_read, rows_kept : int
        Rows of the files, and rows of `frame`; the difference is `set_aside`.
    set_aside : DataFrame
        Rows left out: ``file``, ``line``, ``stamp`` (as written), ``reason``.
    sha256 : dict of str to str
        Hash of each file as sent, by its path in the settings.
    expected_count : int
        Intervals from the first to the last, whether or not they stand in the files.
    notes : tuple of str
        What a reader should know about the files and changes no value.
    """

    settings: StationSettings
    frame: pd.DataFrame
    rows_read: int
    rows_kept: int
    set_aside: pd.DataFrame
    sha256: dict[str, str]
    expected_count: int
    notes: tuple[str, ...] = ()

    @property
    def interval(self) -> pd.Timedelta:
        """Length of the averaging interval."""
        return interval_of(self.settings)

    @property
    def absent(self) -> pd.DataFrame:
        """Intervals that stand in no file, as spans ``from``, ``to`` (the end), ``count``."""
        starts = self.frame.index.to_series()
        steps = starts.diff()
        after = starts[steps > self.interval]
        before = starts.shift(1)[steps > self.interval] + self.interval
        count = ((after - before) / self.interval).round().astype(int)
        columns = {"from": before, "to": after, "count": count}
        return pd.DataFrame(columns).reset_index(drop=True)


def read_station(settings: StationSettings, folder: Path) -> Reading:
    """Read a station's files, convert them once and account for every row.

    Parameters
    ----------
    settings : StationSettings
        The station as the study declares it.
    folder : Path
        The study folder; the files lie inside it.

    Returns
    -------
    Reading
        The record, with ``rows_read == rows_kept + len(set_aside)``.

    Raises
    ------
    StudyError
        If a file, a column, a value or a stamp does not fit what is declared.
    """
    paths = {written: file_in_study(folder, written, key="files") for written in settings.files}
    tables = [_read_table(path, written, settings) for written, path in paths.items()]
    stamps = [read_stamps(table, settings) for table in tables]
    local = np.concatenate(stamps)
    starts = np.cumsum([0, *(len(each) for each in stamps)])

    def table_of(row: int) -> tuple[RawTable, int]:
        at = int(np.searchsorted(starts, row, side="right")) - 1
        return tables[at], row - int(starts[at])

    def place(row: int) -> str:
        table, at = table_of(row)
        return f"{table.file} {table.unit_of_rows} {table.line_numbers()[at]}"

    files = [(table.file, len(each)) for table, each in zip(tables, stamps, strict=True)]
    kept, aside = on_the_clock(local, settings, place, files=files)
    in_order = len(kept) == len(local) and bool(np.all(np.diff(kept) == 1))
    frame = pd.DataFrame(
        {
            channel.name: _converted(
                [_joined(tables, name, None if in_order else kept) for name in channel.columns],
                local[kept],
                channel,
                settings,
            )
            for channel in settings.channels
        },
        index=to_starts(local[kept], settings),
        copy=False,
    )
    _refuse_empty_channels(frame, settings)
    listing = [(table.file, line, "", reason) for table in tables for line, reason in table.broken]
    for row, reason in aside:
        table, at = table_of(row)
        line = int(table.line_numbers()[at])
        listing.append((table.file, line, str(table.stamps[at]), reason))
    set_aside = pd.DataFrame(listing, columns=["file", "line", "stamp", "reason"])
    return Reading(
        settings=settings,
        frame=frame,
        rows_read=len(local) + sum(len(table.broken) for table in tables),
        rows_kept=len(frame),
        set_aside=set_aside,
        sha256={table.file: table.sha256 for table in tables},
        expected_count=int((frame.index[-1] - frame.index[0]) / interval_of(settings)) + 1,
        notes=tuple(note for table in tables for note in table.notes),
    )


def _read_table(path: Path, written: str, settings: StationSettings) -> RawTable:
    if path.stat().st_size == 0:
        raise StudyError.of(
            file=written,
            met="the file is empty",
            rule="a file has a header line and rows",
            remedy="ask for the file again, or take it out of files",
        )
    match path.suffix.lower():
        case ".parquet" | ".pq":
            return read_parquet(path, written, settings)
        case ".xlsx" | ".xlsm":
            return read_sheet(path, written, settings)
        case ".nc" | ".nc4" | ".cdf":
            return read_netcdf(path, written, settings)
    return read_text(path, written, settings)


def _joined(
    tables: list[RawTable], column: str, kept: NDArray[np.intp] | None
) -> NDArray[np.float64]:
    parts = [table.columns[column] for table in tables]
    values = parts[0] if len(parts) == 1 else np.concatenate(parts)
    return values if kept is None else values[kept]


def _converted(
    columns: list[NDArray[np.float64]],
    local: NDArray[np.datetime64],
    channel: ChannelSettings,
    settings: StationSettings,
) -> NDArray[np.float64]:
    """Values in the library's unit: calibration first, in the column's unit, then the unit."""
    if channel.has_components:
        east, north = (to_si(each, channel.unit, "eastward_wind") for each in columns)
        speed, direction = wind_from_components(east, north)
        return _true_bearing(direction, settings) if channel.is_direction else speed
    values = _recalibrated(columns[0], local, channel, settings)
    zero, one = to_si([0.0, 1.0], channel.unit, channel.quantity)
    if channel.statistic == "sd":
        return values * (one - zero)  # a spread has no offset
    if (zero, one) != (0.0, 1.0):
        values = to_si(values, channel.unit, channel.quantity)
    if not channel.is_direction:
        return values
    return _true_bearing(values, settings)


def _true_bearing(values: NDArray[np.float64], settings: StationSettings) -> NDArray[np.float64]:
    with np.errstate(invalid="ignore"):
        bearing = (values >= _BEARINGS[0]) & (values <= _BEARINGS[1])
    declination = settings.declination_deg or 0.0
    wrapped = (values + declination) % 360.0
    wrapped[wrapped >= 360.0] = 0.0  # -1e-15 % 360 rounds to 360
    return np.where(bearing, wrapped, values)


def _recalibrated(
    recorded: NDArray[np.float64],
    local: NDArray[np.datetime64],
    channel: ChannelSettings,
    settings: StationSettings,
) -> NDArray[np.float64]:
    if not channel.sensors:
        return _with_certificate(recorded, channel, channel.statistic == "sd")
    begins = [np.datetime64(sensor.date_from, "us") for sensor in channel.sensors]
    if begins[0] > local[0]:
        raise StudyError.of(
            key=f"channels '{channel.name}' sensors",
            met=f"{settings.name}: the first sensor hangs from {begins[0]}, the record begins "
            f"at {local[0]}",
            rule="a sensor is named for every row",
            remedy="add the sensor that hung before, or correct date_from (on the file's clock)",
        )
    edges = [*np.searchsorted(local, np.asarray(begins)), len(local)]
    edges[0] = 0
    parts = [
        _with_certificate(recorded[start:stop], sensor, channel.statistic == "sd")
        for sensor, start, stop in zip(channel.sensors, edges, edges[1:], strict=False)
    ]
    return np.concatenate(parts)


def _with_certificate(
    recorded: NDArray[np.float64], calibration: ChannelSettings | SensorPeriod, is_spread: bool
) -> NDArray[np.float64]:
    """Undo what the logger applied and apply the certificate, if both are given."""
    if (
        calibration.applied_slope is None
        or calibration.applied_offset is None
        or calibration.certificate_slope is None
        or calibration.certificate_offset is None
    ):
        return recorded
    if is_spread:
        return recorded / calibration.applied_slope * calibration.certificate_slope
    raw = (recorded - calibration.applied_offset) / calibration.applied_slope
    return raw * calibration.certificate_slope + calibration.certificate_offset


def _refuse_empty_channels(frame: pd.DataFrame, settings: StationSettings) -> None:
    empty = [
        channel.name
        for channel in settings.channels
        if np.isnan(frame[channel.name].iloc[0]) and frame[channel.name].isna().all()
    ]
    if empty:
        columns = [f"'{' and '.join(settings.channel(name).columns)}' ({name})" for name in empty]
        raise StudyError.of(
            file=", ".join(settings.files),
            met=f"there is not one value in {listed(columns)}",
            rule="a declared channel has values",
            remedy="take it out of channels; check missing and the sensor's wiring if it should "
            "have some",
        )
