"""Checks that compare: thresholds as printed, levels, lags and norths of known size."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from scipy import signal
from seeded_faults import sound
from station_examples import channel, reading_of, settings

from windkit.study.checks import (
    CHECKS,
    RULES,
    CheckSettings,
    Given,
    gust_spans,
    icing_spans,
    lag_windows,
    monthly_north,
    order_spans,
    range_mark_spans,
    run_checks,
    step_spans,
)
from windkit.study.checks.comparing import levels, long_runs, median_by
from windkit.study.errors import StudyError
from windkit.study.reading import Reading


def test_the_marks_are_those_of_the_handbook():
    # MEA-7, MEA-8, MEA-9: Bailey et al. 1997, NREL/SR-440-22223, as printed in Jain 2011,
    # tables 6-4 to 6-6 (the multiple of the gust test from memory).
    default = CheckSettings()
    assert (default.mark_mean_speed_m_s, default.mark_speed_sd_m_s) == (25.0, 3.0)
    assert default.mark_gust_m_s == 30.0
    assert (default.mark_direction_sd_low_deg, default.mark_direction_sd_high_deg) == (3.0, 75.0)
    assert (default.mark_pressure_low_pa, default.mark_pressure_high_pa) == (94e3, 106e3)
    assert default.highest_gust_factor == 2.5
    assert (default.pair_difference_m_s, default.vane_difference_deg) == (0.5, 20.0)
    assert default.height_difference_m_s_per_m * 15 == pytest.approx(2.0)  # 40/25 m
    assert default.height_difference_m_s_per_m * 30 == pytest.approx(4.0)  # 40/10 m
    assert default.step_speed_m_s_per_h == 5.0
    assert (default.step_temperature_k_per_h, default.step_pressure_pa_per_3h) == (5.0, 1000.0)


def test_every_threshold_has_a_source():
    for name, field in CheckSettings.model_fields.items():
        assert field.description, name
    assert list(CHECKS) == list(RULES)


def test_an_unknown_check_or_threshold_is_refused():
    with pytest.raises(ValueError, match="there is no check 'ice'; the checks are range"):
        CheckSettings(masking_rules=["ice"])
    with pytest.raises(ValueError, match="Extra inputs"):
        CheckSettings.model_validate({"highest_speed": 3.0})


def wind(**columns: np.ndarray) -> Reading:
    kinds = {
        "mean": ("wind_speed", "m/s", "mean"),
        "gust": ("wind_speed", "m/s", "max"),
        "temperature": ("air_temperature", "K", "mean"),
        "pressure": ("air_pressure", "Pa", "mean"),
    }
    channels = [
        channel(name, name, kinds[name][0], kinds[name][1], 10.0, statistic=kinds[name][2])
        for name in columns
    ]
    station = settings(
        channels=channels,
        main_wind_speed="mean",
        direction_reference=None,
        main_wind_direction=None,
    )
    return reading_of(dict(columns), station)


def test_a_gust_is_held_to_two_and_a_half_means():
    mean = np.array([3.0, 8.0, 8.0, 8.0])
    gust = np.array([9.0, 19.9, 20.1, 7.0])
    reading = wind(mean=mean, gust=gust)
    assert gust_spans(reading, CheckSettings())["measure"].tolist() == [pytest.approx(20.1 / 8)]
    assert order_spans(reading, CheckSettings())["measure"].tolist() == [pytest.approx(-1.0)]


def test_pressure_marks_follow_the_elevation():
    # ISO 2533: 89 875 Pa at 1000 m, 101 325 Pa at the sea.
    pressure = np.array([89_875.0, 95_000.0, 83_000.0, 90_000.0])
    reading = wind(mean=np.full(4, 8.0), pressure=pressure)
    high = range_mark_spans(reading, CheckSettings(), elevation=990.0)
    assert high["measure"].tolist() == [95_000.0, 83_000.0]
    assert len(range_mark_spans(reading, CheckSettings())) == 2


def test_steps_that_both_sensors_make_are_weather():
    count = 200
    mean = np.full(count, 8.0)
    mean[100:] = 14.0
    alone = wind(mean=mean)
    assert step_spans(alone, CheckSettings())["count"].tolist() == [6]
    station = settings(
        channels=[
            channel("a", "a", "wind_speed", "m/s", 80.0),
            channel("b", "b", "wind_speed", "m/s", 40.0),
        ],
        main_wind_speed="a",
        direction_reference=None,
        main_wind_direction=None,
    )
    both = reading_of({"a": mean, "b": 0.9 * mean}, station)
    assert step_spans(both, CheckSettings()).empty


def test_without_a_thermometer_nothing_is_called_ice():
    values = np.full(300, 0.26)
    assert icing_spans(wind(mean=values + np.arange(300) * 1e-3), CheckSettings()).empty


def test_a_short_level_in_the_middle_is_found_and_noise_is_not():
    rng = np.random.default_rng(2)
    series = rng.normal(0, 0.2, 400)
    assert levels(series, step=0.5, shortest=10) == []
    series[150:180] += 2.0
    series[155] = np.nan
    assert levels(series, step=0.5, shortest=10) == pytest.approx([150, 180], abs=1)
    drift = np.linspace(0, 3, 400) + rng.normal(0, 0.2, 400)
    assert levels(drift, step=0.5, shortest=10) == []


def test_medians_by_group_are_numpys():
    rng = np.random.default_rng(3)
    values, group = rng.normal(size=500), rng.integers(0, 7, 500)
    values[::11] = np.nan
    expected = [np.nanmedian(values[group == each]) for each in range(7)]
    assert median_by(values, group, 8, 1)[:7] == pytest.approx(expected)
    assert np.isnan(median_by(values, group, 8, 1)[7])


def test_long_runs_keep_the_long_ones():
    mask = np.array([1, 1, 0, 1, 1, 1, 0, 1], dtype=bool)
    assert long_runs(mask, 3).tolist() == [False] * 3 + [True] * 3 + [False] * 2


@pytest.mark.parametrize("hours", [-3, 0, 2, 7])
def test_a_lag_is_found_as_scipy_finds_it(hours: int):
    mast, references = sound()
    moved = mast.frame.shift(6 * hours)
    late = replace(mast, frame=moved)
    table = lag_windows(late, references[1])
    own = lag_windows(mast, references[1])
    assert (table["lag"].median() - own["lag"].median()) == pytest.approx(hours, abs=0.35)
    # Outside reference: scipy.signal.correlate on the whole record.
    a = moved["speed_80_a"].resample("1h").mean()
    b = references[1].frame["speed_100"].reindex(a.index)
    a, b = (s.fillna(s.mean()).to_numpy() - s.mean() for s in (a, b))
    lags = signal.correlation_lags(len(a), len(b))
    whole = lags[np.argmax(signal.correlate(a, b))]
    assert table["lag"].median() == pytest.approx(whole, abs=0.7)


def test_monthly_norths_are_the_mean_differences():
    mast, references = sound()
    table = monthly_north(mast, references)
    pair = table[(table["vane"] == "direction_78") & (table["against"] == "direction_58")]
    # data_demo/truth.json: north errors 1.5 and -4.0 deg.
    assert pair["difference"].mean() == pytest.approx(5.5, abs=0.3)
    assert set(table["against"]) == {
        "direction_78",
        "direction_58",
        *(each.settings.name for each in references),
    }


def test_checks_run_on_the_smallest_records_and_on_missing_values():
    for count in (2, 3, 20):
        for fill in (5.0, np.nan):
            columns = {
                "speed_80": np.full(count, fill),
                "direction_78": np.full(count, fill),
                "temperature_5": np.full(count, 270.0),
            }
            columns["speed_80"][0] = 5.0
            assert isinstance(run_checks(reading_of(columns, settings())), pd.DataFrame)
    assert Given().references == ()
    assert issubclass(StudyError, ValueError)
