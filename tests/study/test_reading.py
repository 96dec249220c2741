"""Reading a station's files: what comes in, and what is refused with which words."""

from __future__ import annotations

import gzip
import hashlib
import zipfile
from pathlib import Path

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from station_examples import HEADER, ROWS, channel, settings, write

from windkit.study.errors import StudyError
from windkit.study.reading import read_station


def test_stamps_at_the_end_become_starts_in_utc(tmp_path: Path):
    write(tmp_path, *ROWS)
    reading = read_station(settings(), tmp_path)
    # 00:10 at the end of ten minutes, one hour east: the interval began at 23:00 UTC.
    assert reading.frame.index[0] == pd.Timestamp("2025-12-31 23:00", tz="UTC")
    assert reading.frame.index.name == "time"
    assert (reading.rows_read, reading.rows_kept, reading.expected_count) == (3, 3, 3)
    assert (
        reading.sha256["mast.csv"]
        == hashlib.sha256((tmp_path / "mast.csv").read_bytes()).hexdigest()
    )
    assert list(reading.frame.dtypes) == [np.float64] * 3


def test_stamps_at_the_start_move_by_the_zone_only(tmp_path: Path):
    write(tmp_path, *ROWS)
    reading = read_station(settings(stamp="start", utc_offset_h=-3.5), tmp_path)
    assert reading.frame.index[0] == pd.Timestamp("2026-01-01 03:40", tz="UTC")


def test_units_are_converted_once(tmp_path: Path):
    write(tmp_path, "2026-01-01 00:10,10,90,0", "2026-01-01 00:20,20,90,-40")
    channels = [
        channel("speed_80", "Spd80", "wind_speed", "kn", 80.0),
        channel("direction_78", "Dir78", "wind_from_direction", "deg", 78.0),
        channel("temperature_5", "T5", "air_temperature", "degC", 5.0),
    ]
    frame = read_station(settings(channels=channels), tmp_path).frame
    # 1 knot = 1852/3600 m/s exactly (SI brochure, non-SI units); 0 degC = 273.15 K.
    assert frame["speed_80"].tolist() == pytest.approx([18520 / 3600, 37040 / 3600], rel=1e-12)
    assert frame["temperature_5"].tolist() == pytest.approx([273.15, 233.15])


def test_a_spread_of_temperature_takes_no_offset(tmp_path: Path):
    write(tmp_path, "2026-01-01 00:10,10,90,1.8", "2026-01-01 00:20,20,90,3.6")
    channels = [
        channel("speed_80", "Spd80", "wind_speed", "m/s", 80.0),
        channel("sd_5", "T5", "air_temperature", "degF", 5.0, statistic="sd"),
    ]
    frame = read_station(
        settings(channels=channels, direction_reference=None, main_wind_direction=None), tmp_path
    ).frame
    assert frame["sd_5"].tolist() == pytest.approx([1.0, 2.0])


def test_the_certificate_replaces_what_the_logger_applied(tmp_path: Path):
    # IEA Wind Task 43 data model, traps: (recorded - 0.21) / 0.0462 * 0.0459 + 0.23.
    write(tmp_path, "2026-01-01 00:10,9.45,90,1", "2026-01-01 00:20,0.21,90,1")
    slopes = {
        "applied_slope": 0.0462,
        "applied_offset": 0.21,
        "certificate_slope": 0.0459,
        "certificate_offset": 0.23,
    }
    channels = [
        channel("speed_80", "Spd80", "wind_speed", "m/s", 80.0, **slopes),
        channel("spread_80", "T5", "wind_speed", "m/s", 80.0, statistic="sd", **slopes),
    ]
    frame = read_station(
        settings(channels=channels, direction_reference=None, main_wind_direction=None), tmp_path
    ).frame
    assert frame["speed_80"].tolist() == pytest.approx([200 * 0.0459 + 0.23, 0.23])
    assert frame["spread_80"].tolist() == pytest.approx([0.0459 / 0.0462] * 2)


def test_a_swapped_sensor_takes_its_own_certificate(tmp_path: Path):
    write(tmp_path, *ROWS)
    first = {
        "applied_slope": 1.0,
        "applied_offset": 0.0,
        "certificate_slope": 2.0,
        "certificate_offset": 0.0,
    }
    sensors = [
        {"date_from": pd.Timestamp("2025-01-01").to_pydatetime(), "serial": "A-1", **first},
        {"date_from": pd.Timestamp("2026-01-01 00:20").to_pydatetime(), "serial": "A-2"},
    ]
    channels = [channel("speed_80", "Spd80", "wind_speed", "m/s", 80.0, sensors=sensors)]
    station = settings(channels=channels, direction_reference=None, main_wind_direction=None)
    assert read_station(station, tmp_path).frame["speed_80"].tolist() == [10.0, 6.0, 0.3]
    late = [{**sensors[1], "serial": "A-3"}]
    channels = [channel("speed_80", "Spd80", "wind_speed", "m/s", 80.0, sensors=late)]
    station = settings(channels=channels, direction_reference=None, main_wind_direction=None)
    with pytest.raises(StudyError, match=r"Add the sensor"):
        read_station(station, tmp_path)


def test_magnetic_bearings_turn_by_the_declination_and_wrap(tmp_path: Path):
    write(tmp_path, *ROWS)
    station = settings(direction_reference="magnetic", declination_deg=12.0)
    assert read_station(station, tmp_path).frame["direction_78"].tolist() == [2.0, 22.0, 32.0]


def test_a_bearing_of_360_is_0_and_a_code_of_999_is_not_wrapped(tmp_path: Path):
    write(
        tmp_path,
        "2026-01-01 00:10,5,360,1",
        "2026-01-01 00:20,5,999,1",
        "2026-01-01 00:30,5,-90,1",
    )
    bearings = read_station(settings(), tmp_path).frame["direction_78"].tolist()
    assert bearings == [0.0, 999.0, 270.0]


def test_declared_texts_mean_no_value_and_numbers_in_any_spelling(tmp_path: Path):
    write(
        tmp_path,
        "2026-01-01 00:10,NAN,-999,1",
        "2026-01-01 00:20,6.0,-999.00,",
        "2026-01-01 00:30,6.0,10, NAN",
    )
    frame = read_station(settings(missing=["NAN", "-999"]), tmp_path).frame
    assert frame.isna().sum().to_dict() == {"speed_80": 1, "direction_78": 2, "temperature_5": 2}


@pytest.mark.parametrize("text", ["NAN", "nan", "inf", "n/a", "5,1", "1_0", "True", "5 m/s", "-"])
def test_a_text_in_a_number_column_is_refused_with_line_and_remedy(tmp_path: Path, text: str):
    write(tmp_path, ROWS[0], f'2026-01-01 00:20,"{text}",10,1', ROWS[2])
    with pytest.raises(StudyError) as met:
        read_station(settings(), tmp_path)
    message = str(met.value)
    assert message.startswith("mast.csv, line 3: 1 field is not a number")
    assert f"line 3 has '{text}' in 'Spd80'" in message
    assert f'missing = ["{text}"]' in message


def test_semicolons_and_decimal_commas(tmp_path: Path):
    rows = ("01.02.2026 00:10;5,5;350;1,5", "01.02.2026 00:20;6,25;10;-1,5")
    write(tmp_path, *rows, header=HEADER.replace(",", ";"))
    station = settings(delimiter=";", decimal=",", time_format="%d.%m.%Y %H:%M")
    frame = read_station(station, tmp_path).frame
    assert frame["speed_80"].tolist() == [5.5, 6.25]
    assert frame.index[0] == pd.Timestamp("2026-01-31 23:00", tz="UTC")


def test_a_header_block_and_lines_under_the_header(tmp_path: Path):
    block = f"Logger 7\nplace, Skerra\n{HEADER}\n,m/s,deg,degC\n,Avg,Avg,Avg"
    write(tmp_path, *ROWS, header=block)
    frame = read_station(settings(skip_rows=2, skip_rows_after_header=2), tmp_path).frame
    assert len(frame) == 3
    with pytest.raises(StudyError, match="Line 3 has the declared names: write skip_rows = 2"):
        read_station(settings(skip_rows=1), tmp_path)


def test_gzip_zip_and_parquet_hold_the_same_record(tmp_path: Path):
    write(tmp_path, *ROWS)
    text = (tmp_path / "mast.csv").read_bytes()
    (tmp_path / "mast.csv.gz").write_bytes(gzip.compress(text))
    with zipfile.ZipFile(tmp_path / "mast.zip", "w") as archive:
        archive.writestr("inside.csv", text)
    pq.write_table(
        pa.table(
            {
                "time": pd.to_datetime([row.split(",")[0] for row in ROWS]),
                "Spd80": [5.0, 6.0, 0.3],
                "Dir78": [350, 10, 20],
                "T5": [1.5, 1.4, None],
            }
        ),
        tmp_path / "mast.parquet",
    )
    expected = read_station(settings(), tmp_path).frame
    for name in ("mast.csv.gz", "mast.zip", "mast.parquet"):
        pd.testing.assert_frame_equal(
            read_station(settings(files=[name]), tmp_path).frame, expected
        )


def test_a_zip_of_two_files_is_refused(tmp_path: Path):
    with zipfile.ZipFile(tmp_path / "mast.zip", "w") as archive:
        archive.writestr("a.csv", "x")
        archive.writestr("b.csv", "x")
    with pytest.raises(StudyError, match=r"the archive holds 2 files: a.csv, b.csv"):
        read_station(settings(files=["mast.zip"]), tmp_path)


def test_several_files_are_one_record_in_the_order_given(tmp_path: Path):
    write(tmp_path, ROWS[0], name="a.csv")
    write(tmp_path, ROWS[1], ROWS[2], name="b.csv")
    assert read_station(settings(files=["a.csv", "b.csv"]), tmp_path).rows_kept == 3
    with pytest.raises(StudyError, match=r"a.csv line 2 has 2026-01-01 00:10 after"):
        read_station(settings(files=["b.csv", "a.csv"]), tmp_path)
    station = settings(files=["b.csv", "a.csv"], unsorted_stamps="sort")
    frame = read_station(station, tmp_path).frame
    assert frame["speed_80"].tolist() == [5.0, 6.0, 0.3]


def test_the_wrong_delimiter_is_named_with_the_one_that_would_split(tmp_path: Path):
    write(tmp_path, *(row.replace(",", ";") for row in ROWS), header=HEADER.replace(",", ";"))
    with pytest.raises(StudyError, match=r'";" would split this line into 4.*delimiter = ";"'):
        read_station(settings(), tmp_path)


def test_a_column_that_is_not_there_is_named_with_the_closest(tmp_path: Path):
    write(tmp_path, *ROWS, header="time,Spd_80,Dir78,T5")
    with pytest.raises(StudyError, match=r"no column 'Spd80'; the columns are .*Write 'Spd_80'"):
        read_station(settings(), tmp_path)


def test_a_declared_column_that_stands_twice_is_refused(tmp_path: Path):
    write(tmp_path, *(row + ",1" for row in ROWS), header=HEADER + ",Spd80")
    with pytest.raises(StudyError, match="'Spd80' as columns 2 and 5"):
        read_station(settings(), tmp_path)


def test_a_repeated_stamp_is_refused_or_set_aside_and_listed(tmp_path: Path):
    write(tmp_path, ROWS[0], ROWS[1], ROWS[1], ROWS[2])
    with pytest.raises(StudyError, match=r"mast.csv line 4 has 2026-01-01 00:20 again"):
        read_station(settings(), tmp_path)
    reading = read_station(settings(repeated_stamps="keep_first"), tmp_path)
    assert (reading.rows_read, reading.rows_kept) == (4, 3)
    assert reading.set_aside.to_dict("records") == [
        {
            "file": "mast.csv",
            "line": 4,
            "stamp": "2026-01-01 00:20",
            "reason": "stamp stands twice, first row kept",
        }
    ]


def test_blank_lines_are_no_rows_but_count_as_lines(tmp_path: Path):
    write(tmp_path, ROWS[0], "", ROWS[1], ROWS[1])
    reading = read_station(settings(repeated_stamps="keep_first"), tmp_path)
    assert reading.rows_read == 3
    assert reading.set_aside["line"].tolist() == [5]


def test_a_stamp_off_the_interval_is_refused(tmp_path: Path):
    write(tmp_path, *ROWS, "2026-01-01 00:37,1,1,1", "2026-01-01 00:50,1,1,1")
    with pytest.raises(StudyError, match=r"mast.csv line 5 has 2026-01-01 00:37"):
        read_station(settings(), tmp_path)


def test_a_declared_interval_that_the_stamps_do_not_have_is_refused(tmp_path: Path):
    write(tmp_path, *ROWS)
    for wrong in (1.0, 5.0, 60.0, 15.0):
        with pytest.raises(StudyError, match="commonest step between stamps is 10 minutes"):
            read_station(settings(interval_min=wrong), tmp_path)


def test_a_gap_counts_in_the_expected_intervals(tmp_path: Path):
    write(tmp_path, *ROWS, "2026-01-01 02:00,1,1,1", "2026-01-01 02:10,1,1,1")
    reading = read_station(settings(), tmp_path)
    assert (reading.rows_kept, reading.expected_count) == (5, 13)
    absent = reading.absent
    assert absent["count"].tolist() == [8]
    # Row 00:30 ends at 23:30 UTC; row 02:00 begins at 00:50 UTC.
    assert absent["from"].iloc[0] == pd.Timestamp("2025-12-31 23:30", tz="UTC")
    assert absent["to"].iloc[0] == pd.Timestamp("2026-01-01 00:50", tz="UTC")


@pytest.mark.parametrize("stamp", ["2026-02-30 00:10", "yesterday", "", "05/01/2026 00:10"])
def test_an_unreadable_stamp_is_refused_with_its_line(tmp_path: Path, stamp: str):
    write(tmp_path, ROWS[0], f"{stamp},5,10,1")
    with pytest.raises(StudyError, match=f"line 3: 1 of 2 stamps cannot be read: .*'{stamp}'"):
        read_station(settings(), tmp_path)


def test_a_zone_behind_the_stamp_is_the_declared_one(tmp_path: Path):
    rows = [row.replace(",", "+01:00,", 1) for row in ROWS]
    write(tmp_path, *rows)
    assert read_station(settings(), tmp_path).frame.index[0].hour == 23
    with pytest.raises(StudyError, match=r"carry the zones \+01:00, utc_offset_h is 0"):
        read_station(settings(utc_offset_h=0.0), tmp_path)
    write(tmp_path, rows[0], rows[1].replace("+01", "+02"), rows[2])
    with pytest.raises(StudyError, match=r"line 3: stamps carry the zones \+01:00, \+02:00"):
        read_station(settings(), tmp_path)


def test_paths_stay_inside_the_study(tmp_path: Path):
    study = tmp_path / "study"
    study.mkdir()
    write(tmp_path, *ROWS)
    (study / "link.csv").symlink_to(tmp_path / "mast.csv")
    for path, words in (
        (str(tmp_path / "mast.csv"), "the path is absolute"),
        ("../mast.csv", "climbs out"),
        ("C:\\data\\mast.csv", "the path is absolute"),
        ("link.csv", "a link that leaves the study"),
        ("none.csv", "it is not there"),
        (".", "a folder, not a file"),
    ):
        with pytest.raises(StudyError, match=words):
            read_station(settings(files=[path]), study)


@pytest.mark.parametrize("content", [b"", b"\n\n", b"\xef\xbb\xbf"])
def test_an_empty_file_is_refused(tmp_path: Path, content: bytes):
    (tmp_path / "mast.csv").write_bytes(content)
    with pytest.raises(StudyError, match="the file is empty"):
        read_station(settings(), tmp_path)


def test_a_header_without_rows_or_with_one_row_is_refused(tmp_path: Path):
    write(tmp_path)
    with pytest.raises(StudyError, match="0 of 0 rows are left"):
        read_station(settings(), tmp_path)
    write(tmp_path, ROWS[0])
    with pytest.raises(StudyError, match="1 of 1 rows are left"):
        read_station(settings(), tmp_path)
