"""The checked record: masked through its ledger, replayed from it, every value counted."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from scipy import stats
from station_examples import channel, reading_of, settings

from windkit.study.checks import CheckSettings
from windkit.study.errors import StudyError
from windkit.study.hourly import hourly_weighted_directions
from windkit.study.ledger import decision_row, read_ledger, write_ledger
from windkit.study.reading import Reading
from windkit.study.record import build_record, replay

#: The made-up values are white noise: what moves like no weather is not the subject here.
FEW = CheckSettings(masking_rules=["range", "stuck"])


def mast(count: int = 4464, *, seed: int = 5) -> Reading:
    """A month with a stuck vane, an absurd speed, missing temperatures and calms."""
    rng = np.random.default_rng(seed)
    speed = np.round(rng.weibull(2.0, count) * 8, 2)
    speed[:6] = [0.2, 0.3, 9.0, 9.0, 9.0, 9.0]
    speed[700] = 468.0
    direction = np.round(rng.uniform(0, 359.9, count), 1)
    direction[1000:1100] = 123.0
    speed[1000:1100] = np.maximum(speed[1000:1100], 3.0)  # below, a vane may rest
    temperature = np.round(rng.normal(280, 3, count), 1)
    temperature[2000:2050] = np.nan
    columns = {"speed_80": speed, "direction_78": direction, "temperature_5": temperature}
    return reading_of(columns, settings())


def test_every_value_is_counted_once():
    record = build_record(mast(), FEW)
    counts = record.counts.set_index("channel")
    assert counts.loc["speed_80", "masked"] == 1
    assert counts.loc["direction_78", "masked"] == 100
    assert counts.loc["temperature_5", "no_value"] == 50
    whole = counts[["absent", "no_value", "masked", "kept"]].sum(axis=1)
    assert (whole == counts["expected"]).all()
    assert (record.raw["speed_80"] == 468.0).sum() == 1  # masked, never deleted


def test_recovery_stands_before_and_after_by_month():
    recovery = build_record(mast(), FEW).recovery.set_index("channel")
    assert recovery["month"].unique().tolist() == ["2026-01"]
    assert recovery.loc["temperature_5", "before"] == pytest.approx(4414 / 4464)
    assert recovery.loc["direction_78", "before"] == 1.0
    assert recovery.loc["direction_78", "after"] == pytest.approx(4364 / 4464)


def test_replaying_the_written_ledger_gives_the_same_record(tmp_path):
    reading = mast()
    keep = decision_row(
        channel="direction_78",
        start=reading.frame.index[1000],
        stop=reading.frame.index[1050],
        rule="stuck",
        reason="the vane was seen to move",
        decision="rejected",
        who="E. Marsh",
        when="2026-02-03",
    )
    drop = decision_row(
        channel="*",
        start=reading.frame.index[3000],
        stop=reading.frame.index[3010],
        rule="manual",
        reason="mast lowered for service",
        decision="accepted",
        who="E. Marsh",
        when="2026-02-03",
    )
    record = build_record(reading, FEW, pd.concat([keep, drop], ignore_index=True))
    assert record.counts.set_index("channel")["masked"].tolist() == [11, 60, 10]
    write_ledger(record.ledger, tmp_path / "ledger.csv")
    again = read_ledger(tmp_path / "ledger.csv")
    pd.testing.assert_frame_equal(replay(reading, again), record.frame)
    # The whole ledger handed back finds its automatic rows anew and changes nothing.
    pd.testing.assert_frame_equal(build_record(reading, FEW, again).ledger, record.ledger)


def test_a_check_that_does_not_mask_only_lists_suspects():
    record = build_record(mast(), CheckSettings(masking_rules=["range"]))
    assert record.counts.set_index("channel").loc["direction_78", "masked"] == 0
    assert "stuck" in set(record.suspects["rule"])


def test_a_suspect_that_a_person_decided_on_waits_no_more():
    few = CheckSettings(masking_rules=["range"])
    waiting = build_record(mast(), few).suspects
    vane = waiting[(waiting["rule"] == "stuck") & (waiting["channel"] == "direction_78")]
    assert len(vane) == 1
    keep = decision_row(
        channel="direction_78",
        start=vane["from"].iloc[0],
        stop=vane["to"].iloc[0],
        rule="stuck",
        reason="seen to move",
        decision="rejected",
        who="E. Marsh",
        when="2026-02-03",
    )
    left = build_record(mast(), few, keep).suspects
    assert len(left) == len(waiting) - 1
    assert "direction_78" not in set(left.loc[left["rule"] == "stuck", "channel"])


def test_the_weighted_direction_is_that_of_the_mean_vector():
    columns = {
        "speed_80": np.array([1.0, 1.0, 1.0, 1.0, 1.0, 10.0]),
        "direction_78": np.array([0.0, 0.0, 0.0, 0.0, 0.0, 90.0]),
        "temperature_5": np.full(6, 280.0),
    }
    record = build_record(reading_of(columns, settings()), FEW)
    # Occurrence: five of six from north. Transport: 10 m/s from east against 5 m/s from north.
    plain = record.hourly()["direction_78"].iloc[0]
    weighted = hourly_weighted_directions(record.masked, record.settings)["direction_78"].iloc[0]
    assert plain == pytest.approx(np.degrees(np.arctan2(1, 5)))
    assert weighted == pytest.approx(np.degrees(np.arctan2(10, 5)))


def test_a_calm_has_no_direction_and_counts():
    record = build_record(mast(), FEW)
    calm = record.raw["speed_80"] < 0.5
    assert record.frame.loc[calm, "direction_78"].isna().all()
    assert record.frame.loc[calm, "speed_80"].notna().all()
    counts = record.counts.set_index("channel")
    assert (
        counts.loc["direction_78", "calm"] == (calm & record.masked["direction_78"].notna()).sum()
    )


def test_nothing_left_of_the_main_speed_is_refused():
    reading = mast()
    lost = decision_row(
        channel="speed_80",
        start=reading.frame.index[0],
        stop=reading.frame.index[-1] + reading.interval,
        rule="manual",
        reason="test",
        decision="accepted",
        who="E. Marsh",
        when="2026-02-03",
    )
    with pytest.raises(StudyError, match="nothing is left of speed_80"):
        build_record(reading, FEW, lost)


def test_hours_need_their_share_of_intervals():
    hourly = build_record(mast(), FEW).hourly(0.8333)
    record = build_record(mast(), FEW)
    assert hourly.index[0] == pd.Timestamp("2026-01-01", tz="UTC")
    assert len(hourly) == 744
    assert hourly["speed_80"].iloc[0] == pytest.approx((0.2 + 0.3 + 4 * 9.0) / 6)
    absurd = 700 // 6  # one of six is masked: five sixths are left
    assert hourly["speed_80"].iloc[absurd] == pytest.approx(
        record.frame["speed_80"].iloc[absurd * 6 : absurd * 6 + 6].mean()
    )
    assert np.isnan(record.hourly(1.0)["speed_80"].iloc[absurd])


def test_hourly_directions_agree_with_scipy():
    # scipy.stats.circmean is the outside reference for the mean of unit vectors.
    reading = mast()
    record = build_record(reading, FEW)
    hourly = record.hourly(1 / 6)["direction_78"]
    frame = record.frame["direction_78"]
    for hour in (0, 1, 100, 700):
        values = frame.iloc[hour * 6 : hour * 6 + 6].dropna()
        expected = stats.circmean(values, high=360.0)
        assert hourly.iloc[hour] == pytest.approx(expected, abs=1e-9)


def test_calms_are_observed_directions_but_do_not_turn_the_mean():
    columns = {
        "speed_80": np.array([0.1, 0.1, 5.0, 5.0, 5.0, 5.0] * 2),
        "direction_78": np.array([180.0, 180.0, 350.0, 350.0, 10.0, 10.0] * 2),
        "temperature_5": np.full(12, 280.0),
    }
    columns["speed_80"][6:] = 0.1
    hourly = build_record(reading_of(columns, settings())).hourly(1.0)
    assert hourly["direction_78"].iloc[0] == pytest.approx(0.0, abs=1e-9)
    assert np.isnan(hourly["direction_78"].iloc[1])
    assert hourly["speed_80"].tolist() == pytest.approx([20.2 / 6, 0.1])


def test_spreads_and_extremes_keep_their_meaning_over_an_hour():
    station = settings(
        channels=[
            channel("speed_80", "a", "wind_speed", "m/s", 80.0),
            channel("spread_80", "b", "wind_speed", "m/s", 80.0, statistic="sd"),
            channel("gust_80", "c", "wind_speed", "m/s", 80.0, statistic="max"),
            channel("lull_80", "d", "wind_speed", "m/s", 80.0, statistic="min"),
        ],
        direction_reference=None,
        main_wind_direction=None,
    )
    values = np.array([1.0, 2.0, 3.0, 4.0, 5.0, 6.0])
    columns = {f"{name}_80": values for name in ("speed", "spread", "gust", "lull")}
    hour = build_record(reading_of(columns, station)).hourly().iloc[0]
    assert hour.tolist() == pytest.approx([3.5, np.sqrt(91 / 6), 6.0, 1.0])


def test_hours_of_an_hourly_record_keep_their_values_even_off_the_hour():
    station = settings(
        interval_min=60.0,
        channels=[channel("speed_80", "a", "wind_speed", "m/s", 80.0)],
        direction_reference=None,
        main_wind_direction=None,
    )
    reading = reading_of({"speed_80": np.array([1.0, 2.0])}, station, start="2026-01-01 00:51")
    hourly = build_record(reading, FEW).hourly()
    assert hourly.index[0] == pd.Timestamp("2026-01-01 01:00", tz="UTC")
    assert hourly["speed_80"].tolist() == [1.0, 2.0]


def test_an_interval_that_does_not_divide_an_hour_is_refused():
    station = settings(
        interval_min=25.0,
        channels=[channel("speed_80", "a", "wind_speed", "m/s", 80.0)],
        direction_reference=None,
        main_wind_direction=None,
    )
    record = build_record(reading_of({"speed_80": np.array([1.0, 2.0])}, station))
    with pytest.raises(StudyError, match="a whole number of intervals"):
        record.hourly()


def test_a_persons_count_is_that_of_the_record_whatever_was_written():
    reading = mast()
    row = decision_row(
        channel="temperature_5",
        start=reading.frame.index[1990],
        stop=reading.frame.index[2060],
        rule="manual",
        reason="wet",
        decision="accepted",
        who="E. Marsh",
        when="2026-02-03",
        count=999,
    )
    last = build_record(reading, FEW, row).ledger.iloc[-1]
    assert (last["who"], last["count"]) == ("E. Marsh", 20)  # 70 intervals, 50 without a value


def test_a_decision_outside_the_record_is_refused():
    reading = mast()
    start = reading.frame.index[-1] + pd.Timedelta(days=300)
    row = decision_row(
        channel="speed_80",
        start=start,
        stop=start + pd.Timedelta(hours=1),
        rule="manual",
        reason="wet",
        decision="accepted",
        who="E. Marsh",
        when="2026-02-03",
    )
    with pytest.raises(StudyError, match="A decision concerns values of the record"):
        build_record(reading, FEW, row)
