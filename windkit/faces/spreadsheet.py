"""The tables of a study as one spreadsheet.

A first sheet lists the results with unit and basis and every sheet that follows; then one sheet
a table. The same tables give the same bytes. Text is text: what begins like a formula is never
one. Not here: which tables a study hands over, and their numbers.
"""

from __future__ import annotations

import datetime as dt
import io
import math
import os
import re
import zipfile
from collections.abc import Iterable, Mapping, Sequence
from numbers import Integral, Real
from pathlib import Path
from typing import TYPE_CHECKING, Any

from windkit.faces.look import INK, MAIN, MUTED
from windkit.faces.tables import DECIMALS_BY_UNIT, unit_text

if TYPE_CHECKING:
    import pandas as pd
    from openpyxl.worksheet.worksheet import Worksheet

__all__ = ["CONTENTS", "write_tables"]

#: Name of the first sheet.
CONTENTS = "Contents"

#: Bounds of the file format (ECMA-376; common practice): sheet name, rows, text of a cell.
LONGEST_NAME = 31
MOST_ROWS = 1_048_576
LONGEST_TEXT = 32_767

#: What a program could take for the beginning of a formula.
_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")
_NOT_IN_NAME = re.compile(r"[\[\]:*?/\\]")
#: The time that stands in the file instead of the clock.
_NO_TIME = dt.datetime(2000, 1, 1)
_ZIP_TIME = (1980, 1, 1, 0, 0, 0)

#: Endings of keys that say the unit of a plain result.
_UNIT_BY_ENDING = {
    "_mwh_per_year": "MWh/year",
    "_mwh": "MWh",
    "_kg_m3": "kg/m3",
    "_w_m2": "W/m2",
    "_m_s": "m/s",
    "_deg": "deg",
    "_kw": "kW",
    "_pa": "Pa",
    "_k": "K",
    "_h": "h",
    "_m": "m",
}


def write_tables(
    path: Path | str,
    tables: Mapping[str, pd.DataFrame],
    results: Mapping[str, Any] | Sequence[Any] = (),
    *,
    title: str = "",
) -> Path:
    """Write tables and results as a spreadsheet.

    Parameters
    ----------
    path : Path or str
        File to write; an older one is replaced only by a whole new one.
    tables : mapping of name to DataFrame
        One sheet each. ``frame.attrs`` may hold ``caption``, ``basis`` and ``units`` (a mapping
        of column to unit). An index that only counts rows is left out. Times with a zone are
        written in UTC, and the header says so.
    results : mapping, or sequence of objects
        Results for the first sheet: either objects with `label`, `value`, `unit` and `basis`
        (and `key`, if they have one), or a mapping as in ``results.json``, nested or with dotted
        keys, whose keys end in their unit. Two numbers are an interval.
    title : str
        Title of the study, above the first sheet.

    Returns
    -------
    Path
        The file.

    Raises
    ------
    ValueError
        If a table has more rows than a sheet, or a text is longer than a cell or holds control
        characters. Nothing is written then.
    """
    from openpyxl import Workbook

    names = _sheet_names(tables)
    book = Workbook()
    front = book.active
    assert front is not None
    front.title = CONTENTS
    _write_contents(front, tables, names, results, title)
    for name, frame in tables.items():
        _write_table(book.create_sheet(names[name]), name, frame)
    book.properties.creator = "Site study"
    book.properties.title = title
    book.properties.created = book.properties.modified = _NO_TIME
    held = io.BytesIO()
    book.save(held)
    return _replace(Path(path), _without_clock(held.getvalue()))


def _write_contents(
    sheet: Worksheet,
    tables: Mapping[str, pd.DataFrame],
    names: Mapping[str, str],
    results: Mapping[str, Any] | Sequence[Any],
    title: str,
) -> None:
    row = 1
    if title:
        _put(sheet.cell(row, 1), title, size=14, bold=True)
        row += 2
    lines = list(_result_lines(results))
    if lines:
        row = _heads(sheet, row, ["Result", "Value", "to", "Unit", "Basis"])
        for label, low, high, unit, basis in lines:
            shown = (label, low, high, unit_text(unit), basis)
            for column, value in enumerate(shown, start=1):
                cell = sheet.cell(row, column)
                _put(cell, value, colour=MUTED if column == 5 else INK)
                if column in (2, 3):
                    cell.number_format = _number_format(value, unit)
            row += 1
        row += 1
    row = _heads(sheet, row, ["Sheet", "Rows", "Columns", "Content", "Basis"])
    for name, frame in tables.items():
        attributes = frame.attrs
        entry = (
            names[name],
            len(frame),
            frame.shape[1],
            attributes.get("caption", name),
            attributes.get("basis", ""),
        )
        for column, value in enumerate(entry, start=1):
            _put(sheet.cell(row, column), value, colour=MUTED if column == 5 else INK)
        link = sheet.cell(row, 1)
        quoted = names[name].replace("'", "''")
        link.hyperlink = f"#'{quoted}'!A1"
        _put(link, names[name], colour=MAIN)
        row += 1
    _widths(sheet, [34, 16, 16, 40, 60])


def _write_table(sheet: Worksheet, name: str, frame: pd.DataFrame) -> None:
    import pandas as pd

    units = frame.attrs.get("units", {})
    whole = frame
    if not (isinstance(frame.index, pd.RangeIndex) and frame.index.name is None):
        labels = [str(label) if label is not None else "" for label in frame.index.names]
        whole = frame.reset_index(names=labels)
    if len(whole) + 1 > MOST_ROWS:
        raise ValueError(
            f"table '{name}' has {len(whole)} rows, a sheet holds {MOST_ROWS - 1}; hand it over as "
            f"Parquet or by the hour instead"
        )
    heads, columns, formats = [], [], []
    for position, column in enumerate(whole.columns):
        values = whole.iloc[:, position]
        unit = str(units.get(column, ""))
        heads.append(_head(column, unit, values))
        columns.append([_plain(value) for value in values])
        formats.append(_column_format(columns[-1], unit))
    _heads(sheet, 1, heads)
    for row, line in enumerate(zip(*columns, strict=True), start=2):
        for place, value in enumerate(line):
            if value is None:
                continue
            cell = sheet.cell(row, place + 1)
            try:
                _put(cell, value)
            except ValueError as error:
                raise ValueError(f"table '{name}', row {row}, {heads[place]}: {error}") from error
            if not isinstance(value, str | bool):
                cell.number_format = formats[place]
    sheet.freeze_panes = "A2"
    if whole.shape[1]:
        sheet.auto_filter.ref = sheet.dimensions
    _widths(sheet, [_width(head, values) for head, values in zip(heads, columns, strict=True)])


def _result_lines(
    results: Mapping[str, Any] | Sequence[Any],
) -> Iterable[tuple[str, Any, Any, str, str]]:
    """Label, value, upper end of an interval, unit and basis of each result."""
    if isinstance(results, Mapping):
        yield from _mapped_lines(results, "")
        return
    for row in results:
        low, high = _ends(row.value)
        yield str(row.label), low, high, str(row.unit), str(row.basis)


def _mapped_lines(
    results: Mapping[str, Any], prefix: str
) -> Iterable[tuple[str, Any, Any, str, str]]:
    for key, value in results.items():
        name = f"{prefix}{key}"
        if isinstance(value, Mapping) and "value" in value:
            low, high = _ends(value["value"])
            yield name, low, high, str(value.get("unit", "")), str(value.get("basis", ""))
        elif isinstance(value, Mapping):
            yield from _mapped_lines(value, f"{name}.")
        else:
            low, high = _ends(value)
            yield name, low, high, _unit_of(name), ""


def _unit_of(key: str) -> str:
    found = (unit for ending, unit in _UNIT_BY_ENDING.items() if key.lower().endswith(ending))
    # The shape k of a Weibull distribution is no temperature.
    return "1" if key.endswith("weibull_k") else next(found, "")


def _ends(value: Any) -> tuple[Any, Any]:
    if isinstance(value, list | tuple):
        if len(value) == 2:
            return _plain(value[0]), _plain(value[1])
        return ", ".join(str(part) for part in value), None
    return _plain(value), None


def _sheet_names(tables: Mapping[str, Any]) -> dict[str, str]:
    """Names a spreadsheet allows, none of them twice."""
    taken = {CONTENTS.lower(), "history"}  # the second is kept for the program itself
    names = {}
    for table in tables:
        clean = _NOT_IN_NAME.sub(" ", str(table)).strip().strip("'") or "Table"
        name, count = clean[:LONGEST_NAME].rstrip(), 1
        while name.lower() in taken:
            count += 1
            name = f"{clean[: LONGEST_NAME - len(str(count)) - 1].rstrip()} {count}"
        taken.add(name.lower())
        names[table] = name
    return names


def _head(column: Any, unit: str, values: pd.Series[Any]) -> str:
    parts = column if isinstance(column, tuple) else (column,)
    name = " ".join(str(part) for part in parts if str(part))
    if getattr(values.dtype, "tz", None) is not None:
        return f"{name} (UTC)"
    return f"{name} [{unit_text(unit)}]" if unit and unit != "1" else name


def _plain(value: Any) -> Any:
    """A value as a cell takes it; None leaves the cell empty."""
    import pandas as pd

    if value is None or value is pd.NaT or value is pd.NA:
        return None
    if isinstance(value, bool) or type(value).__name__ in ("bool_", "bool"):
        return bool(value)
    if isinstance(value, Integral):
        return int(value)
    if isinstance(value, Real):
        number = float(value)
        if math.isnan(number):
            return None
        return number if math.isfinite(number) else ("infinite" if number > 0 else "-infinite")
    if isinstance(value, dt.datetime):
        zoned = value.astimezone(dt.UTC) if value.tzinfo is not None else value
        return pd.Timestamp(zoned).tz_localize(None).to_pydatetime(warn=False)
    if isinstance(value, dt.date | dt.timedelta):
        return value
    if isinstance(value, list | tuple):
        return ", ".join(str(part) for part in value)
    return str(value)


def _put(
    cell: Any,
    value: Any,
    *,
    size: float = 10,
    bold: bool = False,
    colour: str = INK,
) -> None:
    from openpyxl.cell.cell import ILLEGAL_CHARACTERS_RE
    from openpyxl.styles import Alignment, Font

    if isinstance(value, str):
        if len(value) > LONGEST_TEXT:
            raise ValueError(f"the text has {len(value)} characters, a cell holds {LONGEST_TEXT}")
        if ILLEGAL_CHARACTERS_RE.search(value):
            raise ValueError(f"the text {value[:40]!r} holds control characters; take them out")
    cell.value = value
    if isinstance(value, str):
        cell.data_type = "s"
        if value.startswith(_FORMULA_STARTS):
            # Keeps it a text when somebody edits the cell.
            cell.quotePrefix = True
    if size != 10 or bold or colour != INK:
        cell.font = Font(name="Calibri", size=size, bold=bold, color=colour.lstrip("#"))
    if isinstance(value, str) and len(value) > 60:
        cell.alignment = Alignment(wrap_text=True, vertical="top")


def _heads(sheet: Worksheet, row: int, heads: Sequence[str]) -> int:
    from openpyxl.styles import Alignment, Border, PatternFill, Side

    for column, head in enumerate(heads, start=1):
        cell = sheet.cell(row, column)
        _put(cell, head, bold=True, colour="#FFFFFF")
        cell.fill = PatternFill("solid", fgColor=MAIN.lstrip("#"))
        cell.alignment = Alignment(wrap_text=True, vertical="center")
        cell.border = Border(bottom=Side(style="thin", color=INK.lstrip("#")))
    return row + 1


def _number_format(value: Any, unit: str) -> str:
    if isinstance(value, str | bool) or value is None:
        return "General"
    if isinstance(value, dt.datetime):
        return "yyyy-mm-dd hh:mm"
    if isinstance(value, dt.date):
        return "yyyy-mm-dd"
    if isinstance(value, dt.timedelta):
        return "[h]:mm"
    if isinstance(value, int) or DECIMALS_BY_UNIT.get(unit) == 0:
        # Years and counts alike: a group separator only where it helps.
        return "#,##0" if abs(value) >= 10_000 else "0"
    decimals = DECIMALS_BY_UNIT.get(unit)
    if decimals is None:
        size = abs(value)
        decimals = 0 if size >= 10_000 else 1 if size >= 1000 else 2 if size >= 10 else 4
    return f"#,##0.{'0' * decimals}" if decimals else "#,##0"


def _column_format(values: Sequence[Any], unit: str) -> str:
    there = [value for value in values if value is not None and not isinstance(value, str | bool)]
    if not there:
        return "General"
    if any(isinstance(value, dt.date | dt.timedelta) for value in there):
        return _number_format(there[0], unit)
    largest = max(there, key=abs)
    if any(isinstance(value, float) for value in there):
        largest = float(largest)
    return _number_format(largest, unit)


def _width(head: str, values: Sequence[Any]) -> float:
    longest = max((len(value) for value in values if isinstance(value, str)), default=0)
    times = any(isinstance(value, dt.date) for value in values)
    return float(min(max(10, len(head) + 3, min(longest, 58) + 2, 17 if times else 0), 60))


def _widths(sheet: Worksheet, widths: Sequence[float]) -> None:
    from openpyxl.utils import get_column_letter

    for column, width in enumerate(widths, start=1):
        sheet.column_dimensions[get_column_letter(column)].width = width


def _without_clock(content: bytes) -> bytes:
    """The same file with the clock taken out of its parts and of their listing."""
    held = io.BytesIO()
    time = _NO_TIME.strftime("%Y-%m-%dT%H:%M:%SZ")
    with zipfile.ZipFile(io.BytesIO(content)) as source, zipfile.ZipFile(held, "w") as target:
        for name in sorted(
            source.namelist(), key=lambda name: (name != "[Content_Types].xml", name)
        ):
            part = source.read(name)
            if name == "docProps/core.xml":
                text = part.decode("utf-8")
                part = re.sub(
                    r"(<dcterms:(?:created|modified)[^>]*>)[^<]*", rf"\g<1>{time}", text
                ).encode("utf-8")
            entry = zipfile.ZipInfo(name, date_time=_ZIP_TIME)
            entry.compress_type = zipfile.ZIP_DEFLATED
            entry.create_system = 0  # the same on every machine
            entry.external_attr = 0
            target.writestr(entry, part)
    return held.getvalue()


def _replace(path: Path, content: bytes) -> Path:
    """Write a file whole or not at all."""
    part = path.with_name(path.name + ".part")
    try:
        part.write_bytes(content)
        os.replace(part, path)
    finally:
        part.unlink(missing_ok=True)
    return path
