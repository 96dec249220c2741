"""Look at a data file and draft its station section, with the open questions marked.

Here a text file (packed or not) is looked over: delimiter, decimal sign, header, format of the
stamps, interval, texts that mean no value, and from the column names a first idea of what each
column is. Ideas are marked as such. What no file tells (offset from UTC, side of the stamp, north,
calm rule) is asked. Nothing is read into a record here.
"""

from __future__ import annotations

import csv
import datetime as dt
import gzip
import math
import re
import zipfile
from collections import Counter
from collections.abc import Sequence
from pathlib import Path

import pandas as pd

from windkit.kernels.units import UNITS
from windkit.study.errors import StudyError
from windkit.study.station_draft import OPEN, StationDraft, draft_text

__all__ = ["draft_from_file", "draft_station"]

#: Bytes looked at from the beginning of a file; enough for some days of ten-minute rows.
_LOOKED_AT = 400_000
_DELIMITERS = (";", "\t", ",", "|")
#: Formats of stamps that are tried, ISO 8601 first.
_FORMATS = (
    "%Y-%m-%d %H:%M",
    "%Y-%m-%d %H:%M:%S",
    "%Y-%m-%dT%H:%M",
    "%Y-%m-%dT%H:%M:%S",
    "%Y/%m/%d %H:%M",
    "%Y/%m/%d %H:%M:%S",
    "%d.%m.%Y %H:%M",
    "%d.%m.%Y %H:%M:%S",
    "%d/%m/%Y %H:%M",
    "%d/%m/%Y %H:%M:%S",
    "%m/%d/%Y %H:%M",
    "%m/%d/%Y %H:%M:%S",
    "%d-%m-%Y %H:%M",
    "%d-%m-%Y %H:%M:%S",
    "%Y%m%d%H%M",
    "%Y%m%d %H:%M",
    "%Y-%m-%dT%H:%M%z",
    "%Y-%m-%dT%H:%M:%S%z",
)
_ISO = {"%Y-%m-%d %H:%M", "%Y-%m-%d %H:%M:%S", "%Y-%m-%dT%H:%M", "%Y-%m-%dT%H:%M:%S"}
_ISO |= {"%Y-%m-%dT%H:%M%z", "%Y-%m-%dT%H:%M:%S%z"}
#: Words in column names and the quantity they suggest, the first that fits.
_QUANTITY_WORDS = (
    ("wind_from_direction", r"dir|vane|bearing|wd(?![a-z])"),
    ("dew_point_temperature", r"dew"),
    ("air_temperature", r"temp|^t(?![a-z])"),
    ("relative_humidity", r"hum|rh(?![a-z])"),
    ("air_pressure", r"press|baro|^p(?![a-z])|hpa"),
    ("air_density", r"dens"),
    ("wind_speed_of_gust", r"gust"),
    ("wind_speed", r"speed|spd|wind|anem|cup|ws(?![a-z])|^v(?![a-z])"),
)
_STATISTIC_WORDS = (
    ("sd", r"sd(?![a-z])|std|stdev|sigma|dev(?![a-z])"),
    ("max", r"max|gust"),
    ("min", r"min(?!ute)"),
    ("mean", r"."),
)
#: Texts that are written where there is no value, in many a file.
_LONGEST_CODE, _MOST_CODES = 12, 6
_USUAL_CODES = (-9999.0, -999.0, -99.0, 999.0, 9999.0, 99999.0, -32768.0)


def draft_station(path: Path, *, section: str = "mast", written: str | None = None) -> str:
    """Draft the station section of a data file as TOML.

    Parameters
    ----------
    path : Path
        A delimited text file, plain, ``.gz`` or ``.zip``.
    section : str
        ``mast`` or ``references``.
    written : str, optional
        Path of the file as it will stand in `study.toml`; ``data/NAME`` if left out.

    Returns
    -------
    str
        TOML with every open question marked ``ASK``; it is refused until they are answered.

    Raises
    ------
    StudyError
        If no table is found in the file.
    """
    return draft_text(draft_from_file(path, written=written), section=section)


def draft_from_file(path: Path, *, written: str | None = None) -> StationDraft:
    """The same as a draft to work on; see `draft_station`."""
    raw = _beginning(path)
    text, encoding = _decoded(raw)
    lines = text.splitlines()[:-1] or text.splitlines()
    delimiter = _delimiter(lines, path)
    rows = [[f.strip() for f in row] for row in csv.reader(lines, delimiter=delimiter)]
    header, first = _header(rows, path)
    names = rows[header]
    body = [row for row in rows[first:] if len(row) == len(names)]
    decimal = _decimal(body, delimiter)
    time_at, formats = _time_column(names, body, path)
    draft = StationDraft()
    values = draft.station
    values["name"] = OPEN
    draft.remarks["name"] = "what is the station called"
    values["files"] = [written or f"data/{path.name}"]
    if encoding != "utf-8":
        values["encoding"] = encoding
    values["delimiter"] = delimiter
    values["decimal"] = decimal
    values["skip_rows"] = header
    if first - header > 1:
        values["skip_rows_after_header"] = first - header - 1
    values["time_column"] = names[time_at]
    stamps = [row[time_at] for row in body]
    _draft_clock(draft, stamps, formats)
    codes = _codes(body, time_at, decimal)
    values["missing"] = codes
    if codes:
        draft.remarks["missing"] = "met in the first rows; do all of them mean no value"
    under = rows[header + 1 : first]
    for at, name in enumerate(names):
        if at != time_at and name:
            _draft_channel(draft, name, [row[at] for row in under if len(row) == len(names)])
    _draft_main(draft)
    draft.notes.append(
        f"drafted from the first {len(body)} rows of {path.name}; quantities, statistics and "
        "heights are read off the column names: check each"
    )
    doubled = [name for name, count in Counter(names).items() if name and count > 1]
    if doubled:
        draft.notes.append(f"these headers stand twice and cannot be read: {', '.join(doubled)}")
    return draft


def _beginning(path: Path) -> bytes:
    try:
        if path.suffix.lower() == ".gz":
            with gzip.open(path) as stream:
                return stream.read(_LOOKED_AT)
        if path.suffix.lower() == ".zip":
            with zipfile.ZipFile(path) as archive, archive.open(archive.namelist()[0]) as stream:
                return stream.read(_LOOKED_AT)
        with path.open("rb") as stream:
            return stream.read(_LOOKED_AT)
    except (OSError, EOFError, IndexError, RuntimeError, zipfile.BadZipFile) as error:
        raise StudyError.of(
            file=path.name,
            met=f"the file cannot be opened ({error})",
            rule="a draft is made from a text file, plain or packed",
            remedy="check the path; export workbooks as CSV, or write the section by hand",
        ) from error


def _decoded(raw: bytes) -> tuple[str, str]:
    if raw.startswith((b"\xff\xfe", b"\xfe\xff")):
        return raw[: len(raw) // 2 * 2].decode("utf-16", "replace"), "utf-16"
    try:
        # The last character may be cut in two.
        return raw.decode("utf-8-sig"), "utf-8"
    except UnicodeDecodeError as error:
        if error.start >= len(raw) - 4:
            return raw[: error.start].decode("utf-8-sig"), "utf-8"
        return raw.decode("cp1252", "replace"), "cp1252"


def _no_table(path: Path) -> StudyError:
    return StudyError.of(
        file=path.name,
        met="no table is found: no run of lines with the same number of fields and a stamp",
        rule="a draft needs a header line, rows of numbers and a column of stamps",
        remedy="write the section by hand after the comments in study.toml",
    )


def _delimiter(lines: Sequence[str], path: Path) -> str:
    """The sign that splits most lines into the same number of fields."""
    best, score = "", 0
    for sign in _DELIMITERS:
        counts = Counter(line.count(sign) for line in lines if line.strip())
        counts.pop(0, None)
        if counts:
            fields, times = max(counts.items(), key=lambda item: (item[1], item[0]))
            # A comma may be a decimal sign: fields with letters or stamps speak for the others.
            if times * min(fields, 3) > score:
                best, score = sign, times * min(fields, 3)
    if not best:
        raise _no_table(path)
    return best


def _header(rows: list[list[str]], path: Path) -> tuple[int, int]:
    """Row of the column names and first row of data."""
    width = Counter(len(row) for row in rows if len(row) > 1).most_common(1)
    if not width:
        raise _no_table(path)
    wide = [at for at, row in enumerate(rows) if len(row) == width[0][0]]
    first = next((at for at in wide if _looks_like_data(rows[at])), None)
    if first is None or first == 0:
        raise _no_table(path)
    header = first
    while header - 1 in wide:
        header -= 1
    return (header, first) if header < first else (first - 1, first)


def _looks_like_data(row: list[str]) -> bool:
    numbers = sum(bool(re.fullmatch(r"[-+]?\d+([.,]\d+)?([eE][-+]?\d+)?", f)) for f in row)
    has_stamp = any(re.search(r"\d{1,4}[-./]\d{1,2}[-./]\d{1,4}|^\d{12}$", f) for f in row)
    return has_stamp and numbers >= 1


def _decimal(body: list[list[str]], delimiter: str) -> str:
    if delimiter == ",":
        return "."
    fields = [field for row in body[:50] for field in row]
    commas = sum(bool(re.fullmatch(r"[-+]?\d+,\d+", field)) for field in fields)
    points = sum(bool(re.fullmatch(r"[-+]?\d+\.\d+", field)) for field in fields)
    return "," if commas > points else "."


def _time_column(names: list[str], body: list[list[str]], path: Path) -> tuple[int, list[str]]:
    """The first column that reads as stamps, and the formats that read all of it."""
    for at in range(len(names)):
        stamps = [row[at] for row in body]
        formats = [each for each in _FORMATS if stamps and _reads(stamps, each)]
        if formats:
            return at, formats
    raise _no_table(path)


def _reads(stamps: Sequence[str], time_format: str) -> bool:
    try:
        for stamp in [*stamps[:40], *stamps[::37], stamps[-1]]:
            dt.datetime.strptime(stamp, time_format)
    except ValueError:
        return False
    return True


def _draft_clock(draft: StationDraft, stamps: list[str], formats: list[str]) -> None:
    values, remarks = draft.station, draft.remarks
    known = [each for each in formats if each in _ISO]
    if len(formats) > 1 and not known:
        values["time_format"] = OPEN
        remarks["time_format"] = f"day first or month first? write one of: {', '.join(formats)}"
    elif not known:
        values["time_format"] = formats[0]
    values["utc_offset_h"] = OPEN
    remarks["utc_offset_h"] = "hours of the file's clock east of UTC, all year"
    parsed = pd.to_datetime(pd.Series(stamps), format=formats[0], errors="coerce", utc=True)
    steps = parsed.diff().dropna().dt.total_seconds() / 60
    steps = steps[steps > 0]
    if len(steps):
        values["interval_min"] = float(steps.mode().iloc[0])
        remarks["interval_min"] = "commonest step; is it the averaging interval too"
    else:
        values["interval_min"] = OPEN
        remarks["interval_min"] = "minutes"
    values["stamp"] = OPEN
    remarks["stamp"] = "is a stamp the start or the end of its interval: start or end"
    values["calm_below_m_s"] = OPEN
    remarks["calm_below_m_s"] = "speeds below it are calms; often the cup's starting speed"


def _codes(body: list[list[str]], time_at: int, decimal: str) -> list[str]:
    """Texts among numbers, and numbers that are usual codes."""
    found: Counter[str] = Counter()
    for at in range(len(body[0]) if body else 0):
        if at == time_at:
            continue
        numbers: Counter[float] = Counter()
        spelled: dict[float, str] = {}
        for row in body:
            field = row[at]
            if not field:
                continue
            try:
                number = float(field.replace(decimal, "."))
            except ValueError:
                number = math.nan
            if math.isfinite(number):
                numbers[number] += 1
                spelled.setdefault(number, field)
            elif len(field) <= _LONGEST_CODE:
                found[field] += 1
        others = [number for number in numbers if number not in _USUAL_CODES]
        for code in _USUAL_CODES:
            # 999 hPa is a pressure: a code lies beyond everything else of its column.
            beyond = not others or not min(others) <= code <= max(others)
            if numbers[code] and beyond:
                found[spelled[code]] += numbers[code]
    return [code for code, _ in found.most_common(_MOST_CODES)]


def _draft_channel(draft: StationDraft, name: str, under: list[str]) -> None:
    number = len(draft.channels)
    plain = re.sub(r"[\[(].*?[\])]", "", name).lower().strip(" _")
    quantity = next((q for q, words in _QUANTITY_WORDS if re.search(words, plain)), OPEN)
    if quantity == OPEN:
        draft.notes.append(f"column '{name}' is not drafted: nothing in its name says what it is")
        return
    told = " ".join([plain, *(text.lower() for text in under)])
    statistic = next(s for s, words in _STATISTIC_WORDS if re.search(words, told))
    heights = [int(text) for text in re.findall(r"(?<!\d)(\d{1,3})(?!\d)", plain)]
    height: object = float(heights[0]) if heights and 1 <= heights[0] <= 300 else OPEN
    unit = _unit(name, under, quantity)
    label = re.sub(r"[^a-z0-9]+", "_", plain).strip("_")
    label = label if re.match(r"[a-z]", label) else f"column_{label}"
    taken = {str(channel["name"]) for channel in draft.channels}
    while label in taken or label in {"time", "all"}:
        label += "_2"
    draft.channels.append(
        {
            "name": label,
            "column": name,
            "quantity": quantity,
            "statistic": statistic,
            "height_m": height,
            "unit": unit,
        }
    )
    draft.remarks[f"{number}.quantity"] = "from the name: check"
    draft.remarks[f"{number}.height_m"] = (
        "metres above ground" if height == OPEN else "from the name: check"
    )
    if unit == OPEN:
        draft.remarks[f"{number}.unit"] = f"one of: {', '.join(UNITS[quantity])}"


def _unit(name: str, under: list[str], quantity: str) -> str:
    bracketed = re.findall(r"[\[(](.*?)[\])]", name)
    for text in [*bracketed, *under]:
        if text.strip() in UNITS[quantity]:
            return text.strip()
    return OPEN


def _draft_main(draft: StationDraft) -> None:
    values, remarks = draft.station, draft.remarks
    speeds = _means(draft, "wind_speed")
    vanes = _means(draft, "wind_from_direction")
    if vanes:
        values["direction_reference"] = OPEN
        remarks["direction_reference"] = (
            'were vanes set to "true" or "magnetic" north? magnetic needs declination_deg'
        )
    values["main_wind_speed"] = speeds[0] if speeds else OPEN
    remarks["main_wind_speed"] = "the highest; is it the one the study stands on"
    if vanes:
        values["main_wind_direction"] = vanes[0]


def _means(draft: StationDraft, quantity: str) -> list[str]:
    def height(channel: dict[str, object]) -> float:
        return float(str(channel["height_m"])) if channel["height_m"] != OPEN else 0.0

    found = [
        channel
        for channel in draft.channels
        if channel["quantity"] == quantity and channel["statistic"] == "mean"
    ]
    return [str(channel["name"]) for channel in sorted(found, key=height, reverse=True)]
