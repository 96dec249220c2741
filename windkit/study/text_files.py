"""Delimited text as loggers and archives write it, read strictly and fast.

Here a file's bytes become columns of numbers and a column of stamps, still in the file's own
units and clock. Sound files go through pyarrow; a file that it refuses is read again line by
line, so that the message can say which lines are wrong. Units, clock and calibration are the
business of `reading`.
"""

from __future__ import annotations

import codecs
import csv
import difflib
import gzip
import io
import zipfile
import zlib
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.csv
from numpy.typing import NDArray

from windkit.study.errors import StudyError
from windkit.study.stations import StationSettings

__all__ = ["LARGEST_TEXT", "RawTable", "listed", "missing_column", "read_text", "unpacked"]

#: Largest text, unpacked, that is read at once [bytes]; 20 years of 24 ten-minute channels take
#: about 0.4e9. Common practice for a laptop: the columns then need about as much memory again.
LARGEST_TEXT = 1_200_000_000
#: How many faults a message lists before it only counts them.
_LISTED = 5
_TOO_MUCH = b"more than LARGEST_TEXT"
_DELIMITERS = {",": '","', ";": '";"', "\t": '"\\t"', "|": '"|"'}


@dataclass(frozen=True)
class RawTable:
    """Rows of one file in its own units and clock.

    Attributes
    ----------
    file : str
        Path as written in the settings.
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
    notes : list of str
        What was met in the file that a reader should know and that changes no value.
    """

    file: str
    stamps: pa.Array
    columns: dict[str, NDArray[np.float64]]
    line_numbers: Callable[[], NDArray[np.int64]]
    broken: list[tuple[int, str]] = field(default_factory=list)
    unit_of_rows: str = "line"
    notes: list[str] = field(default_factory=list)


def unpacked(path: Path, written: str) -> bytes:
    """The bytes of a text file, out of its gzip or one-member zip wrapper.

    Parameters
    ----------
    path : Path
        The file; ``.gz`` and ``.zip`` are unpacked, anything else is taken as it is.
    written : str
        Its name for messages.

    Raises
    ------
    StudyError
        If the wrapper is damaged, a zip has several members, or the text is larger than
        `LARGEST_TEXT`.
    """
    try:
        if path.suffix.lower() == ".gz":
            with gzip.open(path) as stream:
                data = stream.read(LARGEST_TEXT + 1)
        elif path.suffix.lower() == ".zip":
            data = _only_member(path, written)
        else:
            data = path.read_bytes() if path.stat().st_size <= LARGEST_TEXT else _TOO_MUCH
    except (OSError, EOFError, zlib.error, zipfile.BadZipFile, RuntimeError) as error:
        raise StudyError.of(
            file=written,
            met=f"the file cannot be unpacked ({error})",
            rule="a packed file is whole and without a password",
            remedy="ask for the file again, or unpack it and name the text file",
        ) from error
    if data is _TOO_MUCH or len(data) > LARGEST_TEXT:
        raise StudyError.of(
            file=written,
            met=f"the text is larger than {LARGEST_TEXT / 1e9:.1f} GB",
            rule="a file is read at once",
            remedy="split it by year and list the parts in files, or convert it to Parquet",
        )
    return data


def _only_member(path: Path, written: str) -> bytes:
    with zipfile.ZipFile(path) as archive:
        members = [info for info in archive.infolist() if not info.is_dir()]
        if len(members) != 1:
            names = ", ".join(info.filename for info in members[:_LISTED]) or "nothing"
            raise StudyError.of(
                file=written,
                met=f"the archive holds {len(members)} files: {names}",
                rule="a zip holds one text file",
                remedy="unpack it and list the wanted files in files",
            )
        with archive.open(members[0]) as stream:
            return stream.read(LARGEST_TEXT + 1)


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
    body, names, first_line, notes = _split_header(unpacked(path, written), written, settings)
    wanted = [settings.time_column, *(channel.column for channel in settings.channels)]
    _check_columns(names, wanted, first_line - 1, written, settings, body)
    positions = [names.index(name) for name in wanted]
    try:
        table = _read_fast(body, len(names), positions, settings)
    except (pa.ArrowException, _OddTextError):
        return _read_slow(body, first_line, names, positions, wanted, written, settings, notes)

    def lines() -> NDArray[np.int64]:
        filled = [number for number, text in enumerate(body.splitlines()) if text]
        return np.asarray(filled, dtype=np.int64) + first_line

    columns = {name: table[1][position] for position, name in enumerate(wanted[1:])}
    return RawTable(written, table[0], columns, lines, notes=notes)


class _OddTextError(Exception):
    """The fast reader let something pass that has to be looked at line by line."""


def _split_header(
    data: bytes, written: str, settings: StationSettings
) -> tuple[bytes, list[str], int, list[str]]:
    """Bytes after the header as UTF-8, column names, line number of the first row, notes."""
    notes = []
    if data.startswith(codecs.BOM_UTF8):
        data = data[len(codecs.BOM_UTF8) :]
        notes.append(f"{written} starts with a byte-order mark; it is read as UTF-8")
    if data.startswith(
        (codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)
    ) and not settings.encoding.lower().startswith("utf-16"):
        raise StudyError.of(
            file=written,
            met="the file starts with a UTF-16 byte-order mark",
            rule=f"the text is {settings.encoding}, as declared",
            remedy='write encoding = "utf-16", or save the file as UTF-8',
        )
    if settings.encoding.lower().replace("_", "-") not in {"utf-8", "utf8", "ascii"}:
        data = _recoded(data, written, settings.encoding)
    if b"\x00" in data:
        place = data.index(b"\x00")
        raise StudyError.of(
            file=written,
            line=data.count(b"\n", 0, place) + 1,
            met="there is a NUL byte",
            rule="a text file has none; a logger or a disk that lost power leaves them",
            remedy="ask for the file again; if that is all there is, delete the damaged lines "
            "from a copy and say so in the study's notes",
        )
    if not data or data.isspace():
        raise StudyError.of(
            file=written,
            met="the file is empty",
            rule="a file has a header line and rows",
            remedy="ask for the file again, or take it out of files",
        )
    if b"\n" not in data:
        data = data.replace(b"\r", b"\n")  # lines of very old systems end in CR alone
    start = 0
    for skipped in range(settings.skip_rows):
        end = data.find(b"\n", start)
        if end < 0:
            raise StudyError.of(
                file=written,
                met=f"the file has {skipped + 1} lines",
                rule=f"the header stands after skip_rows = {settings.skip_rows} lines",
                remedy="correct skip_rows",
            )
        start = end + 1
    end = _line_end(data, start)
    header_line = settings.skip_rows + 1
    try:
        header = data[start:end].decode("utf-8")
    except UnicodeDecodeError as error:
        raise _not_decoded(written, header_line, "utf-8", error) from error
    names = [name.strip() for name in _fields(header.rstrip("\r"), settings)]
    for _ in range(settings.skip_rows_after_header):
        end = _line_end(data, end + 1)
    body = data[end + 1 :]
    if settings.delimiter == "whitespace":
        body = b"\n".join(b" ".join(text.split()) for text in body.splitlines())
    return body, names, header_line + settings.skip_rows_after_header + 1, notes


def _line_end(data: bytes, start: int) -> int:
    end = data.find(b"\n", start)
    return len(data) if end < 0 else end


def _recoded(data: bytes, written: str, encoding: str) -> bytes:
    try:
        return data.decode(encoding).lstrip("\ufeff").encode("utf-8")
    except LookupError as error:
        raise StudyError.of(
            file=written,
            met=f'encoding is "{encoding}"',
            rule="it is the name of a text encoding",
            remedy='write "utf-8", "cp1252", "latin-1" or "utf-16"',
        ) from error
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise _not_decoded(written, line, encoding, error) from error


def _not_decoded(written: str, line: int, encoding: str, error: UnicodeDecodeError) -> StudyError:
    byte = error.object[error.start]
    return StudyError.of(
        file=written,
        line=line,
        met=f"byte 0x{byte:02x} is not {encoding} text",
        rule="the text is in the declared encoding",
        remedy='write encoding = "cp1252" for a file from a Windows machine, or save it as UTF-8',
    )


def _delimiter(settings: StationSettings) -> str:
    return " " if settings.delimiter == "whitespace" else settings.delimiter


def _fields(line: str, settings: StationSettings) -> list[str]:
    if settings.delimiter == "whitespace":
        return line.split()
    return next(csv.reader([line], delimiter=settings.delimiter), [])


def _check_columns(
    names: list[str],
    wanted: Sequence[str],
    header_line: int,
    written: str,
    settings: StationSettings,
    body: bytes,
) -> None:
    header_line -= settings.skip_rows_after_header
    if len(names) == 1 and settings.delimiter != "whitespace":
        found = {sign: names[0].count(sign) for sign in _DELIMITERS if sign != settings.delimiter}
        sign = max(found, key=lambda each: found[each])
        if found[sign]:
            raise StudyError.of(
                file=written,
                line=header_line,
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
                file=written,
                line=header_line,
                met=f"the header has '{name}' as columns {' and '.join(places)}",
                rule="a declared column stands once in the header",
                remedy="rename one of them in a copy of the file, after asking which is which",
            )
        if name not in names:
            later = _header_further_down(wanted, body, header_line + 1, settings)
            raise missing_column(written, name, names, header_line, later)


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
    wanted: Sequence[str], body: bytes, first_line: int, settings: StationSettings
) -> str | None:
    """A remedy if the declared names stand in a later line, behind a header block."""
    for offset, raw in enumerate(body[:50_000].splitlines()[:200]):
        names = {name.strip() for name in _fields(raw.decode("utf-8", "replace"), settings)}
        if names.issuperset(wanted):
            line = first_line + settings.skip_rows_after_header + offset
            return f"line {line} has the declared names: write skip_rows = {line - 1}"
    return None


def _read_fast(
    body: bytes, width: int, positions: list[int], settings: StationSettings
) -> tuple[pa.Array, list[NDArray[np.float64]]]:
    keys = [str(at) for at in range(width)]
    texts, numbers = _missing(settings)
    table = pa.csv.read_csv(
        pa.BufferReader(body),
        read_options=pa.csv.ReadOptions(column_names=keys, block_size=1 << 20),
        parse_options=pa.csv.ParseOptions(delimiter=_delimiter(settings)),
        convert_options=pa.csv.ConvertOptions(
            include_columns=[keys[at] for at in positions],
            column_types={
                keys[at]: pa.string() if rank == 0 else pa.float64()
                for rank, at in enumerate(positions)
            },
            null_values=["", *texts],
            strings_can_be_null=False,
            decimal_point=settings.decimal,
        ),
    )
    columns = []
    for at in positions[1:]:
        column = table[keys[at]]
        if pc.all(pc.is_finite(column)).as_py() is False:
            raise _OddTextError  # pyarrow reads texts such as nan and inf as numbers
        values = np.require(column.to_numpy(), np.float64, "W")
        for number in numbers:
            values[values == number] = np.nan
        columns.append(values)
    return table[keys[positions[0]]].combine_chunks(), columns


def _missing(settings: StationSettings) -> tuple[list[str], list[float]]:
    """Texts that mean no value, and those of them that are numbers, to be met in any spelling."""
    numbers = []
    for text in settings.missing:
        try:
            numbers.append(float(text.replace(settings.decimal, ".")))
        except ValueError:
            continue
    return list(settings.missing), [number for number in numbers if np.isfinite(number)]


def _read_slow(
    body: bytes,
    first_line: int,
    names: list[str],
    positions: list[int],
    wanted: list[str],
    written: str,
    settings: StationSettings,
    notes: list[str],
) -> RawTable:
    """Read line by line; either everything is sound, or the message lists what is not."""
    try:
        text = body.decode("utf-8")
    except UnicodeDecodeError as error:
        line = first_line + body.count(b"\n", 0, error.start)
        raise _not_decoded(written, line, "utf-8", error) from error
    rows: list[list[str]] = []
    lines: list[int] = []
    broken: list[tuple[int, str]] = []
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=_delimiter(settings))
    before = 0
    try:
        for fields in reader:
            line, before = first_line + before, reader.line_num
            if not fields or (len(fields) == 1 and not fields[0].strip()):
                continue
            if len(fields) != len(names):
                broken.append((line, f"{len(fields)} fields instead of {len(names)}"))
                continue
            rows.append([fields[at].strip() for at in positions])
            lines.append(line)
    except csv.Error as error:
        raise StudyError.of(
            file=written,
            line=first_line + before,
            met=f"the line cannot be split into fields ({error})",
            rule="quotation marks come in pairs",
            remedy="correct the line in a copy of the file",
        ) from error
    if broken and settings.broken_rows == "refuse":
        raise StudyError.of(
            file=written,
            line=broken[0][0],
            met=f"{_counted(len(broken), 'row has', 'rows have')} the wrong number of fields: "
            + listed([f"line {line} has {reason}" for line, reason in broken]),
            rule="each row has a field for each column of the header; a cut-off download or a "
            "full memory card leaves a short last line",
            remedy='ask for the file again, or write broken_rows = "set_aside" to keep such rows '
            "out and have them listed",
        )
    columns = _numbers(rows, lines, wanted, written, settings)
    stamps = pa.array([row[0] for row in rows], type=pa.string())
    numbered = np.asarray(lines, dtype=np.int64)
    return RawTable(written, stamps, columns, lambda: numbered, broken, notes=notes)


def _numbers(
    rows: list[list[str]],
    lines: list[int],
    wanted: list[str],
    written: str,
    settings: StationSettings,
) -> dict[str, NDArray[np.float64]]:
    texts, numbers = _missing(settings)
    none = {"", *texts}
    columns = {}
    faults: list[tuple[int, str, str]] = []
    for at, name in enumerate(wanted[1:], start=1):
        values = np.full(len(rows), np.nan)
        for row, fields in enumerate(rows):
            if fields[at] in none:
                continue
            value = _number(fields[at], settings.decimal)
            if value is None:
                faults.append((lines[row], name, fields[at]))
            elif value not in numbers:
                values[row] = value
        columns[name] = values
    if faults:
        faults.sort()
        codes = sorted({text for _, _, text in faults})
        found = [f"line {line} has '{text}' in '{name}'" for line, name, text in faults]
        shown = ", ".join(f'"{code}"' for code in [*settings.missing, *codes[:_LISTED]])
        raise StudyError.of(
            file=written,
            line=faults[0][0],
            met=f"{_counted(len(faults), 'field is', 'fields are')} not a number: {listed(found)}",
            rule=f"declared columns hold numbers with decimal = "
            f'"{settings.decimal}", or a text that is declared to mean no value',
            remedy=f"write missing = [{shown}] if these mean no value; correct decimal or the "
            "file if not",
        )
    return columns


def _number(text: str, decimal: str) -> float | None:
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
