"""`sitestudy new DIR --from FILE`: a drafted mast, its questions open until a person answers."""

from __future__ import annotations

import copy
import json
import tomllib
from pathlib import Path

import pytest
from test_drafting import ANSWERS, DESCRIPTION, SEMICOLONS

from windkit.faces.command import main
from windkit.study.reading import read_station
from windkit.study.stations import StationSettings

#: A file of the station that DESCRIPTION describes, with one column that it leaves out.
DESCRIBED = "\n".join(
    [
        "Stamp,Spd60N_avg,Spd60N_sd,Dir58",
        *(f"2022-06-01 0{at // 6}:{at % 6}0,{5 + at % 7}.5,0.8,{at}" for at in range(54)),
        "",
    ]
)


@pytest.fixture
def data(tmp_path: Path) -> Path:
    folder = tmp_path / "sent"
    folder.mkdir()
    return folder


def made(tmp_path: Path, file: Path) -> dict:
    """The mast of a new study that is drafted from the file."""
    assert main(["new", str(tmp_path / "study"), "--from", str(file)]) == 0
    text = (tmp_path / "study" / "study.toml").read_text(encoding="utf-8")
    return tomllib.loads(text)["mast"]


def refused(capsys: pytest.CaptureFixture[str], *arguments: str | Path) -> str:
    capsys.readouterr()
    assert main([str(argument) for argument in arguments]) == 2
    return capsys.readouterr().err


def test_open_questions_are_refused_by_name_and_answered_the_file_is_read(tmp_path, data, capsys):
    (data / "mast.csv").write_text(SEMICOLONS + "\n", encoding="utf-8")
    mast = made(tmp_path, data / "mast.csv")
    assert "5 questions are marked ASK" in capsys.readouterr().out
    copied = tmp_path / "study" / "data" / "mast.csv"
    assert copied.read_bytes() == (data / "mast.csv").read_bytes()
    message = refused(capsys, "run", tmp_path / "study")
    asked = [key for key, value in mast.items() if value == "?"]
    assert sorted(asked) == sorted(ANSWERS)
    for key in asked:
        assert message.count(f"study.toml: mast.{key}: an open question of the draft") == 1
        assert message.count(f"mast.{key}: ") == 1
    assert "site.latitude_deg: not given" in message  # the rest is the template's
    assert mast["missing"] == []  # texts of columns that are not drafted are none of its business
    reading = read_station(StationSettings.model_validate(mast | ANSWERS), tmp_path / "study")
    assert len(reading.frame) == 19 * 144


def test_the_rest_of_the_template_stays(tmp_path, data):
    (data / "mast.csv").write_text(SEMICOLONS + "\n", encoding="utf-8")
    made(tmp_path, data / "mast.csv")
    main(["new", str(tmp_path / "plain")])
    plain, drafted = (
        (tmp_path / name / "study.toml").read_text(encoding="utf-8") for name in ("plain", "study")
    )
    heading = "# --- references"
    assert drafted.split("[mast]")[0].startswith(plain.split("[mast]")[0])
    assert drafted.split(heading)[1] == plain.split(heading)[1]
    assert "# broken_rows = " in drafted  # what else can be said
    assert "Speed80_mean" not in drafted


@pytest.mark.parametrize("given", ["mast.csv", "mast.json"])
def test_a_description_beside_the_file_says_what_was_measured(tmp_path, data, given, capsys):
    (data / "mast.csv").write_text(DESCRIBED, encoding="utf-8")
    (data / "mast.json").write_text(json.dumps(DESCRIPTION), encoding="utf-8")
    (data / "other.json").write_text('{"a": 1}')
    (data / "other.csv").write_text("time,speed 10\n2022-06-01 00:00,1.5\n2022-06-01 00:10,2\n")
    mast = made(tmp_path, data / given)
    assert (mast["name"], mast["stamp"], mast["utc_offset_h"]) == ("SKM-M1", "start", 0.0)
    assert (mast["files"], mast["time_column"]) == (["data/mast.csv"], "Stamp")
    channels = {channel["column"]: channel for channel in mast["channels"]}
    assert list(channels) == ["Spd60N_avg", "Spd60N_sd", "Dir58"]
    assert channels["Spd60N_avg"]["height_m"] == 60.2  # the header says nothing of 0.2
    assert channels["Spd60N_avg"]["sensors"]
    assert mast["main_wind_speed"] == channels["Spd60N_avg"]["name"]
    text = (tmp_path / "study" / "study.toml").read_text(encoding="utf-8")
    assert "# drafted from mast.csv and its description mast.json" in text
    assert "not described, drafted from the header alone: 'Dir58'" in text
    # The description holds the key of a logger: neither it nor the key is carried over.
    assert [each.name for each in (tmp_path / "study" / "data").iterdir()] == ["mast.csv"]
    assert "1234" not in text
    capsys.readouterr()
    answers = {"calm_below_m_s": 0.5, "direction_reference": "true"}
    channels["Dir58"]["unit"] = "deg"
    reading = read_station(StationSettings.model_validate(mast | answers), tmp_path / "study")
    assert len(reading.frame) == 54


def test_a_description_alone_leaves_the_file_open(tmp_path, data, capsys):
    (data / "mast.json").write_text(json.dumps(DESCRIPTION), encoding="utf-8")
    mast = made(tmp_path, data / "mast.json")
    assert (mast["files"], mast["time_column"]) == (["?"], "?")
    message = refused(capsys, "run", tmp_path / "study")
    assert "mast.files[1]: an open question" in message
    assert "mast.time_column: an open question" in message


def test_several_descriptions_that_fit_are_named_and_none_is_used(tmp_path, data):
    (data / "record.csv").write_text(DESCRIBED, encoding="utf-8")
    for name in ("a.json", "b.json"):
        (data / name).write_text(json.dumps(DESCRIPTION), encoding="utf-8")
    assert made(tmp_path, data / "record.csv")["name"] == "?"
    text = (tmp_path / "study" / "study.toml").read_text(encoding="utf-8")
    assert "2 stations are described beside the file that have its columns (a.json, b.json)" in text


def test_a_described_column_that_is_not_there_is_told(tmp_path, data):
    other = copy.deepcopy(DESCRIPTION)
    config = other["measurement_location"][0]["measurement_point"][0]["logger_measurement_config"]
    config[0]["column_name"][0]["column_name"] = "Spd60N_mean"
    (data / "mast.csv").write_text(DESCRIBED, encoding="utf-8")
    (data / "mast.json").write_text(json.dumps(other), encoding="utf-8")
    mast = made(tmp_path, data / "mast.csv")
    assert mast["channels"][0]["column"] == "Spd60N_sd"
    text = (tmp_path / "study" / "study.toml").read_text(encoding="utf-8")
    assert "column 'Spd60N_mean' is described and does not stand in the file: not drafted" in text


@pytest.mark.parametrize(
    ("name", "content", "told"),
    [
        ("gone.csv", None, "there is no such file"),
        ("empty.csv", "", "no table is found"),
        ("broken.zip", "PK", "cannot be opened"),
        ("book.xlsx", "PK", "a .xlsx file is not looked at"),
        ("other.json", '{"a": 1}', "there is no list measurement_location"),
        ("broken.json", "{", "cannot be read as JSON"),
    ],
)
def test_a_file_that_gives_no_draft_leaves_no_study(tmp_path, data, capsys, name, content, told):
    if content is not None:
        (data / name).write_text(content)
    message = refused(capsys, "new", tmp_path / "study", "--from", data / name)
    assert told in message
    assert "Traceback" not in message
    assert [each.name for each in tmp_path.iterdir()] == ["sent"]


def test_the_demo_is_drafted_from_nothing(tmp_path, capsys):
    message = refused(capsys, "new", tmp_path / "study", "--demo", "--from", "x.csv")
    assert "leave out --demo or --from" in message.lower()


def test_headers_that_no_comment_takes_are_written_all_the_same(tmp_path, data):
    rows = [f"2026-01-01 00:{at}0,{at}.5,1" for at in range(6)]
    header = "time,speed\x01 80,x\x02q"
    (data / "a.csv").write_text("\n".join([header, *rows, ""]))
    mast = made(tmp_path, data / "a.csv")
    assert mast["channels"][0]["column"].startswith("speed\x01")
