"""Columns of delimited text as loggers and archives write it, read strictly and fast.

Here the rows of a text become columns of numbers and a column of stamps, still in the file's own
units and clock. Sound files go through pandas' parser; a file that it refuses, or whose fields do
not add up, is read again line by line, so that the message can say which lines are wrong. Opening
is in `text_source`; units, clock and calibration are the business of `reading`.
"""

from __future__ import annotations

import difflib
import io
import re
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import pandas as pd
import pyarrow as pa
from numpy.typing import NDArray

from windkit.study.errors import StudyError
from windkit.study.stations import StationSettings
from windkit.study.text_source import TextSource, open_text, split_fields

__all__ = [
    "RawTable",
    "has_digits",
    "listed",
    "missing_column",
    "missing_numbers",
    "number_in",
    "read_text",
    "remedy_for_texts",
]

#: How many faults a message lists before it only counts them.
_LISTED = 5
#: A text with fewer digits than this is no stamp: a date and an hour have more.
_LEAST_DIGITS = 6
_DELIMITERS = {",": '","', ";": '";"', "\t": '"\\t"', "|": '"|"'}


@dataclass(frozen=True)
class RawTable:
    """Rows of one file in its own units and clock.

    Attributes
    ----------
    file : str
        Path as written in the settings.
    sha256 : str
        Hash of the file as sent.
    stamps : pa.Array
        One stamp per row: text, or timestamps where the file has a type for them.
    columns : dict of str to ndarray
        Values by column, NaN where the file has no value.
    line_numbers : callable
        Gives the line of each row, the first line of the file being 1; slow, so on demand.
    broken : list of (int, str)
        Line and reason of rows with too few or too many fields, where they are set aside.
    unit_of_rows : str
        What a row is called in messages: line or row.
    notes : tuple of str
        What was met in the file that a reader should know and that changes no value.
    """

    file: str
    sha256: str
    stamps: pa.Array
    columns: dict[str, NDArray[np.float64]]
    line_numbers: Callable[[], NDArray[np.int64]]
    broken: list[tuple[int, str]] = field(default_factory=list)
    unit_of_rows: str = "line"
    notes: tuple[str, ...] = ()


def read_text(path: Path, written: str, settings: StationSettings) -> RawTable:
    """Read the declared columns of one delimited text file.

    Parameters
    ----------
    path, written : Path, str
        The file, and its name for messages.
    settings : StationSettings
        Delimiter, decimal sign, header line, texts that mean no value, columns.

    Raises
    ------
    StudyError
        If the file is empty, its header or a row does not fit the settings, or a number column
        holds a text; with the lines and what to write instead.
    """
    source = open_text(path, written, settings)
    names = split_fields(source.header, settings)
    wanted = [settings.time_column, *settings.columns]
    _check_columns(source, names, wanted, settings)
    positions = [names.index(name) for name in wanted]
    frame = _read_fast(source, len(names), positions, settings)
    source.refuse_damage()
    if frame is None:
        return _read_slow(source, len(names), positions, wanted, settings)

    def lines() -> NDArray[np.int64]:
        return np.array([line for line, _ in source.rows(settings)], dtype=np.int64)

    stamps = pa.array(frame[positions[0]].fillna(""), type=pa.string())
    numbers = missing_numbers(settings)
    columns = {}
    for name, at in zip(wanted[1:], positions[1:], strict=True):
        values = frame[at].to_numpy(dtype=np.float64)
        for number in numbers:
            values = np.where(values == number, np.nan, values)
        columns[name] = values
    return RawTable(written, source.sha256, stamps, columns, lines, notes=source.notes)


def _check_columns(
    source: TextSource, names: list[str], wanted: Sequence[str], settings: StationSettings
) -> None:
    if len(names) == 1 and settings.delimiter != "whitespace":
        found = {sign: names[0].count(sign) for sign in _DELIMITERS if sign != settings.delimiter}
        sign = max(found, key=lambda each: found[each])
        if found[sign]:
            raise StudyError.of(
                file=source.file,
                line=source.header_line,
                met=f"only one column is found with delimiter {_shown(settings.delimiter)}; "
                f"{_shown(sign)} would split this line into {found[sign] + 1}",
                rule="the delimiter is the one the file uses",
                remedy=f"write delimiter = {_shown(sign)} (and skip_rows, if a header block "
                "stands before the column names)",
            )
    for name in wanted:
        if names.count(name) > 1:
            places = [str(at + 1) for at, other in enumerate(names) if other == name]
            raise StudyError.of(
                file=source.file,
                line=source.header_line,
                met=f"the header has '{name}' as columns {' and '.join(places)}",
                rule="a declared column stands once in the header",
                remedy="rename one of them in a copy of the file, after asking which is which",
            )
        if name not in names:
            later = _header_further_down(source, wanted, settings)
            raise missing_column(source.file, name, names, source.header_line, later)


def missing_column(
    written: str, name: str, names: Sequence[str], line: int | None, remedy: str | None = None
) -> StudyError:
    """The error for a declared column that the file has not got, with the closest there is."""
    close = difflib.get_close_matches(name, names, n=1, cutoff=0.5)
    shown = ", ".join(f"'{each}'" for each in names[:40]) + (" ..." if len(names) > 40 else "")
    if remedy is None:
        remedy = f"write '{close[0]}' if that is meant" if close else "write one of these"
    return StudyError.of(
        file=written,
        line=line,
        met=f"there is no column '{name}'; the columns are {shown}",
        rule="each declared column stands in the header",
        remedy=remedy,
    )


def _header_further_down(
    source: TextSource, wanted: Sequence[str], settings: StationSettings
) -> str | None:
    """A remedy if the declared names stand in a later line, behind a header block."""
    for offset, raw in enumerate(source.body[:50_000].splitlines()[:200]):
        if set(split_fields(raw.decode("utf-8", "replace"), settings)).issuperset(wanted):
            line = source.first_line + offset
            return f"line {line} has the declared names: write skip_rows = {line - 1}"
    return None


def missing_numbers(settings: StationSettings) -> list[float]:
    """Declared texts for no value that are numbers: they mean it in any spelling."""
    numbers = []
    for text in settings.missing:
        try:
            numbers.append(float(text.replace(settings.decimal, ".")))
        except ValueError:
            continue
    return [number for number in numbers if np.isfinite(number)]


def _read_fast(
    source: TextSource, width: int, positions: list[int], settings: StationSettings
) -> pd.DataFrame | None:
    """All declared columns in one go; None if anything at all has to be looked at."""
    texts = [text for text in settings.missing if text.strip()]
    # Choosing columns slows the parser down; it pays only where most are left out.
    few = positions if len(positions) < width / 3 else None
    try:
        frame = pd.read_csv(
            source.path if source.held is None else io.BytesIO(source.body),
            sep=" " if settings.delimiter == "whitespace" else settings.delimiter,
            decimal=settings.decimal,
            header=None,
            skiprows=source.first_line - 1 if source.held is None else 0,
            usecols=few,
            na_values=["", *texts],
            keep_default_na=False,
            encoding="utf-8",
            compression=None,
            engine="c",
        )
    except (
        KeyError,
        ValueError,
        OverflowError,
        pd.errors.ParserError,
    ):  # empty, odd texts, long rows
        return None
    if frame.columns.isin(positions).sum() != len(positions):
        return None  # rows are shorter than the header
    if not pd.api.types.is_string_dtype(frame[positions[0]].dtype):
        return None  # stamps such as 20260101 come as numbers
    if any(frame[at].dtype.kind not in "fi" for at in positions[1:]):
        return None  # texts among the numbers
    if source.delimiters != len(frame) * (width - 1):
        return None  # short rows are filled up silently, quoted delimiters count twice
    if any(np.isinf(frame[at].to_numpy()).any() for at in positions[1:]):
        return None
    return frame


def _read_slow(
    source: TextSource,
    width: int,
    positions: list[int],
    wanted: list[str],
    settings: StationSettings,
) -> RawTable:
    """Read line by line; either everything is sound, or the message lists what is not."""
    rows: list[list[str]] = []
    lines: list[int] = []
    broken: list[tuple[int, str]] = []
    for line, fields in source.rows(settings):
        if len(fields) == width:
            rows.append([fields[at].strip() for at in positions])
            lines.append(line)
        else:
            broken.append((line, f"{len(fields)} fields instead of {width}"))
    if broken and settings.broken_rows == "refuse":
        raise StudyError.of(
            file=source.file,
            line=broken[0][0],
            met=f"{_counted(len(broken), 'row has', 'rows have')} the wrong number of fields: "
            + listed([f"line {line} has {reason}" for line, reason in broken]),
            rule="each row has a field for each column of the header; a cut-off download or a "
            "full memory card leaves a short last line",
            remedy='ask for the file again, or write broken_rows = "set_aside" to keep such rows '
            "out and have them listed",
        )
    columns = _numbers(rows, lines, wanted, source.file, settings)
    stamps = pa.array([row[0] for row in rows], type=pa.string())
    numbered = np.asarray(lines, dtype=np.int64)
    return RawTable(
        source.file, source.sha256, stamps, columns, lambda: numbered, broken, notes=source.notes
    )


def _numbers(
    rows: list[list[str]],
    lines: list[int],
    wanted: list[str],
    written: str,
    settings: StationSettings,
) -> dict[str, NDArray[np.float64]]:
    numbers = missing_numbers(settings)
    none = {"", *settings.missing}
    columns = {}
    faults: list[tuple[int, str, str]] = []
    for at, name in enumerate(wanted[1:], start=1):
        values = np.full(len(rows), np.nan)
        for row, fields in enumerate(rows):
            if fields[at] in none:
                continue
            value = number_in(fields[at], settings.decimal)
            if value is None:
                faults.append((lines[row], name, fields[at]))
            elif value not in numbers:
                values[row] = value
        columns[name] = values
    if faults:
        faults.sort()
        found = [f"line {line} has '{text}' in '{name}'" for line, name, text in faults]
        sound = (field for fields in rows for field in fields[1:])
        above = next((at for at, fields in enumerate(rows) if has_digits(fields[0])), 0)
        under = lines[above] - lines[0] if faults[-1][0] < lines[above] else 0
        raise StudyError.of(
            file=written,
            line=faults[0][0],
            met=f"{_counted(len(faults), 'field is', 'fields are')} not a number: {listed(found)}",
            rule=f"declared columns hold numbers with decimal = "
            f'"{settings.decimal}", or a text that is declared to mean no value',
            remedy=remedy_for_texts([text for _, _, text in faults], sound, settings, under=under),
        )
    return columns


def has_digits(text: str) -> bool:
    """Whether a text may be a stamp at all; units and other words under a header are not."""
    return sum(sign.isdigit() for sign in text) >= _LEAST_DIGITS


def remedy_for_texts(
    texts: Sequence[str], fields: Iterable[str], settings: StationSettings, *, under: int
) -> str:
    """What to write where texts stand among numbers.

    Parameters
    ----------
    texts : sequence of str
        Fields that are no numbers.
    fields : iterable of str
        All fields of the declared columns, the sound ones too.
    settings : StationSettings
        Decimal sign, lines under the header and texts that are declared.
    under : int
        Lines under the header that hold all of `texts` and have no stamp; 0 if there are none.
    """
    if under:
        lines = settings.skip_rows_after_header + under
        return (
            f"write skip_rows_after_header = {lines}: what stands there has no stamp and looks "
            "like units"
        )
    sign = "," if settings.decimal == "." else "."
    other = re.compile(rf"[-+]?\d+{re.escape(sign)}\d+")
    swapped = sum(bool(other.fullmatch(text)) for text in texts)
    if 2 * swapped > len(texts):
        declared = re.compile(rf"[-+]?\d+{re.escape(settings.decimal)}\d+")
        if not any(declared.fullmatch(field.strip()) for field in fields):
            return f'write decimal = "{sign}"'
    codes = sorted(set(texts))[:_LISTED]
    shown = ", ".join(f'"{code}"' for code in [*settings.missing, *codes])
    return f"write missing = [{shown}] if these mean no value; correct decimal or the file if not"


def number_in(text: str, decimal: str) -> float | None:
    """A finite number, written with that decimal sign and nothing else around it."""
    if decimal == ",":
        if "." in text:
            return None
        text = text.replace(",", ".")
    if "_" in text:
        return None
    try:
        value = float(text)
    except ValueError:
        return None
    return value if np.isfinite(value) else None


def listed(items: Sequence[str]) -> str:
    """The first few items, and how many more there are."""
    more = len(items) - _LISTED
    return "; ".join(items[:_LISTED]) + (f"; and {more} more" if more > 0 else "")


def _counted(count: int, one: str, many: str) -> str:
    return f"{count} {one if count == 1 else many}"


def _shown(sign: str) -> str:
    return _DELIMITERS.get(sign, f'"{sign}"')
