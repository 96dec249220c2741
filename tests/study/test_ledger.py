"""Decisions as rows: read, written, refused, applied and replayed."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from windkit.study.errors import StudyError
from windkit.study.ledger import (
    LEDGER_COLUMNS,
    apply_ledger,
    decision_row,
    empty_ledger,
    ledger_of,
    masked_by,
    read_ledger,
    refuse_rows_outside,
    values_in,
    write_ledger,
)

HEADER = ",".join(LEDGER_COLUMNS)
ROW = "a,2026-01-01T00:10:00Z,2026-01-01T00:30:00Z,2,manual,wet,,accepted,E. Marsh,2026-02-01"


def frame() -> pd.DataFrame:
    index = pd.date_range("2026-01-01", periods=6, freq="10min", tz="UTC", name="time")
    return pd.DataFrame({"a": np.arange(6.0), "b": np.arange(6.0)}, index=index)


def ledger(tmp_path: Path, *rows: str) -> pd.DataFrame:
    path = tmp_path / "ledger.csv"
    path.write_text("\n".join([HEADER, *rows]) + "\n", encoding="utf-8")
    return read_ledger(path)


def test_a_span_covers_its_start_and_not_its_end(tmp_path: Path):
    masked = apply_ledger(frame(), ledger(tmp_path, ROW))
    assert masked["a"].isna().tolist() == [False, True, True, False, False, False]
    assert masked["b"].notna().all()
    assert len(masked) == 6


def test_a_star_masks_every_channel(tmp_path: Path):
    masked = apply_ledger(frame(), ledger(tmp_path, "*" + ROW[1:]))
    assert masked.isna().sum().tolist() == [2, 2]


def test_a_rejected_row_lifts_its_own_rule_only(tmp_path: Path):
    stuck = ROW.replace("manual", "stuck")
    lift = stuck.replace("accepted", "rejected").replace("00:30", "00:20")
    assert apply_ledger(frame(), ledger(tmp_path, stuck, lift))["a"].isna().sum() == 1
    assert apply_ledger(frame(), ledger(tmp_path, stuck, ROW, lift))["a"].isna().sum() == 2
    every = lift.replace("stuck", "*")
    assert apply_ledger(frame(), ledger(tmp_path, stuck, ROW, every))["a"].isna().sum() == 1


def test_the_later_row_decides(tmp_path: Path):
    lift = ROW.replace("accepted", "rejected")
    assert apply_ledger(frame(), ledger(tmp_path, lift, ROW))["a"].isna().sum() == 2
    assert apply_ledger(frame(), ledger(tmp_path, ROW, lift))["a"].isna().sum() == 0


def test_masks_are_told_apart_by_rule(tmp_path: Path):
    masks = masked_by(frame(), ledger(tmp_path, ROW, ROW.replace("manual", "icing")))
    assert {rule: int(mask.sum()) for rule, mask in masks.items()} == {"manual": 2, "icing": 2}


def test_writing_and_reading_gives_the_same_rows_and_bytes(tmp_path: Path):
    quoted = ROW.replace("wet", '"wet, cold and ""odd"""')
    rows = ledger(tmp_path, quoted)
    first = tmp_path / "a.csv"
    write_ledger(rows, first)
    again = read_ledger(first)
    pd.testing.assert_frame_equal(again, rows)
    assert again["reason"].tolist() == ['wet, cold and "odd"']
    second = tmp_path / "b.csv"
    write_ledger(again, second)
    assert first.read_bytes() == second.read_bytes()


def test_no_file_is_an_empty_ledger(tmp_path: Path):
    assert len(read_ledger(tmp_path / "none.csv")) == 0
    (tmp_path / "ledger.csv").write_text("", encoding="utf-8")
    assert len(read_ledger(tmp_path / "ledger.csv")) == 0
    pd.testing.assert_frame_equal(apply_ledger(frame(), empty_ledger()), frame())


def test_a_decision_made_in_a_panel_is_a_row():
    row = decision_row(
        channel="a",
        start=pd.Timestamp("2026-01-01 01:10+01:00"),
        stop=pd.Timestamp("2026-01-01 01:30+01:00"),
        rule="manual",
        reason="wet",
        decision="accepted",
        who="E. Marsh",
        when="2026-02-01",
    )
    assert apply_ledger(frame(), row)["a"].isna().sum() == 2
    assert apply_ledger(frame(), ledger_of(row.to_dict("records")))["a"].isna().sum() == 2


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("accepted", "perhaps", "decision is 'perhaps'"),
        ("00:10:00Z", "00:10:00", "write 2026-01-01T00:10:00Z if it is UTC"),
        ("00:10:00Z", "00:10:00+01:00", "write 2025-12-31T23:10:00Z, which is the same time"),
        ("2026-01-01T00:10:00Z", "early", "from is 'early'.*write it as 2026-01-31T04:10:00Z"),
        ("00:30", "00:10", "is empty"),
        (",wet,", ",,", "a person's decision has no reason"),
        ("E. Marsh", "", "who is empty"),
        (",2,", ",two,", "count is 'two'"),
        (",wet,", ",wet, cold,", "another number of fields"),
    ],
)
def test_a_row_that_cannot_be_is_refused_with_its_line(
    tmp_path: Path, old: str, new: str, words: str
):
    with pytest.raises(StudyError, match="(?i)" + words) as met:
        ledger(tmp_path, ROW, ROW.replace(old, new))
    assert str(met.value).startswith("ledger.csv, line 3: ")


def test_other_columns_are_refused(tmp_path: Path):
    path = tmp_path / "ledger.csv"
    path.write_text("channel,start\n", encoding="utf-8")
    with pytest.raises(StudyError, match="Write this header"):
        read_ledger(path)


@pytest.mark.parametrize(("sign", "word"), [(";", "semicolons"), ("\t", "tabs")])
@pytest.mark.parametrize("first", [0, 1])
def test_another_separator_is_named(tmp_path: Path, sign: str, word: str, first: int):
    lines = [",".join(LEDGER_COLUMNS), ROW]
    lines[first:] = [line.replace(",", sign) for line in lines[first:]]
    (tmp_path / "ledger.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")
    with pytest.raises(StudyError, match=f"line {first + 1}: the fields are set apart by {word}"):
        read_ledger(tmp_path / "ledger.csv")


def test_an_unknown_channel_is_refused(tmp_path: Path):
    with pytest.raises(StudyError, match="names the channel 'c'"):
        apply_ledger(frame(), ledger(tmp_path, "c" + ROW[1:]))


@pytest.mark.parametrize(
    ("rule", "words"),
    [
        ("icng", "There is no rule 'icng'.*Write icing"),
        ("Manual", "Write manual"),
        ("wind turbine 7", "Write manual if a person found the span"),
    ],
)
def test_a_rule_that_no_check_has_is_refused_with_the_near_name(tmp_path: Path, rule, words):
    with pytest.raises(StudyError, match="(?i)" + words) as met:
        ledger(tmp_path, ROW, ROW.replace("manual", rule))
    assert str(met.value).startswith("ledger.csv, line 3: ")


def test_a_span_outside_the_record_is_refused_with_its_line_and_both_periods(tmp_path: Path):
    index = pd.DatetimeIndex(frame().index)
    interval = pd.Timedelta("10min")
    quoted = ROW.replace("wet", '"wet\nand cold"')  # over two lines of the file
    refuse_rows_outside(index, interval, ledger(tmp_path, quoted))
    for year in ("2025", "2027"):
        rows = ledger(tmp_path, quoted, ROW.replace("2026-01-01", f"{year}-01-01"))
        with pytest.raises(StudyError) as met:
            refuse_rows_outside(index, interval, rows)
        said = str(met.value)
        assert said.startswith("ledger.csv, line 4: ")
        assert f"from {year}-01-01T00:10:00Z to {year}-01-01T00:30:00Z" in said
        assert "the record from 2026-01-01T00:00:00Z to 2026-01-01T01:00:00Z" in said
    # The end is not part of either: a row that begins where the record ends has nothing of it.
    touching = ROW.replace("00:10:00", "01:00:00").replace("00:30:00", "01:10:00")
    with pytest.raises(StudyError):
        refuse_rows_outside(index, interval, ledger(tmp_path, touching))


def test_values_are_counted_by_channel_and_over_all(tmp_path: Path):
    values = frame()
    values.iloc[1, 0] = np.nan
    assert values_in(values, ledger(tmp_path, ROW, "*" + ROW[1:])) == [1, 3]
