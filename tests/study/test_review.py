"""Going through suspected spans: their order and state, what stands around one, the ledger file.

Expected values are counted on small made-up records by hand.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from station_examples import channel, reading_of, settings

from windkit.study.checks import CheckSettings
from windkit.study.errors import StudyError
from windkit.study.ledger import decision_row, empty_ledger, read_ledger, write_ledger
from windkit.study.record import Record, build_record
from windkit.study.review import (
    add_to_ledger,
    decision_rows,
    span_window,
    spans_to_review,
    take_from_ledger,
)

SETTINGS = settings(
    channels=[
        channel("speed_80", "Spd80", "wind_speed", "m/s", 80.0),
        channel("speed_80_b", "Spd80b", "wind_speed", "m/s", 79.0),
        channel("speed_60", "Spd60", "wind_speed", "m/s", 60.0),
        channel("speed_20", "Spd20", "wind_speed", "m/s", 20.0),
        channel("spread_80", "Sd80", "wind_speed", "m/s", 80.0, statistic="sd"),
        channel("direction_78", "Dir78", "wind_from_direction", "deg", 78.0),
        channel("temperature_5", "T5", "air_temperature", "degC", 5.0),
    ]
)
DAY = 144


def record_of(days: int = 20, **changes: np.ndarray) -> Record:
    """A calm-free mast; one absurd speed at the end of day 5 is what the checks find."""
    rng = np.random.default_rng(3)
    count = days * DAY
    speed = 8.0 + np.round(rng.normal(0.0, 0.3, count), 2)
    columns = {
        "speed_80": speed.copy(),
        "speed_80_b": speed + 0.01,
        "speed_60": speed - 0.3,
        "speed_20": speed - 1.5,
        "spread_80": np.round(rng.uniform(0.5, 1.0, count), 2),
        "direction_78": np.round(rng.uniform(200.0, 220.0, count), 1),
        "temperature_5": np.round(rng.normal(290.0, 0.2, count), 1),
    }
    columns["speed_80"][5 * DAY] = 468.0
    columns |= changes
    return build_record(reading_of(columns, SETTINGS), CheckSettings(masking_rules=["range"]))


def span_of(record: Record, channel: str, first: int, last: int, rule: str) -> dict:
    index = record.raw.index
    return {
        "channel": channel,
        "from": index[first],
        "to": index[last] + record.interval,
        "rule": rule,
    }


def with_spans(record: Record, *rows: tuple[str, str, str, str, int]) -> Record:
    """The record with other spans: channel, rule, from, to and count of each."""
    spans = pd.DataFrame(
        [
            {
                "channel": name,
                "from": pd.Timestamp(start, tz="UTC"),
                "to": pd.Timestamp(stop, tz="UTC"),
                "count": count,
                "measure": 2.0,
                "threshold": 1.0,
                "reason": "made up",
                "rule": rule,
            }
            for name, rule, start, stop, count in rows
        ]
    )
    return replace(record, spans=spans)


SOME = (
    ("speed_60", "step", "2026-01-03", "2026-01-04", 144),
    ("speed_80", "step", "2026-01-02", "2026-01-02 01:00", 6),
    ("speed_80", "range", "2026-01-06", "2026-01-06 00:10", 1),
)


def test_the_rare_check_comes_first_and_each_span_has_its_state():
    spans = spans_to_review(with_spans(record_of(), *SOME))
    assert spans["rule"].tolist() == ["range", "step", "step"]
    assert spans["state"].tolist() == ["masked", "waiting", "waiting"]
    assert spans["channel"].tolist() == ["speed_80", "speed_80", "speed_60"]  # in time
    assert spans["believed"].tolist() == [0, 6, 144]  # the absurd value counts no more
    assert spans["decision"].tolist() == ["", "", ""]


def test_a_span_on_all_channels_counts_the_values_of_all():
    record = with_spans(record_of(), ("*", "clock_step", "2026-01-06", "2026-01-06 00:20", 14))
    assert spans_to_review(record)["believed"].tolist() == [13]  # seven channels, one is masked


def test_without_spans_there_is_nothing_to_review():
    record = record_of()
    empty = replace(record, spans=record.spans.iloc[:0], ledger=empty_ledger())
    assert spans_to_review(empty).empty


def test_the_last_decision_of_a_person_stands_beside_its_span():
    record = with_spans(record_of(), *SOME)
    spans = spans_to_review(record)
    words = {"reason": "seen", "who": "E. Marsh", "when": "2026-11-30"}
    first = decision_rows(spans.iloc[[1]], decision="accepted", **words)
    second = decision_rows(spans.iloc[[1]], decision="rejected", **words)
    ledger = pd.concat([record.ledger, first, second], ignore_index=True)
    assert spans_to_review(replace(record, ledger=ledger))["decision"].tolist() == [
        "",
        "rejected",
        "",
    ]


def test_a_window_has_the_pair_first_and_two_days_on_both_sides():
    record = record_of()
    window = span_window(record, span_of(record, "speed_80", 5 * DAY, 5 * DAY + 5, "range"))
    assert list(window) == ["speed_80", "speed_80_b", "speed_60"]
    assert window.index[0] == record.raw.index[3 * DAY]
    assert window.index[-1] == record.raw.index[7 * DAY + 5]
    assert window["speed_80"].max() == 468.0  # as read, before masking


@pytest.mark.parametrize(
    ("channel", "rule", "columns"),
    [
        ("speed_20", "shadow", ["speed_20", "speed_60", "speed_80_b", "direction_78"]),
        ("speed_80", "icing", ["speed_80", "speed_80_b", "speed_60", "temperature_5"]),
        ("direction_78", "stuck", ["direction_78", "speed_80_b"]),
        ("spread_80", "range_mark", ["spread_80", "speed_80"]),
        ("temperature_5", "icing", ["temperature_5"]),
        ("*", "clock_step", ["speed_80", "speed_80_b", "speed_60"]),
    ],
)
def test_what_explains_a_span_stands_beside_it(channel: str, rule: str, columns: list[str]):
    record = record_of()
    assert list(span_window(record, span_of(record, channel, 900, 950, rule))) == columns


def test_an_absent_interval_is_a_gap_and_the_edges_are_those_of_the_record():
    record = record_of()
    frame = record.raw.drop(record.raw.index[100:110])
    record = replace(record, reading=replace(record.reading, frame=frame))
    window = span_window(record, span_of(record, "speed_80", 0, 5, "step"))
    assert window.index[0] == record.raw.index[0]
    assert window["speed_80"].isna().sum() == 10
    assert (window.index.to_series().diff().dropna() == record.interval).all()


def test_a_long_window_holds_daily_means_and_a_direction_goes_through_north():
    days = 60
    direction = np.tile([350.0, 20.0], days * DAY // 2)  # unit vectors: 5 degrees
    speed = np.full(days * DAY, 8.0)
    speed[::2] = 6.0
    record = record_of(days, direction_78=direction, speed_80_b=speed)
    window = span_window(record, span_of(record, "direction_78", 0, 55 * DAY - 1, "stuck"))
    assert len(window) == 57  # 55 days and two days after
    np.testing.assert_allclose(window["direction_78"], 5.0, atol=1e-9)
    np.testing.assert_allclose(window["speed_80_b"], 7.0)


WORDS = {"decision": "accepted", "reason": "seen, twice", "who": "E. Marsh", "when": "2026-11-30"}


def test_decisions_go_into_the_file_and_out_again(tmp_path):
    file = tmp_path / "ledger.csv"
    spans = spans_to_review(with_spans(record_of(), *SOME))
    by_hand = decision_row(
        channel="speed_60",
        start=spans["from"][2],
        stop=spans["to"][2],
        rule="manual",
        reason="cup changed",
        decision="accepted",
        who="O. Quill",
        when="2026-11-01",
    )
    write_ledger(by_hand, file)
    before = file.read_bytes()
    rows = decision_rows(spans.iloc[1:], bulk=True, **WORDS)
    whole = add_to_ledger(file, rows)
    pd.testing.assert_frame_equal(read_ledger(file), whole)
    assert whole["who"].tolist() == ["O. Quill", "E. Marsh", "E. Marsh"]
    assert whole["reason"].tolist()[1:] == ["bulk, 2 spans of step at once: seen, twice"] * 2
    assert whole["count"].tolist() == [0, 6, 144]
    assert whole["threshold"].tolist() == ["", "1", "1"]
    assert whole["from"].tolist()[1:] == spans["from"].tolist()[1:]
    take_from_ledger(file, rows)
    assert file.read_bytes() == before
    assert [path.name for path in tmp_path.iterdir()] == ["ledger.csv"]


def test_a_decision_acts_when_the_record_is_built_again():
    record = record_of()
    spans = spans_to_review(record)
    absurd = spans[spans["rule"] == "range"]
    keep = decision_rows(absurd, **{**WORDS, "decision": "rejected"})
    again = build_record(record.reading, CheckSettings(masking_rules=["range"]), keep)
    assert record.masked["speed_80"].max() < 468.0
    assert again.masked["speed_80"].max() == 468.0
    assert spans_to_review(again).set_index("rule").loc["range", "decision"] == "rejected"


def test_what_was_not_written_last_is_not_taken_back(tmp_path):
    file = tmp_path / "ledger.csv"
    spans = spans_to_review(with_spans(record_of(), *SOME))
    rows = decision_rows(spans.iloc[[0]], **WORDS)
    add_to_ledger(file, rows)
    add_to_ledger(file, decision_rows(spans.iloc[[1]], **WORDS))
    before = file.read_bytes()
    with pytest.raises(StudyError, match="Only what was written last is taken back"):
        take_from_ledger(file, rows)
    assert file.read_bytes() == before


def test_a_write_that_fails_leaves_the_file_as_it_was(tmp_path, monkeypatch):
    file = tmp_path / "ledger.csv"
    spans = spans_to_review(with_spans(record_of(), *SOME))
    add_to_ledger(file, decision_rows(spans.iloc[[0]], **WORDS))
    before = file.read_bytes()

    def half(ledger, path):
        path.write_text("channel,fr")
        raise OSError("no space left")

    monkeypatch.setattr("windkit.study.review.write_ledger", half)
    with pytest.raises(OSError, match="no space left"):
        add_to_ledger(file, decision_rows(spans.iloc[[1]], **WORDS))
    assert file.read_bytes() == before
    assert [path.name for path in tmp_path.iterdir()] == ["ledger.csv"]


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"who": ""}, "who is empty"),
        ({"reason": ""}, "a person's decision has no reason"),
        ({"who": "automatic"}, "this name stands for the checks"),
    ],
)
@pytest.mark.parametrize("bulk", [False, True])
def test_a_decision_without_name_or_reason_is_refused(change, words, bulk):
    spans = spans_to_review(with_spans(record_of(), *SOME))
    with pytest.raises(StudyError, match="(?i)" + words):
        decision_rows(spans, bulk=bulk, **{**WORDS, **change})


def test_a_span_inside_a_masked_one_or_decided_with_a_wider_one_waits_no_more():
    record = with_spans(record_of(), *SOME, ("speed_20", "shadow", "2026-01-07", "2026-01-08", 144))
    wide = decision_row(
        channel="speed_60",
        start=pd.Timestamp("2026-01-01", tz="UTC"),
        stop=pd.Timestamp("2026-01-10", tz="UTC"),
        rule="manual",
        reason="bearing worn",
        decision="accepted",
        who="E. Marsh",
        when="2026-11-30",
    )
    also = wide.assign(channel="speed_80", rule="step", decision="rejected")
    ledger = pd.concat([record.ledger, wide, also], ignore_index=True)
    changed = replace(record, ledger=ledger)

    def states(**how: bool) -> dict[tuple[str, str], str]:
        spans = spans_to_review(changed, **how)
        return {(row.channel, row.rule): row.state for row in spans.itertuples()}

    assert states() == {
        ("speed_80", "range"): "masked",
        ("speed_60", "step"): "already masked",
        ("speed_80", "step"): "decided",
        ("speed_20", "shadow"): "waiting",
    }
    assert states(averaged=True)["speed_20", "shadow"] == "dealt with by averaging"
