"""The tables of a study as one spreadsheet.

A first sheet lists every sheet that follows, a second the results with unit and basis; then one
sheet a table. The same tables give the same bytes. Text is text: what begins like a formula is
never one. Not here: which tables a study hands over, and how a value becomes a cell
(`windkit.faces.cells`).
"""

from __future__ import annotations

import datetime as dt
import io
import os
import re
import zipfile
from collections.abc import Iterable, Mapping, Sequence
from numbers import Real
from pathlib import Path
from typing import TYPE_CHECKING, Any

from windkit.faces.cells import cell_value, column_format, number_format, typed_values
from windkit.faces.look import INK, MAIN, MUTED
from windkit.faces.wording import as_printed, column_heading, split_unit, unit_text

if TYPE_CHECKING:
    import pandas as pd
    from openpyxl.worksheet.worksheet import Worksheet

__all__ = ["CONTENTS", "RESULTS", "write_tables"]

#: Names of the first two sheets.
CONTENTS, RESULTS = "Contents", "Results"

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

#: Ground of what must not be overlooked.
_STANDS_OUT = "#fbe9d7"


def write_tables(
    path: Path | str,
    tables: Mapping[str, pd.DataFrame],
    results: Mapping[str, Any] | Sequence[Any] = (),
    *,
    title: str = "",
    departures: Sequence[str] = (),
) -> Path:
    """Write tables and results as a spreadsheet.

    Parameters
    ----------
    path : Path or str
        File to write; an older one is replaced only by a whole new one.
    tables : mapping of name to DataFrame
        One sheet each; one without rows is left out, and the contents say so. ``frame.attrs`` may
        hold ``caption``, ``basis`` and ``units`` (a mapping of column to unit). A column of texts
        that are all times or all numbers is written as such. An index that only counts rows is
        left out. Times with a zone are written in UTC, and the header says so.
    results : mapping, or sequence of objects
        Results for the second sheet: either objects with `label`, `value`, `unit` and `basis`
        (and `key`, if they have one), or a mapping as in ``results.json``, nested or with dotted
        keys, whose keys end in their unit. Two numbers are an interval.
    title : str
        Title of the study; it stands in the file's properties and above the results.
    departures : sequence of str
        Sentences that stand out above the results.

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

    shown = {name: frame for name, frame in tables.items() if len(frame)}
    names = _sheet_names(shown)
    book = Workbook()
    front = book.active
    assert front is not None
    front.title = CONTENTS
    lines = list(_result_lines(results))
    _write_contents(front, tables, names, len(lines))
    if lines or departures:
        _write_results(book.create_sheet(RESULTS), lines, title, departures)
    for name, frame in shown.items():
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
    result_count: int,
) -> None:
    _heads(sheet, 1, ["Sheet", "Content", "Rows", "Columns", "Basis"])
    entries: list[tuple[str, str, int, int, str]] = []
    if result_count:
        entries.append((RESULTS, "Figures of merit with unit and basis", result_count, 5, ""))
    for name, frame in tables.items():
        said = str(frame.attrs.get("caption", _words(name)))
        if name not in names:
            said += " (empty, left out)"
        basis = str(frame.attrs.get("basis", ""))
        entries.append((names.get(name, ""), said, len(frame), frame.shape[1], basis))
    for row, entry in enumerate(entries, start=2):
        for column, value in enumerate(entry, start=1):
            _put(sheet.cell(row, column), value, colour=MUTED if column == 5 else INK)
        if entry[0]:
            link = sheet.cell(row, 1)
            quoted = entry[0].replace("'", "''")
            link.hyperlink = f"#'{quoted}'!A1"
            _put(link, entry[0], colour=MAIN)
    sheet.freeze_panes = "A2"
    _widths(sheet, [34, 60, 10, 10, 60])


def _write_results(
    sheet: Worksheet,
    lines: Sequence[tuple[str, Any, Any, str, str, bool]],
    title: str,
    departures: Sequence[str],
) -> None:
    from openpyxl.styles import PatternFill

    row = 1
    if title:
        _put(sheet.cell(row, 1), title, size=14, bold=True)
        row += 2
    if departures:
        said = ["Departures from study.toml", *departures]
        for place, sentence in enumerate(said):
            for column in range(1, 6):
                fill = PatternFill("solid", fgColor=_STANDS_OUT.lstrip("#"))
                sheet.cell(row, column).fill = fill
            _put(sheet.cell(row, 1), sentence, bold=place == 0)
            sheet.cell(row, 1).alignment = _unwrapped()
            row += 1
        row += 1
    row = _heads(sheet, row, ["Result", "Value", "to", "Unit", "Basis"])
    sheet.freeze_panes = f"A{row}"
    for label, low, high, unit, basis, as_percent in lines:
        values = (as_printed(label), low, high, unit_text(unit), as_printed(basis))
        for column, value in enumerate(values, start=1):
            cell = sheet.cell(row, column)
            _put(cell, value, colour=MUTED if column == 5 else INK)
            if column in (2, 3):
                is_share = as_percent and isinstance(value, Real)
                cell.number_format = "0.0 %" if is_share else number_format(value, unit)
        row += 1
    _widths(sheet, [44, 16, 16, 14, 90])


def _write_table(sheet: Worksheet, name: str, frame: pd.DataFrame) -> None:
    import pandas as pd

    units = frame.attrs.get("units", {})
    whole = frame
    if not (isinstance(frame.index, pd.RangeIndex) and frame.index.name is None):
        labels = [_index_label(label, name) for label in frame.index.names]
        whole = frame.reset_index(names=labels)
    if len(whole) + 1 > MOST_ROWS:
        raise ValueError(
            f"table '{name}' has {len(whole)} rows, a sheet holds {MOST_ROWS - 1}; hand it over as "
            f"Parquet or by the hour instead"
        )
    heads, columns, formats = [], [], []
    for position, column in enumerate(whole.columns):
        values = whole.iloc[:, position]
        unit = str(units.get(column, "")) or split_unit(str(column))[1]
        heads.append(_head(column, unit, values))
        columns.append(typed_values([cell_value(value) for value in values]))
        formats.append(column_format(columns[-1], unit))
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


def _index_label(label: Any, table: str) -> str:
    """Head of an index column; only a frequency table leaves its rows, the sectors, unnamed."""
    if label is not None:
        return str(label)
    return "sector" if "frequency" in table else "row"


def _result_lines(
    results: Mapping[str, Any] | Sequence[Any],
) -> Iterable[tuple[str, Any, Any, str, str, bool]]:
    """Label, value, upper end of an interval, unit, basis, and whether it reads as per cent."""
    if isinstance(results, Mapping):
        yield from _mapped_lines(results, "")
        return
    for row in results:
        low, high = _ends(row.value)
        as_percent = bool(getattr(row, "as_percent", False))
        yield str(row.label), low, high, str(row.unit), str(row.basis), as_percent


def _mapped_lines(
    results: Mapping[str, Any], prefix: str
) -> Iterable[tuple[str, Any, Any, str, str, bool]]:
    for key, value in results.items():
        name = f"{prefix}{key}"
        if isinstance(value, Mapping) and "value" in value:
            low, high = _ends(value["value"])
            unit, basis = str(value.get("unit", "")), str(value.get("basis", ""))
            yield name, low, high, unit, basis, False
        elif isinstance(value, Mapping):
            yield from _mapped_lines(value, f"{name}.")
        else:
            low, high = _ends(value)
            unit = "1" if name.endswith("weibull_k") else split_unit(name)[1]
            yield name, low, high, unit, "", False


def _words(name: str) -> str:
    """What a table holds, from its name ``step.table``."""
    return name.replace(".", ": ", 1).replace("_", " ")


def _ends(value: Any) -> tuple[Any, Any]:
    if isinstance(value, list | tuple):
        if len(value) == 2:
            return cell_value(value[0]), cell_value(value[1])
        return ", ".join(str(part) for part in value), None
    return cell_value(value), None


def _sheet_names(tables: Mapping[str, Any]) -> dict[str, str]:
    """Names a spreadsheet allows, none of them twice."""
    taken = {
        CONTENTS.lower(),
        RESULTS.lower(),
        "history",
    }  # the last is kept for the program itself
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
    name = column_heading(column, unit)
    return f"{name} (UTC)" if getattr(values.dtype, "tz", None) is not None else name


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


def _unwrapped() -> Any:
    from openpyxl.styles import Alignment

    return Alignment(wrap_text=False, vertical="center")


def _heads(sheet: Worksheet, row: int, heads: Sequence[str]) -> int:
    from openpyxl.styles import Alignment, Border, PatternFill, Side

    for column, head in enumerate(heads, start=1):
        cell = sheet.cell(row, column)
        _put(cell, head, bold=True, colour="#FFFFFF")
        cell.fill = PatternFill("solid", fgColor=MAIN.lstrip("#"))
        cell.alignment = Alignment(wrap_text=True, vertical="center")
        cell.border = Border(bottom=Side(style="thin", color=INK.lstrip("#")))
    return row + 1


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
