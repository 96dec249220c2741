"""The command: bad input ends with exit code 2, one message, and a study as it was."""

from __future__ import annotations

import json
import shutil
from collections.abc import Callable
from pathlib import Path

import pytest

from tests.small_study import edit, edit_line, make_small_study, traces
from windkit.faces.command import main
from windkit.study import shipped
from windkit.study.steps import STEPS

Change = Callable[[Path], object]

YIELD = "4_energy_yield"
#: Lines that stand so in the mast's table only.
MAST_ONLY = """\
stamp = "start"
calm_below_m_s = 0.5
direction_reference = "true"
main_wind_speed = "speed_60"
"""


def refused(capsys: pytest.CaptureFixture[str], *arguments: str | Path) -> str:
    """What the command says on stderr when it refuses."""
    capsys.readouterr()
    assert main([str(argument) for argument in arguments]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.startswith("sitestudy: ")
    assert "Traceback" not in err
    assert err.count("sitestudy: ") == 1
    return err


def settings(old: str, new: str) -> Change:
    return lambda folder: edit(folder / "study.toml", old, new)


def line(name: str, number: int, new: str | None) -> Change:
    return lambda folder: edit_line(folder / name, number, new)


def without(name: str) -> Change:
    return lambda folder: (folder / name).unlink()


def semicolons(folder: Path) -> None:
    file = folder / "data" / "mast.csv"
    file.write_text(file.read_text().replace(",", ";"))


def notebook(stem: str, change: Callable[[list[dict]], object]) -> Change:
    def act(folder: Path) -> None:
        file = folder / "workbooks" / f"{stem}.ipynb"
        content = json.loads(file.read_text(encoding="utf-8"))
        change(content["cells"])
        file.write_text(json.dumps(content), encoding="utf-8")

    return act


def parameters(study_folder: str, more: str = "") -> Change:
    source = f'study_folder = "{study_folder}"\n{more}'
    return notebook(YIELD, lambda cells: cells[1].update(source=source))


def linked_out(folder: Path) -> None:
    shutil.move(folder / "data" / "mast.csv", folder.parent / "mast.csv")
    (folder / "data" / "mast.csv").symlink_to(folder.parent / "mast.csv")


def ledger(row: str) -> Change:
    def act(folder: Path) -> None:
        with (folder / "ledger.csv").open("a", encoding="utf-8") as stream:
            stream.write(row + "\n")

    return act


BAD_FOLDERS: dict[str, tuple[Change, list[str]]] = {
    "no study.toml": (without("study.toml"), ["study.toml: there is no study.toml", "new DIR"]),
    "invalid toml": (
        settings('name = "Cairn Hollow"', "name = Cairn Hollow"),
        ["study.toml: ", "line 8", "must be valid TOML"],
    ),
    "misspelt key": (
        settings("hub_height_m", "hub_hight_m"),
        ["turbine.hub_hight_m: unknown key", "write hub_height_m if that is meant"],
    ),
    "missing key": (
        settings("utc_offset_h = 0.0\ninterval_min = 60\n" + MAST_ONLY, MAST_ONLY),
        ["study.toml: mast.utc_offset_h: not given", "never guessed", "add a line"],
    ),
    "negative hub height": (
        settings("hub_height_m = 90.0", "hub_height_m = -90.0"),
        ["turbine.hub_height_m: is -90.0; it must be greater than 5"],
    ),
    "latitude 95": (
        settings("latitude_deg = 46.0", "latitude_deg = 95.0"),
        ["site.latitude_deg: is 95.0; it must be less than or equal to 90"],
    ),
    "loss 1.2": (settings("loss = 0.08", "loss = 1.2"), ["losses[1].loss: is 1.2", "less than 1"]),
    "negative uncertainty": (
        settings("standard_uncertainty = 0.02", "standard_uncertainty = -0.02"),
        ["uncertainties[1].standard_uncertainty: is -0.02; it must be greater than or equal to 0"],
    ),
    "shape 0": (settings("weibull_k = 2.0", "weibull_k = 0"), ["screening.weibull_k: is 0;"]),
    "no mast file": (
        without("data/mast.csv"),
        ["data/mast.csv, mast.files: it is not there", "in 'data' there are: curve.csv, far"],
    ),
    "no reference file": (
        without("data/far_skerry.csv"),
        ["data/far_skerry.csv, references (Far Skerry).files: it is not there"],
    ),
    "wrong delimiter": (
        semicolons,
        ["data/mast.csv, line 1: only one column", 'Write delimiter = ";"'],
    ),
    "no such column": (
        settings('column = "Speed40"', 'column = "Speed45"'),
        ["data/mast.csv, line 1: there is no column 'Speed45'", "Write 'Speed40' if that is meant"],
    ),
    "text for a number": (
        line("data/mast.csv", 10, "2022-03-01 08:00,fast,1,1,1,970"),
        ["data/mast.csv, line 10", "'fast' in 'Speed60'", 'Write missing = ["fast"]'],
    ),
    "unsorted": (
        line("data/mast.csv", 10, "2022-03-01 06:30,1,1,1,1,970"),
        ["data/mast.csv line 10 has 2022-03-01 06:30 after 2022-03-01 07:00", "Put files in"],
    ),
    "repeated": (
        line("data/far_skerry.csv", 3, "2021-01-01 00:00,5,180"),
        ["Far Skerry", "data/far_skerry.csv line 3 has 2021-01-01 00:00 again", "repeated_stamps"],
    ),
    "curve not increasing": (
        line("data/curve.csv", 6, "4,210"),
        ["data/curve.csv: wind_speed of a power curve must increase, but 5 is followed by 4 m/s"],
    ),
    "curve negative": (line("data/curve.csv", 3, "3,-4"), ["got -4000 W at 3 m/s", "curve.csv"]),
    "curve above betz": (
        line("data/curve.csv", 5, "5,300"),
        ["data/curve.csv: the power curve gives 300 kW at 5 m/s", "16/27"],
    ),
    "curve not of the rating": (
        settings("rated_power_kw = 2000.0", "rated_power_kw = 2300.0"),
        ["data/curve.csv: its highest power is 2000 kW, but turbine.rated_power_kw is 2300"],
    ),
    "path climbs out": (
        settings('"data/mast.csv"', '"../mast.csv"'),
        ["../mast.csv, mast.files: the path climbs out with ..", "Copy it into the study"],
    ),
    "absolute path": (
        settings('"data/curve.csv"', '"/etc/hostname"'),
        ["/etc/hostname, turbine.curve_file: the path is absolute", "Copy it into the study"],
    ),
    "link out": (linked_out, ["data/mast.csv, mast.files: the path is a link that leaves"]),
    "misspelt parameter in a cell": (
        parameters("..", "hub_hight_m = 1"),
        [f"{YIELD}.ipynb: unknown parameter hub_hight_m", "Did you mean hub_height_m?"],
    ),
    "impossible value in a cell": (
        parameters("..", "hub_height_m = 1"),
        [f"workbooks/{YIELD}.ipynb, parameters over study.toml: turbine.hub_height_m: is 1;"],
    ),
    "a cell that computes": (
        parameters("..", "hub_height_m = 2 * 60"),
        [f"{YIELD}.ipynb, parameters cell", "written-out value"],
    ),
    "another study in a cell": (
        parameters("../data_demo"),
        [f"workbooks/{YIELD}.ipynb, study_folder: it is '../data_demo'", "study this"],
    ),
    "two parameters cells": (
        notebook(YIELD, lambda cells: cells[2]["metadata"].update(tags=["parameters"])),
        [f"workbooks/{YIELD}.ipynb: 2 cells are tagged 'parameters'", "exactly one"],
    ),
    "no parameters cell": (
        notebook(YIELD, lambda cells: cells[1]["metadata"].update(tags=[])),
        [f"workbooks/{YIELD}.ipynb: 0 cells are tagged 'parameters'"],
    ),
    "no workbook": (
        without("workbooks/5_uncertainty.ipynb"),
        ["workbooks/5_uncertainty.ipynb: the workbook is not there", "Copy it from the templates"],
    ),
    "no notebook": (
        lambda folder: (folder / "workbooks" / f"{YIELD}.ipynb").write_text("{"),
        [f"workbooks/{YIELD}.ipynb: it is not a readable notebook"],
    ),
    "ledger row with a bad stamp": (
        ledger("speed_60,2022-03-05,2022-03-06T00:00:00Z,0,manual,ice,,accepted,A. Reader,"),
        ["ledger.csv, line 2: from is '2022-03-05'", "Write 2022-03-05T00:00:00Z if it is UTC"],
    ),
    "ledger row without a reason": (
        ledger("*,2022-03-05T00:00:00Z,2022-03-06T00:00:00Z,0,manual,,,accepted,A. Reader,"),
        ["ledger.csv, line 2: a person's decision has no reason", "Fill in reason"],
    ),
    "ledger row of a channel that is gone": (
        ledger("speed_61,2022-03-05T00:00:00Z,2022-03-06T00:00:00Z,0,manual,x,,accepted,A. R.,"),
        ["ledger.csv: a row of rule 'manual' names the channel 'speed_61'", "Correct the name"],
    ),
}


@pytest.mark.parametrize("case", BAD_FOLDERS)
def test_a_bad_study_is_refused_and_stays_as_it_was(case, finished, capsys):
    change, told = BAD_FOLDERS[case]
    change(finished)
    before = traces(finished)
    message = refused(capsys, "run", finished, "--quiet")
    for words in told:
        assert words in message
    assert message.count("\n") <= 2
    assert traces(finished) == before
    assert not list(finished.rglob("*.part"))


BAD_ARGUMENTS: dict[str, tuple[list[str], list[str]]] = {
    "misspelt parameter": (
        ["--set", f"{YIELD}.hub_hight_m=120"],
        [f"{YIELD}.ipynb: unknown parameter hub_hight_m", "Did you mean hub_height_m?"],
    ),
    "misspelt workbook": (
        ["--set", "4_energy.hub_height_m=120"],
        ["There is no workbook '4_energy'", "1_site_screening, 2_measured_data"],
    ),
    "impossible value": (
        ["--set", f"{YIELD}.hub_height_m=-120"],
        [f"workbooks/{YIELD}.ipynb, parameters over study.toml: turbine.hub_height_m: is -120;"],
    ),
    "text for a number": (
        ["--set", f"{YIELD}.hub_height_m=tall"],
        ['turbine.hub_height_m: is "tall"; it must be a valid number'],
    ),
    "unknown method": (
        ["--set", "3_measure_correlate_predict.method=guess"],
        ["long_term.method: is \"guess\"; it must be 'blend'"],
    ),
    "unknown reference": (
        ["--set", "3_measure_correlate_predict.reference=Near Skerry"],
        ["reference is 'Near Skerry', but the references are Far Skerry"],
    ),
    "no equals sign": (["--set", f"{YIELD}.hub_height_m"], ["WORKBOOK.NAME=VALUE"]),
    "no workbook": (["--set", "hub_height_m=120"], ["WORKBOOK.NAME=VALUE", "for instance"]),
    "another study": (
        ["--set", f"{YIELD}.study_folder=../../elsewhere"],
        [f"workbooks/{YIELD}.ipynb, study_folder: it is '../../elsewhere'"],
    ),
    "unknown step": (["--from", "yeild"], ["There is no step 'yeild'", "screen, measure"]),
    "parameter of a step that does not run": (
        ["--from", "yield", "--set", "1_site_screening.hub_height_m=120"],
        ["1_site_screening is set, but the run begins at 'yield'", "begin at an earlier step"],
    ),
}


@pytest.mark.parametrize("case", BAD_ARGUMENTS)
def test_bad_arguments_are_refused(case, finished, capsys):
    arguments, told = BAD_ARGUMENTS[case]
    before = traces(finished)
    message = refused(capsys, "run", finished, "--quiet", *arguments)
    for words in told:
        assert words in message
    assert traces(finished) == before


def test_a_step_is_not_run_on_stale_ones(finished, capsys):
    edit(finished / "study.toml", "min_hours_per_sector = 100", "min_hours_per_sector = 90")
    before = traces(finished)
    message = refused(capsys, "run", finished, "--quiet", "--from", "uncertainty")
    assert "results/long_term: the run was to begin at 'uncertainty', but 'long_term'" in message
    assert "Run `sitestudy run study --from long_term`" in message
    assert traces(finished) == before


def test_a_step_is_not_run_on_steps_that_never_were(small, capsys):
    assert "results/screen: the run was" in refused(capsys, "run", small, "--from", "yield")
    assert not (small / "results").exists()


def test_a_study_that_is_not_there_is_refused(tmp_path, capsys):
    message = refused(capsys, "run", tmp_path / "nowhere")
    assert "There is no folder" in message
    assert "sitestudy new DIR" in message
    assert "There is no folder" in refused(capsys, "lab", tmp_path / "nowhere")
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("arguments", [[], ["fly"], ["run"], ["new"], ["run", "x", "--form", "y"]])
def test_a_wrong_command_line_shows_the_usage(arguments, capsys):
    with pytest.raises(SystemExit) as caught:
        main(arguments)
    assert caught.value.code == 2
    assert "usage: sitestudy" in capsys.readouterr().err


def test_a_new_study_never_overwrites(tmp_path, capsys):
    study = tmp_path / "study"
    study.mkdir()
    (study / "notes.txt").write_text("mine")
    message = refused(capsys, "new", study)
    assert "is there already and not empty" in message
    assert "never overwrites anything" in message
    assert [file.name for file in tmp_path.rglob("*")] == ["study", "notes.txt"]
    assert "is there already" in refused(capsys, "new", study / "notes.txt", "--demo")
    assert (study / "notes.txt").read_text() == "mine"


def test_a_new_study_clears_nothing_away_that_stands_beside_it(tmp_path, capsys):
    beside = tmp_path / "study.part"
    beside.mkdir()
    (beside / "mine.txt").write_text("mine")
    assert "'study.part' stands beside" in refused(capsys, "new", tmp_path / "study")
    assert (beside / "mine.txt").read_text() == "mine"
    assert not (tmp_path / "study").exists()


def test_a_new_study_is_whole_or_not_there(tmp_path, capsys, monkeypatch):
    monkeypatch.setattr(shipped, "empty_ledger", lambda: 1 / 0)
    with pytest.raises(ZeroDivisionError):
        main(["new", str(tmp_path / "study")])
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("demo", [False, True])
def test_a_new_study_holds_what_a_study_needs(tmp_path, capsys, demo):
    folder = tmp_path / "deep" / "study"
    assert main(["new", str(folder), *(["--demo"] if demo else [])]) == 0
    names = {file.name for file in folder.iterdir()}
    assert names == {"study.toml", "ledger.csv", "data", "workbooks"}
    stems = sorted(file.stem for file in (folder / "workbooks").iterdir())
    assert stems == [step.workbook for step in STEPS]
    for file in (folder / "workbooks").iterdir():
        assert "data_demo" not in file.read_text(encoding="utf-8")
    assert "next: " in capsys.readouterr().out


def test_a_template_as_it_comes_asks_for_what_only_the_client_knows(tmp_path, capsys):
    main(["new", str(tmp_path / "study")])
    message = refused(capsys, "run", tmp_path / "study")
    for key in ("site.latitude_deg", "mast.utc_offset_h", "mast.stamp", "mast.interval_min"):
        assert f"study.toml: {key}: not given" in message


def test_two_faults_are_told_in_one_message(tmp_path, capsys):
    folder = make_small_study(tmp_path / "study")
    edit(folder / "study.toml", "loss = 0.08", "loss = 1.2")
    edit(folder / "study.toml", "latitude_deg = 46.0", "latitude_deg = 95.0")
    message = refused(capsys, "run", folder)
    assert "site.latitude_deg: is 95.0" in message
    assert "losses[1].loss: is 1.2" in message
