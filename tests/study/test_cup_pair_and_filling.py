"""Averaging by direction, gap filling and the worth of checks, on masts whose truth is known."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from scipy import signal, stats
from station_examples import channel, reading_of, settings

from windkit.study.check_worth import worth_of_checks
from windkit.study.checks import CheckSettings, mast_shadows, pair_ratio
from windkit.study.cup_pair import speed_of_pair
from windkit.study.errors import StudyError
from windkit.study.gap_filling import fill_gaps
from windkit.study.record import Record, build_record

COUNT = 40_000


def true_wind(seed: int = 4) -> tuple[np.ndarray, np.ndarray]:
    """A speed and a direction with memory, from latent normal series."""
    rng = np.random.default_rng(seed)

    def memory(steps: float) -> np.ndarray:
        keep = np.exp(-1 / steps)
        return signal.lfilter([np.sqrt(1 - keep**2)], [1, -keep], rng.normal(size=COUNT))

    speed = stats.weibull_min(2.0, scale=8.5).ppf(stats.norm.cdf(memory(150)))
    return speed, (120 * memory(200)) % 360


def mast(*, deficit: float = 0.1, gap: slice | None = None) -> tuple[Record, np.ndarray]:
    """Two cups on opposite booms and one below; the mast shades each within 20 degrees."""
    rng = np.random.default_rng(1)
    speed, direction = true_wind()
    shade = {}
    for name, back in (("a", 135.0), ("b", 315.0)):
        away = np.abs((direction - back + 180) % 360 - 180)
        shade[name] = 1 - deficit * (away < 20)
    columns = {
        "speed_a": speed * shade["a"] * (1 + 0.004 * rng.normal(size=COUNT)),
        "speed_b": speed * shade["b"] * (1 + 0.004 * rng.normal(size=COUNT)) * 1.01,
        "speed_40": speed * 0.88 * (1 + 0.02 * rng.normal(size=COUNT)),
        "direction_78": direction,
        "direction_40": (direction + 4 + rng.normal(0, 1, COUNT)) % 360,
    }
    if gap is not None:
        columns["speed_a"][gap] = np.nan
        columns["direction_78"][gap] = np.nan
    station = settings(
        channels=[
            channel("speed_a", "a", "wind_speed", "m/s", 80.0, boom_bearing_deg=315.0),
            channel("speed_b", "b", "wind_speed", "m/s", 80.0, boom_bearing_deg=135.0),
            channel("speed_40", "c", "wind_speed", "m/s", 40.0),
            channel("direction_78", "d", "wind_from_direction", "deg", 78.0),
            channel("direction_40", "e", "wind_from_direction", "deg", 40.0),
        ],
        main_wind_speed="speed_a",
    )
    few = CheckSettings(masking_rules=["range"])
    return build_record(reading_of(columns, station), few), speed


def test_the_shadow_is_found_where_it_was_laid_and_agrees_with_the_boom():
    record, _ = mast()
    shadows = {s.channel: s for s in mast_shadows(record.reading, CheckSettings())}
    for name, back in (("speed_a", 135.0), ("speed_b", 315.0)):
        found = shadows[name]
        assert found.agrees
        assert found.boom_back == back
        assert found.sector_from == pytest.approx(back - 22.5, abs=5.1)
        assert found.sector_to == pytest.approx(back + 22.5, abs=5.1)
        assert found.deficit == pytest.approx(0.1, abs=0.01)


def test_a_shadow_the_boom_does_not_explain_is_said_so():
    record, _ = mast()
    channels = [
        c.model_copy(update={"boom_bearing_deg": 45.0}) if c.name == "speed_a" else c
        for c in record.settings.channels
    ]
    turned = replace(
        record.reading, settings=record.settings.model_copy(update={"channels": channels})
    )
    found = next(s for s in mast_shadows(turned, CheckSettings()) if s.channel == "speed_a")
    assert not found.agrees


def test_the_pair_ratio_by_direction_is_the_medians_of_its_bins():
    record, _ = mast()
    one, other = (record.settings.channel(name) for name in ("speed_a", "speed_b"))
    table = pair_ratio(record.reading, one, other, bin_width=30.0)
    raw = record.raw
    inside = ((raw["direction_78"] - 165) % 360 < 30) & (
        raw[["speed_a", "speed_b"]].min(axis=1) >= 4
    )
    inside |= (
        ((raw["direction_78"] - 165) % 360 < 30)
        & (raw[["speed_a", "speed_b"]].max(axis=1) >= 5)
        & (raw[["speed_a", "speed_b"]].min(axis=1) > 1)
    )
    expected = (raw["speed_a"] / raw["speed_b"])[inside].median()
    assert table.loc[table["direction"] == 180.0, "ratio"].item() == pytest.approx(expected)


def test_the_speed_of_pair_meets_the_true_mean_and_the_plain_one_does_not():
    record, speed = mast()
    averaged = speed_of_pair(record, "speed_a", "speed_b")
    truth = speed.mean() * 1.005  # the level of a pair that is 1 % apart
    assert averaged.mean == pytest.approx(truth, rel=1e-3)
    assert averaged.plain_mean < 0.995 * truth
    assert averaged.level == pytest.approx(1 / 1.01, rel=1e-3)
    assert averaged.table["share"].sum() == pytest.approx(1.0)
    assert set(averaged.table["basis"]) == {"both", "speed_a", "speed_b"}


def test_a_lost_cup_leaves_the_other_one_even_behind_the_mast():
    record, _ = mast(gap=slice(1000, 6000))
    averaged = speed_of_pair(record, "speed_a", "speed_b")
    assert averaged.wind_speed.notna().all()
    assert (averaged.basis.iloc[1000:6000] == "speed_b").all()


def test_cups_that_are_no_pair_are_refused():
    record, _ = mast()
    with pytest.raises(StudyError, match="Name one of the pairs: speed_a and speed_b"):
        speed_of_pair(record, "speed_a", "speed_40")


def test_a_gap_is_filled_without_bias_and_stays_marked():
    gap = slice(10_000, 14_000)
    record, _ = mast(gap=gap)
    filled = fill_gaps(record, "speed_a", sources=["speed_40"])
    assert (filled.gap_count, filled.filled_count) == (4000, 4000)
    assert (filled.source.iloc[gap] == "speed_40").all()
    assert (filled.source.drop(filled.source.index[gap]) == "").all()
    # Outside reference: the wind the mast was made of.
    whole, _ = mast()
    made = whole.raw["speed_a"].to_numpy()[gap]
    assert filled.series.to_numpy()[gap].mean() == pytest.approx(made.mean(), rel=0.01)
    trial = filled.trial.iloc[0]
    assert abs(trial["bias"]) < 0.05
    error = filled.series.to_numpy()[gap] - made
    assert trial["spread"] == pytest.approx(error.std(), rel=0.3)


def test_a_direction_is_filled_with_the_vanes_mean_difference():
    gap = slice(10_000, 14_000)
    record, _ = mast(gap=gap)
    filled = fill_gaps(record, "direction_78")
    whole, _ = mast()
    made = whole.frame["direction_78"].to_numpy()[gap]
    error = (filled.series.to_numpy()[gap] - made + 180) % 360 - 180
    assert np.nanmean(error) == pytest.approx(0.0, abs=0.1)
    assert np.nanstd(error) == pytest.approx(1.0, abs=0.1)


def test_filling_from_another_kind_is_refused():
    record, _ = mast()
    with pytest.raises(StudyError, match="from another channel of the same kind"):
        fill_gaps(record, "speed_a", sources=["direction_78"])
    with pytest.raises(StudyError, match="there is no mean speed or direction 'temperature'"):
        fill_gaps(record, "temperature")


def test_the_worth_of_a_check_is_the_change_without_it():
    record, _ = mast()
    frame = record.raw.copy()
    frame.iloc[:400, frame.columns.get_loc("speed_a")] = 90.0
    reading = replace(record.reading, frame=frame)
    spoiled = build_record(reading, CheckSettings(masking_rules=["range"]))
    table = worth_of_checks(spoiled, lambda v: v**3).set_index("rule")
    base = frame["speed_a"].iloc[400:]
    assert table.loc["all rules", "mean_speed"] == pytest.approx(base.mean())
    assert table.loc["range", "mean_speed"] == pytest.approx(frame["speed_a"].mean())
    assert table.loc["range", "count"] == 400
    expected = (frame["speed_a"] ** 3).mean() / (base**3).mean() - 1
    assert table.loc["range", "energy_change"] == pytest.approx(expected)
    assert table.loc["shadow", "acts"] == "averages"
    assert table.loc["shadow", "speed_change"] > 0
    assert table.loc["no rule", "count"] == 400
    assert worth_of_checks(spoiled)["energy_change"].isna().all()
    assert isinstance(table, pd.DataFrame)
