"""Files as they come when something went wrong: a clear message, or every row accounted for."""

from __future__ import annotations

import contextlib
import datetime as dt
import gzip
from pathlib import Path
from typing import Any

import openpyxl
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import HealthCheck, given
from hypothesis import settings as hypothesis_settings
from hypothesis import strategies as st
from station_examples import HEADER, ROWS, channel, settings, write

from windkit.study import text_source
from windkit.study.errors import StudyError
from windkit.study.reading import read_station


def test_a_truncated_last_line_is_refused_or_set_aside(tmp_path: Path):
    (tmp_path / "mast.csv").write_text("\n".join([HEADER, *ROWS, "2026-01-01 00:40,5.1"]))
    with pytest.raises(StudyError, match=r"^mast\.csv, line 5: 1 row has the wrong number") as met:
        read_station(settings(), tmp_path)
    assert "2 fields instead of 4" in str(met.value)
    assert 'broken_rows = "set_aside"' in str(met.value)
    reading = read_station(settings(broken_rows="set_aside"), tmp_path)
    assert (reading.rows_read, reading.rows_kept) == (4, 3)
    assert reading.set_aside["line"].tolist() == [5]


def test_a_row_with_a_field_too_many_is_refused(tmp_path: Path):
    write(tmp_path, ROWS[0], ROWS[1] + ",7", ROWS[2])
    with pytest.raises(StudyError, match="line 3 has 5 fields instead of 4"):
        read_station(settings(), tmp_path)


def test_a_short_row_in_the_middle_does_not_pass_as_missing(tmp_path: Path):
    write(tmp_path, ROWS[0], "2026-01-01 00:20,6.0,10", ROWS[2])
    with pytest.raises(StudyError, match="line 3 has 3 fields instead of 4"):
        read_station(settings(), tmp_path)


def test_a_byte_order_mark_is_read_and_noted(tmp_path: Path):
    write(tmp_path, *ROWS)
    text = (tmp_path / "mast.csv").read_bytes()
    (tmp_path / "mast.csv").write_bytes(b"\xef\xbb\xbf" + text)
    reading = read_station(settings(), tmp_path)
    assert reading.rows_kept == 3
    assert reading.notes == ("mast.csv starts with a byte-order mark; it is read as UTF-8",)


def test_utf_16_is_refused_unless_declared(tmp_path: Path):
    write(tmp_path, *ROWS)
    text = (tmp_path / "mast.csv").read_text()
    (tmp_path / "mast.csv").write_text(text, encoding="utf-16")
    with pytest.raises(StudyError, match='Write encoding = "utf-16"'):
        read_station(settings(), tmp_path)
    assert read_station(settings(encoding="utf-16"), tmp_path).rows_kept == 3


def test_another_encoding_is_refused_with_its_line_unless_declared(tmp_path: Path):
    header = HEADER.replace("T5", "T5 [°C]")
    write(tmp_path, *ROWS, header=header)
    text = (tmp_path / "mast.csv").read_text(encoding="utf-8")
    (tmp_path / "mast.csv").write_text(text, encoding="cp1252")
    channels = [
        channel("speed_80", "Spd80", "wind_speed", "m/s", 80.0),
        channel("direction_78", "Dir78", "wind_from_direction", "deg", 78.0),
        channel("temperature_5", "T5 [°C]", "air_temperature", "degC", 5.0),
    ]
    with pytest.raises(StudyError, match="line 1: byte 0xb0 is not utf-8 text"):
        read_station(settings(channels=channels), tmp_path)
    station = settings(channels=channels, encoding="cp1252")
    assert read_station(station, tmp_path).rows_kept == 3


@pytest.mark.parametrize("packed", [False, True])
def test_nul_bytes_are_refused_with_their_line(tmp_path: Path, packed: bool):
    text = "\n".join([HEADER, ROWS[0], ROWS[1] + "\0\0", ROWS[2]]).encode()
    name = "mast.csv.gz" if packed else "mast.csv"
    (tmp_path / name).write_bytes(gzip.compress(text) if packed else text)
    with pytest.raises(StudyError, match="line 3: there is a NUL byte"):
        read_station(settings(files=[name]), tmp_path)


@pytest.mark.parametrize("name", ["mast.csv", "mast.csv.gz"])
def test_a_text_that_is_too_large_is_refused_before_it_fills_the_memory(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, name: str
):
    monkeypatch.setattr(text_source, "LARGEST_TEXT", 1000)
    text = "\n".join([HEADER] + [ROWS[0]] * 100).encode()
    (tmp_path / name).write_bytes(gzip.compress(text) if name.endswith("gz") else text)
    with pytest.raises(StudyError, match=r"larger than .* Split it by year"):
        read_station(settings(files=[name]), tmp_path)


def test_a_2_gb_file_is_refused_at_once(tmp_path: Path):
    with (tmp_path / "mast.csv").open("wb") as stream:
        stream.write(HEADER.encode() + b"\n")
        stream.truncate(2_000_000_000)  # sparse: takes no room
    with pytest.raises(StudyError, match=r"the text is larger than 1\.2 GB"):
        read_station(settings(), tmp_path)


def test_a_damaged_archive_is_refused(tmp_path: Path):
    whole = gzip.compress("\n".join([HEADER, *ROWS * 50]).encode())
    (tmp_path / "mast.csv.gz").write_bytes(whole[: len(whole) // 2])
    (tmp_path / "mast.zip").write_bytes(b"PK\x03\x04 no archive")
    (tmp_path / "mast.parquet").write_bytes(b"PAR1 no table")
    for name in ("mast.csv.gz", "mast.zip"):
        with pytest.raises(StudyError, match="cannot be unpacked"):
            read_station(settings(files=[name]), tmp_path)
    with pytest.raises(StudyError, match="cannot be read as Parquet"):
        read_station(settings(files=["mast.parquet"]), tmp_path)


def test_a_channel_without_a_value_is_refused(tmp_path: Path):
    write(tmp_path, *(row.rsplit(",", 1)[0] + "," for row in ROWS))
    with pytest.raises(StudyError, match=r"not one value in 'T5' \(temperature_5\)"):
        read_station(settings(), tmp_path)


@pytest.mark.parametrize("stamp", ["1600-01-01 00:00", "2099-01-01 00:00", "9999-12-31 23:50"])
def test_stamps_that_cannot_be_are_refused_or_left_out(tmp_path: Path, stamp: str):
    write(tmp_path, *ROWS, f"{stamp},5,10,1")
    with pytest.raises(StudyError, match=f"line 5: 1 stamps cannot be: line 5 has {stamp}"):
        read_station(settings(), tmp_path)
    if stamp > "2026":
        station = settings(use_until=dt.date(2030, 1, 1))
        reading = read_station(station, tmp_path)
        assert reading.set_aside["reason"].tolist() == ["outside use_from to use_until"]


def test_rows_of_a_clock_that_was_not_set_are_refused_or_left_out(tmp_path: Path):
    rows = [
        f"2026-01-01 {hour:02d}:{minute}0,5,{hour}{minute},1"
        for hour in range(8)
        for minute in range(6)
    ]
    write(tmp_path, "1970-01-01 00:10,5,1,1", "1970-01-01 00:20,5,1,1", *rows)
    with pytest.raises(StudyError, match=r"2 rows lie before a gap from 1970-01-01 00:20") as met:
        read_station(settings(), tmp_path)
    assert "use_from = 2026-01-01" in str(met.value)
    reading = read_station(settings(use_from=dt.date(2026, 1, 1)), tmp_path)
    assert (reading.rows_read, reading.rows_kept) == (50, 48)


def test_a_stamp_column_of_numbers_is_read_as_text(tmp_path: Path):
    write(tmp_path, "202601010010,1,1,1", "202601010020,1,1,1")
    assert read_station(settings(time_format="%Y%m%d%H%M"), tmp_path).rows_kept == 2


def test_quoted_stamps_and_fields_with_a_delimiter_are_read(tmp_path: Path):
    rows = [row.replace("2026", '"2026', 1).replace(",", '",', 1) + ',"a, b"' for row in ROWS]
    write(tmp_path, *rows, header=HEADER + ",note")
    assert read_station(settings(), tmp_path).rows_kept == 3


def test_old_line_ends_are_read(tmp_path: Path):
    for end in (b"\r\n", b"\r"):
        text = end.join(line.encode() for line in [HEADER, *ROWS])
        (tmp_path / "mast.csv").write_bytes(text)
        assert read_station(settings(), tmp_path).rows_kept == 3


def test_columns_set_apart_by_spaces_are_read(tmp_path: Path):
    rows = [row.replace(" ", "T").replace(",", "   ") for row in ROWS[:2]]
    write(tmp_path, *rows, header="time  Spd80 Dir78      T5")
    assert read_station(settings(delimiter="whitespace"), tmp_path).rows_kept == 2


def test_parquet_with_a_text_or_infinite_column_is_refused(tmp_path: Path):
    stamps = pa.array([row.split(",")[0] for row in ROWS])
    columns = {"time": stamps, "Spd80": ["5", "6", "x"], "Dir78": [1, 2, 3], "T5": [1.0, 2.0, 3.0]}
    pq.write_table(pa.table(columns), tmp_path / "mast.parquet")
    with pytest.raises(StudyError, match="'Spd80' has the type string"):
        read_station(settings(files=["mast.parquet"]), tmp_path)
    columns["Spd80"] = [1.0, float("inf"), 2.0]
    pq.write_table(pa.table(columns), tmp_path / "mast.parquet")
    with pytest.raises(StudyError, match="infinite in 1 rows, first in row 2"):
        read_station(settings(files=["mast.parquet"]), tmp_path)


def test_decimal_commas_are_named_and_nothing_else_is_offered(tmp_path: Path):
    rows = [row.replace(",", ";").replace(".", ",") for row in ROWS]
    write(tmp_path, *rows, "2026-01-01 00:40;NAN;1;1", header=HEADER.replace(",", ";"))
    with pytest.raises(StudyError, match=r"6 fields are not a number.* Write decimal = \",\"\.$"):
        read_station(settings(delimiter=";"), tmp_path)
    station = settings(delimiter=";", decimal=",", missing=["NAN"])
    assert read_station(station, tmp_path).rows_kept == 4


def test_decimal_points_are_named_and_nothing_else_is_offered(tmp_path: Path):
    write(tmp_path, *(row.replace(",", ";") for row in ROWS), header=HEADER.replace(",", ";"))
    with pytest.raises(StudyError, match=r"5 fields are not a number.* Write decimal = \"\.\"\.$"):
        read_station(settings(delimiter=";", decimal=","), tmp_path)


def test_one_comma_among_points_is_a_fault_of_the_file(tmp_path: Path):
    write(tmp_path, ROWS[0], '2026-01-01 00:20,"6,0",10,1', ROWS[2])
    with pytest.raises(StudyError, match=r'Write missing = \["6,0"\] if these mean no value'):
        read_station(settings(), tmp_path)


@pytest.mark.parametrize("under", [["TS,m/s,Deg,Deg C"], ["TS,m/s,Deg,Deg C", ",Avg,WVc,Avg"]])
def test_lines_of_units_under_the_header_are_told_from_codes(tmp_path: Path, under: list[str]):
    write(tmp_path, *under, *ROWS)
    with pytest.raises(StudyError) as met:
        read_station(settings(), tmp_path)
    assert f"Write skip_rows_after_header = {len(under)}" in str(met.value)
    assert "missing" not in str(met.value)
    assert read_station(settings(skip_rows_after_header=len(under)), tmp_path).rows_kept == 3
    book = openpyxl.Workbook()
    for row in [HEADER, *under, *ROWS]:
        book.active.append([_cell(text) for text in row.split(",")])
    book.save(tmp_path / "mast.xlsx")
    with pytest.raises(StudyError, match=f"Write skip_rows_after_header = {len(under)}"):
        read_station(settings(files=["mast.xlsx"]), tmp_path)


def _cell(text: str) -> float | str | None:
    with contextlib.suppress(ValueError):
        return float(text)
    return text or None


def test_a_line_without_stamp_under_the_header_is_told_from_a_wrong_time_format(tmp_path: Path):
    write(tmp_path, "-,,,", *ROWS)
    with pytest.raises(StudyError, match="units, write skip_rows_after_header = 1; if not, write"):
        read_station(settings(), tmp_path)
    write(tmp_path, *ROWS, "-,,,")
    with pytest.raises(StudyError, match=r"line 5 '-'.* Write time_format"):
        read_station(settings(), tmp_path)


def ten_minutes(first: str, count: int) -> list[str]:
    stamps = pd.date_range(first, periods=count, freq="10min")
    return [f"{stamp:%Y-%m-%d %H:%M},5,{at},1" for at, stamp in enumerate(stamps)]


@pytest.mark.parametrize("day", ["2025-07-01", "2025-10-25"])  # the second with a clock change
def test_files_that_overlap_are_both_named(tmp_path: Path, day: str):
    write(tmp_path, *ten_minutes(day, 400), name="a.csv")
    write(tmp_path, *ten_minutes(f"{day} 12:00", 400), name="b.csv")
    files = ["a.csv", "b.csv"]
    with pytest.raises(StudyError) as met:
        read_station(settings(files=files), tmp_path)
    message = str(met.value)
    assert f"two files overlap from {day} 12:00 to " in message
    assert f"a.csv runs from {day} 00:00 to " in message
    assert f"b.csv from {day} 12:00 to " in message
    assert "328 stamps stand in both" in message
    assert 'unsorted_stamps = "sort" and repeated_stamps = "keep_first"' in message
    station = settings(files=files, unsorted_stamps="sort", repeated_stamps="keep_first")
    reading = read_station(station, tmp_path)
    assert (reading.rows_read, reading.rows_kept) == (800, 472)
    assert set(reading.set_aside["file"]) == {"b.csv"}


def test_a_file_that_fills_a_gap_of_another_is_no_double(tmp_path: Path):
    rows = ten_minutes("2025-07-01", 400)
    write(tmp_path, *rows[:100], *rows[200:], name="a.csv")
    write(tmp_path, *rows[100:200], name="b.csv")
    with pytest.raises(StudyError, match=r"0 stamps stand in both.*unsorted_stamps = \"sort\"\. I"):
        read_station(settings(files=["a.csv", "b.csv"]), tmp_path)


FIELD = st.one_of(
    st.sampled_from(["5.0", "", "-999", "NAN", "nan", "inf", " 7 ", '"8"', '"', "1,5", "x", "1e3"]),
    st.floats(-400, 1000).map(str),
    st.text(max_size=4),
)
STAMP = st.one_of(
    st.integers(0, 40).map(lambda at: f"2026-01-01 {at // 6:02d}:{at % 6}0"),
    st.sampled_from(["2026-01-01 00:05", "1970-01-01 00:00", "", "x", "2026-02-30 00:00"]),
)
ROW = st.one_of(
    st.tuples(STAMP, FIELD, FIELD, FIELD).map(",".join),
    st.integers(0, 60).map(lambda at: f"2026-01-01 {at // 6:02d}:{at % 6}0,5,{at},1"),
    st.sampled_from(["", "  ", ",,,", "2026-01-01 00:10,5", "2026-01-01 00:10,5,1,1,1", "\r"]),
)


#: Arguments of `rows_add_up` for any file; a longer run is in tests/fuzz.
ANY_ROWS = {
    "rows": st.lists(ROW, max_size=12),
    "ordered": st.booleans(),
    "forgiving": st.booleans(),
    "end": st.sampled_from(["\n", "\r\n", ""]),
}


def rows_add_up(folder: Path, rows: list[str], ordered: bool, forgiving: bool, end: str) -> None:
    """Whatever the file holds, it is refused with a message or every row is accounted for."""
    rows = sorted(rows) if ordered else rows
    content = (end or "\n").join([HEADER, *rows]) + end
    (folder / "mast.csv").write_bytes(content.encode("utf-8", "surrogatepass"))
    more = {}
    if forgiving:
        more = {
            "repeated_stamps": "keep_first",
            "unsorted_stamps": "sort",
            "broken_rows": "set_aside",
            "missing": ["NAN", "-999", "nan", "inf", "x"],
        }
    try:
        reading = read_station(settings(**more), folder)
    except StudyError:
        return
    assert reading.rows_read == reading.rows_kept + len(reading.set_aside)
    assert reading.rows_kept == len(reading.frame)
    assert reading.frame.index.is_monotonic_increasing
    assert reading.frame.index.is_unique
    assert reading.rows_kept <= reading.expected_count


def bytes_are_read_or_refused(folder: Path, content: bytes) -> None:
    """Whatever stands under the header, there is a record or a message."""
    (folder / "mast.csv").write_bytes(HEADER.encode() + b"\n" + content)
    with contextlib.suppress(StudyError):
        read_station(settings(), folder)


@hypothesis_settings(
    max_examples=400, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(**ANY_ROWS)
def test_rows_in_are_rows_kept_and_rows_set_aside_for_any_file(tmp_path: Path, **given_rows: Any):
    rows_add_up(tmp_path, **given_rows)


@hypothesis_settings(
    max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(content=st.binary(max_size=200))
def test_any_bytes_at_all_are_refused_with_a_message_or_read(tmp_path: Path, content: bytes):
    bytes_are_read_or_refused(tmp_path, content)
