"""Drafts of a station section, from a data file and from an open station description."""

from __future__ import annotations

import gzip
import json
import tomllib
from pathlib import Path

import pandas as pd
import pytest
from hypothesis import HealthCheck, given
from hypothesis import settings as hypothesis_settings
from hypothesis import strategies as st

from windkit.study.drafting import draft_from_file, draft_station
from windkit.study.errors import StudyError
from windkit.study.reading import read_station
from windkit.study.station_description import draft_from_description, station_names
from windkit.study.station_draft import OPEN, draft_text
from windkit.study.stations import StationSettings

ANSWERS = {
    "name": "Skerra",
    "utc_offset_h": 1.0,
    "stamp": "end",
    "calm_below_m_s": 0.5,
    "direction_reference": "true",
}
SEMICOLONS = "\n".join(
    [
        "Logger 7;;;",
        "Site Skerra;;;",
        "Date;Wind speed 80 m [m/s];Wind dir 78m;Temp 5m;note",
        ";m/s;deg;degC;",
        *(
            f"{day:02d}.02.2026 {hour:02d}:{ten}0;{4 + hour // 10},{hour % 10};{hour}{ten};-1,5;ok"
            for day in range(1, 20)
            for hour in range(24)
            for ten in range(6)
        ),
    ]
)


def answered(text: str, more: dict[str, object] | None = None) -> StationSettings:
    """The draft with its open questions answered, as the analyst would."""
    station = tomllib.loads(text)["mast"]
    station |= {key: value for key, value in ANSWERS.items() if station.get(key) == OPEN}
    station |= more or {}
    return StationSettings.model_validate(station)


def test_a_drafted_file_is_refused_until_its_questions_are_answered_and_then_read(tmp_path: Path):
    (tmp_path / "mast.csv").write_text(SEMICOLONS + "\n", encoding="utf-8")
    text = draft_station(tmp_path / "mast.csv", written="mast.csv")
    assert text.count("# ASK") == len(draft_from_file(tmp_path / "mast.csv").questions)
    with pytest.raises(ValueError, match="utc_offset_h"):
        StationSettings.model_validate(tomllib.loads(text)["mast"])
    station = answered(text)
    assert (station.delimiter, station.decimal, station.skip_rows) == (";", ",", 2)
    assert station.skip_rows_after_header == 1
    assert station.interval_min == 10.0
    assert station.time_format == "%d.%m.%Y %H:%M"
    assert [c.unit for c in station.channels] == ["m/s", "deg", "degC"]
    assert [c.height_m for c in station.channels] == [80.0, 78.0, 5.0]
    frame = read_station(station, tmp_path).frame
    assert len(frame) == 19 * 144
    assert frame.iloc[0].tolist() == pytest.approx([4.0, 0.0, 271.65])
    assert frame.index[0] == pd.Timestamp("2026-01-31 22:50", tz="UTC")


def test_day_or_month_first_is_asked(tmp_path: Path):
    rows = [f"0{day}/0{day}/2026 00:00,{day}.5" for day in range(1, 9)]
    (tmp_path / "a.csv").write_text("\n".join(["when,speed_10", *rows, ""]))
    draft = draft_from_file(tmp_path / "a.csv")
    assert draft.station["time_format"] == OPEN
    assert "%d/%m/%Y %H:%M, %m/%d/%Y %H:%M" in draft.remarks["time_format"]


def test_codes_are_proposed_but_a_pressure_of_999_is_none(tmp_path: Path):
    rows = [
        f"2026-01-01 00:{at}0,{'NAN' if at == 2 else 5.5},{[998, 999, 1001, 1000, 999, 997][at]},"
        f"{-999 if at == 3 else 90 + at}"
        for at in range(6)
    ]
    with gzip.open(tmp_path / "a.csv.gz", "wt") as stream:
        stream.write("\n".join(["time,speed 80,pressure,direction", *rows, ""]))
    assert sorted(draft_from_file(tmp_path / "a.csv.gz").station["missing"]) == ["-999", "NAN"]


def test_columns_that_say_nothing_and_headers_that_stand_twice_are_noted(tmp_path: Path):
    rows = [f"2026-01-01 00:{at}0,{at}.5,{at},{at}" for at in range(6)]
    (tmp_path / "a.csv").write_text("\n".join(["time,speed 80,xq,xq", *rows, ""]))
    notes = " ".join(draft_from_file(tmp_path / "a.csv").notes)
    assert "column 'xq' is not drafted" in notes
    assert "headers stand twice" in notes


@pytest.mark.parametrize("content", ["", "no table at all\n", "a,b\nc,d\n", "1\n2\n3\n"])
def test_a_file_without_a_table_is_refused(tmp_path: Path, content: str):
    (tmp_path / "a.csv").write_text(content)
    with pytest.raises(StudyError, match="no table is found"):
        draft_station(tmp_path / "a.csv")


# IEA Wind Task 43 data model: an example valid against release 1.3.0-2024.03.
DESCRIPTION = {
    "author": "A. Surveyor",
    "organisation": "Skerra Moor Community Trust",
    "date": "2024-05-02",
    "version": "1.3.0-2024.03",
    "plant_type": "onshore_wind",
    "measurement_location": [
        {
            "name": "SKM-M1",
            "latitude_ddeg": 59.5383,
            "longitude_ddeg": -3.0,
            "measurement_station_type_id": "mast",
            "logger_main_config": [
                {
                    "logger_oem_id": "Other",
                    "logger_serial_number": "L-0001",
                    "date_from": "2022-06-01T00:00:00",
                    "date_to": None,
                    "offset_from_utc_hrs": 0,
                    "averaging_period_minutes": 10,
                    "timestamp_is_end_of_period": False,
                    "encryption_pin_or_key": "1234",
                }
            ],
            "measurement_point": [
                {
                    "name": "Spd_60m_N",
                    "measurement_type_id": "wind_speed",
                    "height_m": 60.2,
                    "height_reference_id": "ground_level",
                    "logger_measurement_config": [
                        {
                            "slope": 0.0462,
                            "offset": 0.21,
                            "measurement_units_id": "m/s",
                            "height_m": 60.0,
                            "date_from": "2022-06-01T00:00:00",
                            "date_to": None,
                            "column_name": [
                                {"column_name": "Spd60N_avg", "statistic_type_id": "avg"},
                                {"column_name": "Spd60N_sd", "statistic_type_id": "sd"},
                                {"column_name": "Spd60N_n", "statistic_type_id": "count"},
                            ],
                        }
                    ],
                    "sensor": [
                        {
                            "serial_number": "A-17",
                            "oem": "any maker's text",
                            "date_from": "2022-06-01T00:00:00",
                            "date_to": "2023-02-01T00:00:00",
                            "calibration": [{"slope": 0.0459, "offset": 0.23}],
                        },
                        {
                            "serial_number": "A-18",
                            "date_from": "2023-02-01T00:00:00",
                            "date_to": "2100-01-01T00:00:00",
                            "calibration": [{"sensitivity": 21.74}],
                        },
                    ],
                    "mounting_arrangement": [
                        {
                            "mounting_type_id": "side",
                            "boom_orientation_deg": 320,
                            "orientation_reference_id": "true_north",
                            "date_from": "2022-06-01T00:00:00",
                            "date_to": None,
                        }
                    ],
                },
                {
                    "name": "Dir_58m",
                    "measurement_type_id": "wind_direction",
                    "height_m": 58.0,
                    "logger_measurement_config": [
                        {
                            "offset": -4.0,
                            "measurement_units_id": "deg",
                            "date_from": "2022-06-01T00:00:00",
                            "date_to": "2100-01-01T00:00:00",
                            "column_name": [
                                {"column_name": "Dir58_avg", "statistic_type_id": "avg"}
                            ],
                        }
                    ],
                },
            ],
        }
    ],
}


def described(tmp_path: Path, document: object = DESCRIPTION) -> Path:
    path = tmp_path / "station.json"
    path.write_text(json.dumps(document), encoding="utf-8")
    return path


def test_a_description_fills_the_section_and_asks_for_the_rest(tmp_path: Path):
    path = described(tmp_path)
    assert station_names(path) == ["SKM-M1"]
    draft = draft_from_description(path, files=["mast.csv"])
    assert draft.questions == ["time_column", "calm_below_m_s", "direction_reference"]
    station = answered(draft_text(draft), {"time_column": "time"})
    assert (station.utc_offset_h, station.interval_min, station.stamp) == (0.0, 10.0, "start")
    speed, spread, vane = station.channels
    assert (speed.column, speed.statistic, speed.height_m) == ("Spd60N_avg", "mean", 60.2)
    assert speed.boom_bearing_deg == 320.0
    assert [sensor.serial for sensor in speed.sensors] == ["A-17", "A-18"]
    first, second = speed.sensors
    assert (first.applied_slope, first.certificate_slope) == (0.0462, 0.0459)
    assert second.certificate_slope == pytest.approx(1 / 21.74)
    assert second.certificate_offset == 0.0
    assert spread.statistic == "sd"
    assert (vane.quantity, vane.unit) == ("wind_from_direction", "deg")
    assert "is it ground" in draft.remarks["2.height_m"]
    assert any("Spd60N_n" in note for note in draft.notes)
    assert "1234" not in draft_text(draft)


def test_old_spellings_and_open_ends_are_read(tmp_path: Path):
    old = json.loads(json.dumps(DESCRIPTION).replace("logger_measurement_config", "sensor_config"))
    draft = draft_from_description(described(tmp_path, old))
    assert [c["column"] for c in draft.channels] == ["Spd60N_avg", "Spd60N_sd", "Dir58_avg"]


def test_what_a_description_leaves_null_is_asked(tmp_path: Path):
    document = json.loads(json.dumps(DESCRIPTION))
    place = document["measurement_location"][0]
    place["logger_main_config"][0] |= {
        "offset_from_utc_hrs": None,
        "timestamp_is_end_of_period": None,
    }
    place["measurement_point"][0]["height_m"] = None
    place["measurement_point"][0]["logger_measurement_config"][0]["measurement_units_id"] = None
    questions = draft_from_description(described(tmp_path, document)).questions
    for asked in ("utc_offset_h", "stamp", "channels 1 height_m", "channels 1 unit", "files"):
        assert asked in questions or asked == "files"


def test_a_certificate_without_a_slope_in_the_logger_is_not_applied(tmp_path: Path):
    document = json.loads(json.dumps(DESCRIPTION))
    config = document["measurement_location"][0]["measurement_point"][0]
    del config["logger_measurement_config"][0]["slope"]
    draft = draft_from_description(described(tmp_path, document))
    assert "certificate_slope" not in draft_text(draft)
    assert any("a missing slope is not 1" in note for note in draft.notes)


@pytest.mark.parametrize(
    ("document", "words"),
    [
        ([], "the document is a list"),
        ({"measurement_location": []}, "measurement_location is empty"),
        ({"other": 1}, "no list measurement_location"),
    ],
)
def test_other_documents_are_refused(tmp_path: Path, document: object, words: str):
    with pytest.raises(StudyError, match=words):
        draft_from_description(described(tmp_path, document))
    (tmp_path / "broken.json").write_text("{")
    with pytest.raises(StudyError, match="cannot be read as JSON"):
        station_names(tmp_path / "broken.json")


def test_one_of_several_stations_has_to_be_named(tmp_path: Path):
    document = json.loads(json.dumps(DESCRIPTION))
    document["measurement_location"].append(
        {**document["measurement_location"][0], "name": "SKM-M2"}
    )
    path = described(tmp_path, document)
    with pytest.raises(StudyError, match="it describes 2 stations"):
        draft_from_description(path)
    assert draft_from_description(path, station="SKM-M2").station["name"] == "SKM-M2"
    with pytest.raises(StudyError, match="Name one of: 'SKM-M1', 'SKM-M2'"):
        draft_from_description(path, station="nowhere")


FIELD = st.one_of(
    st.sampled_from(["1.5", "2,5", "-999", "", "NAN", "x", '"', "speed 80 [m/s]", "dir"]),
    st.text(max_size=5),
)
STAMPS = st.sampled_from(["2026-01-01 00:00", "2026-01-01 00:10", "01.02.2026 00:00", "time", ""])
LINES = st.lists(st.tuples(STAMPS, st.lists(FIELD, max_size=4)), max_size=8)


def a_draft_is_toml_or_refused(folder: Path, lines: list[tuple[str, list[str]]], sign: str) -> None:
    """Whatever the file holds, its draft can be read as TOML and leaves a question open."""
    text = "\n".join(sign.join([stamp, *fields]) for stamp, fields in lines)
    (folder / "mast.csv").write_bytes(text.encode("utf-8", "surrogatepass"))
    try:
        draft = draft_from_file(folder / "mast.csv")
    except StudyError:
        return
    section = tomllib.loads(draft_text(draft))["mast"]
    assert section["utc_offset_h"] == OPEN
    with pytest.raises(ValueError):
        StationSettings.model_validate(section)


@hypothesis_settings(
    max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(lines=LINES, sign=st.sampled_from(",;\t"))
def test_any_file_gives_a_draft_in_toml_or_is_refused(tmp_path: Path, lines, sign: str):
    a_draft_is_toml_or_refused(tmp_path, lines, sign)
