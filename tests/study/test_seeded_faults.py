"""Seeded faults: how much of each the checks find, and how little of what is sound they mask."""

from __future__ import annotations

import numpy as np
import pytest
from seeded_faults import ELEVATION, FAULTS, Outcome, covered, print_table, sound, table

from windkit.study.checks import MASKING_RULES, RULES, run_checks

#: Faults that are found by less than the goal of 95 %, with the reason; the report says so.
BELOW_THE_GOAL: dict[str, float] = {}


@pytest.fixture(scope="module")
def outcomes() -> list[Outcome]:
    found = table()
    print_table(found)
    return found


def test_each_fault_is_found_as_the_goal_says(outcomes: list[Outcome]):
    for each in outcomes:
        assert each.found >= BELOW_THE_GOAL.get(each.fault, 0.95), each


def test_no_check_lists_much_that_is_sound(outcomes: list[Outcome]):
    for each in outcomes:
        # A shadow is as wide as its flanks; a check that masks must be far stricter.
        assert each.false_alarms <= (0.005 if each.masks else 0.015), each


def test_every_check_has_a_fault_laid_for_it():
    assert set(RULES) - {rule for _, rule, _ in FAULTS} == {"range_mark"}


def test_masking_checks_take_less_than_one_in_a_hundred_sound_values():
    mast, references = sound()
    spans = run_checks(mast, references=references, elevation=ELEVATION)
    masking = spans[spans["rule"].isin(MASKING_RULES)]
    masked = known = 0
    for name in mast.frame:
        there = mast.frame[name].notna().to_numpy()
        masked += int((covered(mast, masking, str(name)) & there).sum())
        known += int(there.sum())
    assert masked / known < 0.01


def test_the_demo_masts_own_blemishes_are_found():
    # data_demo/truth.json: ice in January, a stuck vane in May, the wearing cup at 60 m.
    import json
    import tomllib

    import pandas as pd
    from seeded_faults import DEMO, _station

    from windkit.study.reading import read_station

    study = tomllib.loads((DEMO / "study.toml").read_text(encoding="utf-8"))
    mast = read_station(_station(study["mast"]), DEMO)
    spans = run_checks(mast, elevation=ELEVATION)
    truth = json.loads((DEMO / "truth.json").read_text(encoding="utf-8"))["blemishes"]
    rules = {"ice": "icing", "stuck vane": "stuck", "spike": "range"}
    for row in truth:
        rule = next((r for words, r in rules.items() if words in row["what"]), None)
        if rule is None or row["channel"] == "*":
            continue
        inside = (mast.frame.index >= pd.Timestamp(row["from_utc"], tz="UTC")) & (
            mast.frame.index < pd.Timestamp(row["to_utc"], tz="UTC")
        )
        inside &= mast.frame[row["channel"]].notna().to_numpy()
        mine = spans[spans["rule"].isin([rule, "icing"])]
        listed = covered(mast, mine, row["channel"])
        assert (listed & inside).sum() >= 0.95 * inside.sum(), row
    wear = spans[(spans["rule"] == "drift")]
    assert wear["channel"].tolist() == ["speed_60"]
    assert wear["measure"].iloc[0] == pytest.approx(-0.04, abs=0.005)
    assert abs(wear["from"].iloc[0] - pd.Timestamp("2023-09-08", tz="UTC")) < pd.Timedelta(days=10)
    assert np.isfinite(wear["measure"]).all()
