"""Tables that come with types: Parquet, workbook sheets and CF NetCDF.

Here such a file becomes the same raw table as a text file, in its own units and clock. What a type
says is held against what the study declares; nothing is converted here.
"""

from __future__ import annotations

import datetime as dt
import hashlib
import re
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
from numpy.typing import NDArray

from windkit.kernels.units import UNITS
from windkit.study.errors import StudyError
from windkit.study.stations import ChannelSettings, StationSettings
from windkit.study.text_files import (
    RawTable,
    has_digits,
    listed,
    missing_column,
    missing_numbers,
    number_in,
    remedy_for_texts,
)

__all__ = ["file_hash", "read_netcdf", "read_parquet", "read_sheet"]

Values = NDArray[np.float64]

#: Units of time of CF, in seconds.
_CF_SECONDS = {"s": 1, "sec": 1, "second": 1, "min": 60, "minute": 60, "h": 3600, "hr": 3600}
_CF_SECONDS |= {"hour": 3600, "d": 86400, "day": 86400}
_CF_CALENDARS = {"standard", "gregorian", "proleptic_gregorian"}


def file_hash(path: Path) -> str:
    """SHA-256 of a file as sent."""
    with path.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


def read_parquet(path: Path, written: str, settings: StationSettings) -> RawTable:
    """Read the declared columns of a Parquet file.

    Parameters
    ----------
    path, written : Path, str
        The file, and its name for messages.
    settings : StationSettings
        Columns and numbers that mean no value.

    Raises
    ------
    StudyError
        If the file is no Parquet, a column is not there or holds no numbers.
    """
    wanted = [settings.time_column, *settings.columns]
    try:
        names = pq.read_schema(path).names
        for name in wanted:
            if name not in names:
                raise missing_column(written, name, names, None)
        table = pq.read_table(path, columns=wanted)
    except (pa.ArrowException, OSError) as error:
        raise StudyError.of(
            file=written,
            met=f"the file cannot be read as Parquet ({str(error).splitlines()[0]})",
            rule="a file is what its ending says",
            remedy="ask for the file again, or correct its ending",
        ) from error
    stamps = table[settings.time_column].combine_chunks()
    if not (pa.types.is_timestamp(stamps.type) or pa.types.is_string(stamps.type)):
        if not pa.types.is_large_string(stamps.type):
            raise StudyError.of(
                file=written,
                met=f"the column '{settings.time_column}' has the type {stamps.type}",
                rule="stamps are timestamps or texts",
                remedy="store the file again with a timestamp column",
            )
        stamps = stamps.cast(pa.string())
    columns = {}
    for name in wanted[1:]:
        kind = table[name].type
        if not (pa.types.is_integer(kind) or pa.types.is_floating(kind) or pa.types.is_null(kind)):
            raise StudyError.of(
                file=written,
                met=f"the column '{name}' has the type {kind}",
                rule="declared columns hold numbers",
                remedy="store the file again with that column as numbers",
            )
        values = np.array(table[name].cast(pa.float64()).to_numpy(), dtype=np.float64)
        for number in missing_numbers(settings):
            values[values == number] = np.nan
        infinite = np.flatnonzero(np.isinf(values))
        if len(infinite):
            raise StudyError.of(
                file=written,
                met=f"'{name}' is infinite in {len(infinite)} rows, first in row {infinite[0] + 1}",
                rule="values are finite numbers or missing",
                remedy="ask for the file again",
            )
        columns[name] = values
    rows = np.arange(1, len(table) + 1, dtype=np.int64)
    return RawTable(written, file_hash(path), stamps, columns, lambda: rows, unit_of_rows="row")


def _finite(values: Values, written: str, name: str) -> Values:
    infinite = np.flatnonzero(np.isinf(values))
    if len(infinite):
        raise StudyError.of(
            file=written,
            met=f"'{name}' is infinite in {len(infinite)} rows, first in row {infinite[0] + 1}",
            rule="values are finite numbers or missing",
            remedy="ask for the file again",
        )
    return values


def read_sheet(path: Path, written: str, settings: StationSettings) -> RawTable:
    """Read the declared columns of a sheet of a workbook.

    Parameters
    ----------
    path, written : Path, str
        The file, and its name for messages.
    settings : StationSettings
        Sheet, header row, columns, and texts that mean no value.

    Raises
    ------
    StudyError
        If the file is no workbook, the sheet or a column is not there, or a cell of a number
        column holds something else.
    """
    import openpyxl

    try:
        book = openpyxl.load_workbook(path, read_only=True, data_only=True)
    except Exception as error:  # openpyxl lets errors of zip and XML through
        raise StudyError.of(
            file=written,
            met=f"the file cannot be read as a workbook ({error})",
            rule="a file is what its ending says",
            remedy="save it again as .xlsx, or as CSV",
        ) from error
    try:
        if settings.sheet is not None and settings.sheet not in book.sheetnames:
            raise StudyError.of(
                file=written,
                key="sheet",
                met=f"there is no sheet '{settings.sheet}'; the sheets are "
                + ", ".join(f"'{name}'" for name in book.sheetnames),
                rule="the sheet is one of the workbook's",
                remedy="correct sheet",
            )
        sheet = book[settings.sheet or book.sheetnames[0]]
        rows = [list(row) for row in sheet.iter_rows(values_only=True)]
    finally:
        book.close()
    head = settings.skip_rows
    if len(rows) <= head:
        raise StudyError.of(
            file=written,
            met=f"the sheet has {len(rows)} rows",
            rule=f"the header stands after skip_rows = {head} rows",
            remedy="correct skip_rows or sheet",
        )
    names = ["" if cell is None else str(cell).strip() for cell in rows[head]]
    wanted = [settings.time_column, *settings.columns]
    for name in wanted:
        if names.count(name) != 1:
            raise missing_column(written, name, [n for n in names if n], head + 1)
    at = [names.index(name) for name in wanted]
    first = head + 1 + settings.skip_rows_after_header
    body = [
        (number, [row[place] if place < len(row) else None for place in at])
        for number, row in enumerate(rows[first:], start=first + 1)
        if any(cell is not None for cell in row)
    ]
    columns: dict[str, Values] = {}
    faults: list[tuple[int, str, str]] = []
    for place, name in enumerate(wanted[1:], start=1):
        values = np.full(len(body), np.nan)
        for row, (number, cells) in enumerate(body):
            value = _cell(cells[place], settings)
            if value is None:
                faults.append((number, name, str(cells[place])))
            else:
                values[row] = value
        for code in missing_numbers(settings):
            values[values == code] = np.nan
        columns[name] = values
    if faults:
        faults.sort()
        found = [f"row {number} has '{text}' in '{name}'" for number, name, text in faults]
        sound = (cell for _, cells in body for cell in cells[1:] if isinstance(cell, str))
        data = next((number for number, cells in body if has_digits(str(cells[0]))), first + 1)
        raise StudyError.of(
            file=written,
            met=f"{len(faults)} cells are not numbers: {listed(found)}",
            rule="declared columns hold numbers, or a text that is declared to mean no value",
            remedy=remedy_for_texts(
                [text for _, _, text in faults],
                sound,
                settings,
                under=data - first - 1 if faults[-1][0] < data else 0,
            ),
        )
    lines = np.array([number for number, _ in body], dtype=np.int64)
    stamps = _sheet_stamps([cells[0] for _, cells in body], lines, written)
    return RawTable(written, file_hash(path), stamps, columns, lambda: lines, unit_of_rows="row")


def _cell(cell: Any, settings: StationSettings) -> float | None:
    """A cell's number, NaN for none, None if it is neither."""
    if cell is None:
        return np.nan
    if isinstance(cell, bool):
        return None
    if isinstance(cell, int | float):
        return float(cell)
    text = str(cell).strip()
    if text == "" or text in settings.missing:
        return np.nan
    return number_in(text, settings.decimal)


def _sheet_stamps(cells: Sequence[Any], lines: NDArray[np.int64], written: str) -> pa.Array:
    dates = [isinstance(cell, dt.datetime) for cell in cells]
    if all(dates):
        # Workbooks store days as floating numbers: seconds are what they keep.
        rounded = [(cell + dt.timedelta(milliseconds=500)).replace(microsecond=0) for cell in cells]
        return pa.array(rounded, type=pa.timestamp("us"))
    if not any(dates):
        return pa.array(["" if cell is None else str(cell) for cell in cells], type=pa.string())
    odd = [at for at, is_date in enumerate(dates) if not is_date]
    found = [f"row {lines[at]} has '{cells[at]}'" for at in odd]
    raise StudyError.of(
        file=written,
        met=f"{len(odd)} stamps are texts, the others dates: {listed(found)}",
        rule="a column of stamps is of one type; a workbook guesses day and month while it is "
        "filled",
        remedy="export the record again as CSV",
    )


def read_netcdf(path: Path, written: str, settings: StationSettings) -> RawTable:
    """Read the declared variables of a CF NetCDF file that holds one place.

    Parameters
    ----------
    path, written : Path, str
        The file, and its name for messages.
    settings : StationSettings
        Variables by name, as columns.

    Raises
    ------
    StudyError
        If a variable is not there, is not one value a time, or its standard name or unit is not
        the declared one; or if the file is NetCDF 4 and its reader is not installed.

    Notes
    -----
    NetCDF 3 is read by SciPy. NetCDF 4 needs the optional package h5netcdf.

    References
    ----------
    .. [1] CF conventions 1.11: standard names, packed data, missing values, time coordinate.
    """
    variables, close = _open_netcdf(path, written)
    try:
        wanted = [settings.time_column, *settings.columns]
        for name in wanted:
            if name not in variables:
                raise missing_column(written, name, sorted(variables), None)
        stamps = _cf_time(variables[settings.time_column], written, settings)
        channels = {name: c for c in settings.channels for name in c.columns}
        columns = {}
        notes = []
        for name, channel in channels.items():
            variable = variables[name]
            _refuse_other_meaning(variable, written, name, channel)
            values = _unpacked_values(variable)
            if values.shape != (len(stamps),):
                raise StudyError.of(
                    file=written,
                    met=f"'{name}' has the shape {np.shape(variable[...])} for {len(stamps)} times",
                    rule="a station has one value a time",
                    remedy="cut one grid point and one height out of the file",
                )
            for code in missing_numbers(settings):
                values[values == code] = np.nan
            columns[name] = _finite(values, written, name)
            method = _text(variable, "cell_methods")
            if method:
                notes.append(f"{written}: {name} has cell_methods '{method}'")
    finally:
        close()
    rows = np.arange(1, len(stamps) + 1, dtype=np.int64)
    return RawTable(
        written,
        file_hash(path),
        stamps,
        columns,
        lambda: rows,
        unit_of_rows="row",
        notes=tuple(notes),
    )


def _open_netcdf(path: Path, written: str) -> tuple[dict[str, Any], Callable[[], None]]:
    with path.open("rb") as stream:
        magic = stream.read(4)
    try:
        if magic[:3] == b"CDF":
            from scipy.io import netcdf_file

            old = netcdf_file(path, "r", mmap=False)
            return dict(old.variables), old.close
        if magic == b"\x89HDF":
            import h5netcdf  # optional package

            new = h5netcdf.File(path, "r")
            return dict(new.variables), new.close
    except ImportError as error:
        raise StudyError.of(
            file=written,
            met="the file is NetCDF 4, and the package h5netcdf is not installed",
            rule="NetCDF 4 needs that optional package",
            remedy="install it with the extra netcdf, or convert the file to NetCDF 3 or CSV",
        ) from error
    except Exception as error:  # damaged files raise whatever their reader does
        raise StudyError.of(
            file=written,
            met=f"the file cannot be read as NetCDF ({error})",
            rule="a file is what its ending says",
            remedy="ask for the file again",
        ) from error
    raise StudyError.of(
        file=written,
        met=f"the file begins with {magic!r}",
        rule="NetCDF begins with CDF or with the mark of HDF5",
        remedy="correct its ending, or ask for the file again",
    )


def _text(variable: Any, name: str) -> str:
    attributes = getattr(variable, "attrs", None)
    value = attributes.get(name, "") if attributes is not None else getattr(variable, name, "")
    return value.decode("utf-8", "replace") if isinstance(value, bytes) else str(value)


def _attribute(variable: Any, name: str) -> float | None:
    attributes = getattr(variable, "attrs", None)
    value = attributes.get(name) if attributes is not None else getattr(variable, name, None)
    return None if value is None else float(np.ravel(value)[0])


def _unpacked_values(variable: Any) -> Values:
    """Values with fill values missing and the packing undone; single dimensions dropped."""
    stored = np.asarray(variable[...])
    values = np.squeeze(stored).astype(np.float64)
    for name in ("_FillValue", "missing_value"):
        code = _attribute(variable, name)
        if code is not None:
            values[np.squeeze(stored) == np.asarray(code, dtype=stored.dtype)] = np.nan
    scale, offset = _attribute(variable, "scale_factor"), _attribute(variable, "add_offset")
    return np.atleast_1d(values * (1.0 if scale is None else scale) + (offset or 0.0))


def _refuse_other_meaning(variable: Any, written: str, name: str, channel: ChannelSettings) -> None:
    meant = channel.quantity
    if channel.has_components:
        meant = "eastward_wind" if name == channel.eastward_column else "northward_wind"  # type: ignore[assignment]
    standard = _text(variable, "standard_name")
    alike = {meant, "surface_air_pressure" if meant == "air_pressure" else meant}
    if standard and standard not in alike:
        raise StudyError.of(
            file=written,
            met=f"'{name}' has the standard name {standard}, the channel says {meant}",
            rule="the file's standard name is the declared quantity",
            remedy="correct quantity, or name the right variable",
        )
    unit = _text(variable, "units").replace("**", "")
    table = UNITS[meant]
    if unit and not (unit in table and table[unit] == table[channel.unit]):
        raise StudyError.of(
            file=written,
            met=f"'{name}' has the unit '{unit}', the channel says '{channel.unit}'",
            rule="the file's unit is the declared one",
            remedy=f'write unit = "{unit}"' if unit in table else "convert the variable first",
        )


def _cf_time(variable: Any, written: str, settings: StationSettings) -> pa.Array:
    """Instants in UTC from a CF time coordinate."""
    unit = _text(variable, "units")
    match = re.fullmatch(r"(\w+?)s? since (\d{1,4}-\d{1,2}-\d{1,2}.*)", unit.strip())
    calendar = _text(variable, "calendar") or "standard"
    if match is None or match.group(1) not in _CF_SECONDS or calendar not in _CF_CALENDARS:
        raise StudyError.of(
            file=written,
            key="time_column",
            met=f"'{settings.time_column}' has the unit '{unit}' and the calendar '{calendar}'",
            rule="a CF time counts seconds, minutes, hours or days since a date of the common "
            "calendar",
            remedy="name the time coordinate, or convert the file",
        )
    text = match.group(2).strip().removesuffix("UTC").removesuffix("Z").strip()
    text = re.sub(r"\s*[+-]00?:?00?$", "", text)
    since = np.datetime64(text.replace(" ", "T"), "us")
    counted = _unpacked_values(variable) * (_CF_SECONDS[match.group(1)] * 1_000_000)
    instants = since.astype(np.int64) + np.round(counted).astype(np.int64)
    return pa.array(instants, type=pa.int64()).cast(pa.timestamp("us", tz="UTC"))
