"""Artifacts stand on today's inputs or are refused; they are written whole or not at all."""

from __future__ import annotations

import json

import numpy as np
import pandas as pd
import pytest
from hand_made import save_long_term, save_measured

from tests.small_study import edit, run_steps, traces
from windkit.study import artifacts
from windkit.study.artifacts import Outcome, Row, first_stale_step, load_artifact, save_artifact
from windkit.study.errors import StudyError
from windkit.study.folder import digest_of_file, open_study
from windkit.study.steps import STEPS
from windkit.study.uncertainty import assess_uncertainty

NAMES = [step.name for step in STEPS]
#: The yield step and all that stands on it.
AFTER_YIELD = {"yield", "uncertainty", "conditions"}


def fresh(folder) -> dict[str, bool]:
    """Whether each step's artifact may be built upon."""
    study, found = open_study(folder), {}
    for name in NAMES:
        try:
            load_artifact(study, name)
            found[name] = True
        except StudyError:
            found[name] = False
    return found


def test_what_was_saved_is_what_is_loaded(small):
    index = pd.date_range("2022-01-01", periods=3, freq="h", tz="UTC", name="time")
    table = pd.DataFrame({"speed": [1.0, np.nan, 3.0]}, index=index)
    outcome = Outcome(
        "screen",
        [Row("a.b_m_s", "B", np.float64(1.5), "m/s", "by hand"), Row("c", "C", [1, 2], "1", "x")],
        {"table": table},
        {"what": "It is so."},
        ["Mind this."],
    )
    save_artifact(open_study(small), outcome)
    loaded = load_artifact(open_study(small), "screen")
    assert loaded.number("a.b_m_s") == 1.5
    assert loaded.value("c") == [1, 2]
    assert (loaded.said, loaded.warnings) == (outcome.said, outcome.warnings)
    pd.testing.assert_frame_equal(loaded.tables["table"], table, check_freq=False)
    with pytest.raises(KeyError, match=r"no figure 'd'"):
        loaded.value("d")


def test_a_finished_study_is_fresh_throughout(finished):
    assert fresh(finished) == dict.fromkeys(NAMES, True)
    assert first_stale_step(open_study(finished)) is None


def test_a_study_not_run_begins_at_its_first_step(small):
    assert first_stale_step(open_study(small)) == "screen"
    with pytest.raises(StudyError, match=r"results/yield: step 'measure'|step 'measure' has left"):
        load_artifact(open_study(small), "yield")


def test_comments_and_the_order_of_keys_make_nothing_stale(finished):
    file = finished / "study.toml"
    edit(
        file,
        "hub_height_m = 90.0\nrotor_diameter_m = 90.0\n",
        "rotor_diameter_m = 90.0   # of the rotor\n\nhub_height_m = 90.0\n",
    )
    text = file.read_text()
    place = text.index("[long_term]")
    moved = text[place : text.index("[[layout]]")]
    file.write_text("# a new first line\n" + text.replace(moved, "") + "\n" + moved)
    assert fresh(finished) == dict.fromkeys(NAMES, True)


@pytest.mark.parametrize(
    ("old", "new", "stale"),
    [
        ("hub_height_m = 90.0", "hub_height_m = 91.0", {"screen", *AFTER_YIELD}),
        ("weibull_k = 2.0", "weibull_k = 2.1", {"screen"}),
        ("loss = 0.08", "loss = 0.07", AFTER_YIELD),
        ("standard_uncertainty = 0.04", "standard_uncertainty = 0.05", {"uncertainty"}),
        ("speed_factor = 1.05", "speed_factor = 1.06", AFTER_YIELD),
        ("sector_count = 4", "sector_count = 6", {"long_term", *AFTER_YIELD}),
        ('"variance_ratio"', '"ratio"', {"long_term", *AFTER_YIELD}),
        ("[turbine]", "[checks]\nmark_gust_m_s = 31.0\n\n[turbine]",
         {"measure", "long_term", *AFTER_YIELD}),
        ("height_m = 58.0", "height_m = 57.0", {"measure", "long_term", *AFTER_YIELD}),
        ('title = "Three', 'title = "Two and one', set()),
    ],
)  # fmt: skip
def test_a_decision_makes_stale_what_stands_on_it_and_nothing_else(finished, old, new, stale):
    edit(finished / "study.toml", old, new)
    assert {name for name, whole in fresh(finished).items() if not whole} == stale


@pytest.mark.parametrize(
    ("name", "stale"),
    [
        ("data/mast.csv", {"measure", "long_term", *AFTER_YIELD}),
        ("data/far_skerry.csv", {"measure", "long_term", *AFTER_YIELD}),
        ("data/curve.csv", {"screen", "measure", "long_term", *AFTER_YIELD}),
        ("ledger.csv", {"measure", "long_term", *AFTER_YIELD}),
    ],
)
def test_a_changed_file_makes_stale_what_stands_on_it(finished, name, stale):
    with (finished / name).open("a") as stream:
        stream.write("\n")
    assert {step for step, whole in fresh(finished).items() if not whole} == stale


def test_the_message_names_what_changed_and_where_to_begin(finished):
    edit(finished / "study.toml", "hub_height_m = 90.0", "hub_height_m = 91.0")
    with pytest.raises(
        StudyError,
        match=r"results/yield: since it was made these inputs changed: study\.toml \[turbine\]\. .*"
        r"Run `sitestudy run study --from yield`",
    ):
        load_artifact(open_study(finished), "yield")


def test_the_last_step_does_not_build_on_a_stale_first_one(finished):
    # Its own needs are as they were written; what they stand on is not.
    with (finished / "data" / "mast.csv").open("a") as stream:
        stream.write("2022-06-29 00:00,5,4,100,8,975\n")
    with pytest.raises(StudyError, match=r"results/measure: since it was made.*data/mast\.csv"):
        assess_uncertainty(open_study(finished))


def test_a_step_run_anew_makes_those_after_it_stale(finished):
    edit(finished / "study.toml", "height_m = 58.0", "height_m = 57.0")
    run_steps(finished, "measure")
    assert first_stale_step(open_study(finished)) == "long_term"
    run_steps(finished, "long_term", "yield", "uncertainty", "conditions")
    assert first_stale_step(open_study(finished)) is None


def test_a_run_on_the_same_inputs_leaves_the_same_bytes(finished):
    before = traces(finished)
    run_steps(finished)
    assert traces(finished) == before


def test_an_override_is_part_of_the_artifact_and_no_staleness(finished):
    run_steps(finished, "yield", overrides={"yield": {"turbine.hub_height_m": 100.0}})
    loaded = load_artifact(open_study(finished), "yield")
    assert loaded.overrides == {"turbine.hub_height_m": 100.0}
    edit(finished / "study.toml", "hub_height_m = 90.0", "hub_height_m = 95.0")
    load_artifact(open_study(finished), "yield")  # its own departure outranks the file
    edit(finished / "study.toml", "rotor_diameter_m = ", "rotor_diameter_m = 1")
    with pytest.raises(StudyError, match=r"study\.toml \[turbine\]"):
        load_artifact(open_study(finished), "yield")


def test_a_table_changed_by_hand_is_refused(finished):
    file = finished / "results" / "long_term" / "series.parquet"
    series = pd.read_parquet(file)
    series["wind_speed"] *= 1.1
    series.to_parquet(file)
    with pytest.raises(
        StudyError,
        match=r"results/long_term/series\.parquet: its content is not what the step wrote.*"
        r"Run `sitestudy run study --from long_term`",
    ):
        load_artifact(open_study(finished), "long_term")
    file.unlink()
    with pytest.raises(StudyError, match="its content is not what the step wrote"):
        load_artifact(open_study(finished), "long_term")


def test_a_figure_changed_by_hand_is_seen_by_the_next_step(finished):
    file = finished / "results" / "measure" / "artifact.json"
    content = json.loads(file.read_text())
    content["rows"][0]["value"] += 1.0
    file.write_text(json.dumps(content))
    with pytest.raises(StudyError, match="these inputs changed: results/measure"):
        load_artifact(open_study(finished), "long_term")


@pytest.mark.parametrize("content", ["", "{", "[1]", '{"rows": []}', "null"])
def test_a_damaged_artifact_is_refused(finished, content):
    (finished / "results" / "measure" / "artifact.json").write_text(content)
    with pytest.raises(StudyError, match=r"results/measure/artifact\.json: its content is not"):
        load_artifact(open_study(finished), "measure")
    assert first_stale_step(open_study(finished)) == "measure"


def test_an_outcome_that_cannot_be_written_leaves_the_old_one(finished):
    before = traces(finished)
    outcome = Outcome("screen", [Row("a", "A", float("nan"), "1", "x")])
    with pytest.raises(ValueError, match="not JSON compliant"):
        save_artifact(open_study(finished), outcome)
    assert traces(finished) == before
    assert not list((finished / "results").glob("*.part"))


def test_a_run_that_is_cut_off_leaves_the_old_one(finished, monkeypatch):
    before = traces(finished)

    def interrupted(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(artifacts, "swap_folder", interrupted)
    with pytest.raises(KeyboardInterrupt):
        run_steps(finished, "screen")
    assert traces(finished) == before
    assert not list((finished / "results").glob("*.part"))


def test_what_a_step_was_made_from_is_named_with_its_hash(small):
    save_measured(small)
    save_long_term(small)
    made_from = load_artifact(open_study(small), "long_term").made_from
    assert set(made_from) == {
        "windkit",
        "study.toml [mast]",
        "study.toml [references]",
        "study.toml [long_term]",
        "data/far_skerry.csv",
        "results/measure",
    }
    assert made_from["data/far_skerry.csv"] == digest_of_file(small / "data" / "far_skerry.csv")
