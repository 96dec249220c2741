"""Site conditions: words that follow from figures on paper, and what is not assessed."""

from __future__ import annotations

import dataclasses
import tomllib

import numpy as np
import pandas as pd
import pytest
from test_hub import channel

from tests.small_study import SETTINGS, edit, run_steps
from windkit.study.artifacts import load_artifact
from windkit.study.conditions import _counted, _warnings, assess_conditions
from windkit.study.errors import StudyError
from windkit.study.folder import open_study
from windkit.study.settings import Settings, TurbineSettings, parse_settings
from windkit.study.site_air import site_air
from windkit.study.site_turbulence import SiteTurbulence, site_turbulence
from windkit.study.verdict import SiteFigures, about_the_machine, verdict_matrix, verdict_table

V = np.array([10.0, 15.0, 20.0, 25.0])
#: id IEC-3, IEC-3b: normal turbulence of class A at 10, 15, 20, 25 m/s over the speed.
CLASS_A = np.array([2.096 / 10, 2.696 / 15, 3.296 / 20, 3.896 / 25])
CLASS_B = np.array([1.834 / 10, 2.359 / 15, 2.884 / 20, 3.409 / 25])

FIGURES = SiteFigures(
    mean_speed=8.0,
    v50=40.0,
    v50_standard_error=1.0,
    v1=32.0,
    gust_50=52.0,
    speed=V,
    ambient=CLASS_B * 1.01,
    effective=CLASS_A * 1.01,
    shear_exponent=0.15,
    air_density=1.18,
    lowest_temperature_c=-15.0,
    highest_temperature_c=30.0,
    why_not={},
)


def turbine(**declared) -> TurbineSettings:
    settings = parse_settings(tomllib.loads(SETTINGS)).turbine
    return settings.model_copy(update=declared)


def word(table: pd.DataFrame, condition: str, against: str) -> str:
    rows = table[table["condition"].str.startswith(condition) & (table["against"] == against)]
    assert len(rows) == 1, rows
    return rows["verdict"].iloc[0]


@pytest.mark.parametrize(
    ("condition", "against", "expected"),
    # ids IEC-1, IEC-1b: Vave 10, 8.5, 7.5; Vref 50, 42.5, 37.5; Ve50 70, 59.5, 52.5; V1 40, 34, 30.
    [
        ("yearly mean", "class II", "inside"),
        ("yearly mean", "class III", "outside"),
        ("ten-minute wind of 50", "class II", "inside"),
        ("ten-minute wind of 50", "class III", "outside"),
        ("3 s gust", "class III", "near the limit"),
        ("ten-minute wind of one", "class III", "outside"),
        ("ten-minute wind of one", "class II", "inside"),
        ("turbulence, ambient", "class A", "inside"),
        ("turbulence, ambient", "class B", "outside"),
        ("turbulence with wakes", "class A", "outside"),
        ("turbulence with wakes", "class A+", "inside"),
        ("shear exponent", "every class", "inside"),
        ("mean air density", "every class", "inside"),
        ("lowest temperature", "normal range of the standard", "outside"),
        ("lowest temperature", "extreme range of the standard", "inside"),
        ("highest temperature", "normal range of the standard", "inside"),
    ],
)
def test_the_words_follow_from_the_limits(condition, against, expected):
    assert word(verdict_table(FIGURES, turbine()), condition, against) == expected


def test_what_the_machine_declares_is_held_against_the_site():
    table = verdict_table(
        FIGURES,
        turbine(
            design_class="II", turbulence_class="B", lowest_temperature_c=-10.0,
            highest_temperature_c=40.0,
        ),
    )  # fmt: skip
    assert word(table, "ten-minute wind of 50", "the machine") == "inside"
    assert word(table, "turbulence, ambient", "the machine") == "outside"
    assert word(table, "lowest temperature", "the machine") == "outside"
    assert word(table, "highest temperature", "the machine") == "inside"


def test_a_declared_figure_outranks_the_class():
    table = verdict_table(
        FIGURES, turbine(design_class="III", design_reference_speed_m_s=41.0, design_turbulence=0.2)
    )
    assert word(table, "ten-minute wind of 50", "the machine") == "inside"
    assert word(table, "turbulence with wakes", "the machine") == "inside"
    note = table.set_index(["condition", "against"])["note"]
    assert note["ten-minute wind of 50 years, windiest turbine", "the machine"] == ""
    close = verdict_table(FIGURES, turbine(design_reference_speed_m_s=40.5))
    told = close.set_index(["condition", "against"])["note"]
    assert (
        "within one standard error"
        in told["ten-minute wind of 50 years, windiest turbine", "the machine"]
    )


def test_what_nobody_declared_or_measured_is_not_assessed():
    blind = dataclasses.replace(
        FIGURES, v50=None, v1=None, gust_50=None, speed=None, ambient=None, effective=None,
        lowest_temperature_c=None, why_not={"extremes": "too short", "turbulence": "no spread"},
    )  # fmt: skip
    table = verdict_table(blind, turbine())
    assert word(table, "ten-minute wind of 50", "class I") == "not assessed"
    assert word(table, "turbulence, ambient", "class A") == "not assessed"
    assert word(table, "lowest temperature", "extreme range of the standard") == "not assessed"
    notes = table.set_index(["condition", "against"])["note"]
    assert notes["ten-minute wind of 50 years, windiest turbine", "class I"] == "too short"
    assert notes["turbulence, ambient, 90 % value", "class A"] == "no spread"
    assert notes["yearly mean speed at the windiest hub", "the machine"] == (
        "not declared in [turbine]"
    )
    open_rows = table[table["group"] == "without data"]
    assert (open_rows["verdict"] == "not assessed").all()
    assert "flow inclination" in open_rows["condition"].tolist()


def test_a_small_rotor_is_held_against_the_small_classes():
    # IEC 61400-2:2013, table 1: class IV has 6 m/s and 30 m/s; scope up to 200 m2. The normal
    # turbulence there is 0.18 (15 + 2 V)/(3 V), 15.6 % at 25 m/s.
    calm = dataclasses.replace(FIGURES, mean_speed=5.5, v50=29.0)
    table = verdict_table(calm, turbine(rotor_diameter_m=8.0))
    assert word(table, "yearly mean", "class IV") == "inside"
    assert word(table, "ten-minute wind of 50", "class IV") == "inside"
    assert "class A" not in table["against"].tolist()
    assert word(table, "turbulence, ambient", "small turbines") == "inside"


def test_the_matrix_has_a_word_for_each_class():
    matrix = verdict_matrix(verdict_table(FIGURES, turbine(design_class="II")), "wind")
    assert list(matrix.columns) == [
        "Condition", "Site", "Unit", "class I", "class II", "class III", "class T", "the machine",
    ]  # fmt: skip
    assert matrix["Site"].tolist() == [8.0, 40.0, 52.0, 32.0]
    assert set(matrix["the machine"]) == {"inside"}


def test_each_passed_limit_of_the_machine_is_a_warning_with_site_and_limit():
    # id IEC-3: class A at 15 m/s has 2.696/15 = 18.0 %.
    table = verdict_table(FIGURES, turbine(design_class="II", turbulence_class="A"))
    passed = [text for text in _warnings(table) if text.startswith("Outside")]
    assert len(passed) == 1
    assert "turbulence with wakes" in passed[0]
    assert "the limit of the machine is 21.0%" in passed[0]  # 2.096/10, the lowest bin
    assert "from memory" not in " ".join(table["note"])


def test_what_passes_a_class_is_told_beside_the_count():
    told = _counted(verdict_table(FIGURES, turbine(design_class="II", turbulence_class="A+")))
    assert "Of the 15 conditions" in told
    assert "Outside against a class: yearly mean speed at the windiest hub (class III)" in told
    assert "turbulence with wakes, 90 % value (class A, class B, class C)" in told


@pytest.mark.parametrize(
    ("v50", "expected", "margin"),
    # One standard error is 1 m/s: 42.5 less 0.9 is near, less 1.1 is not; beyond is outside.
    [(41.4, "inside", 1.1), (41.6, "near the limit", 0.9), (42.6, "outside", -0.1)],
)
def test_near_is_a_word_of_its_own_and_beyond_is_outside(v50, expected, margin):
    table = verdict_table(dataclasses.replace(FIGURES, v50=v50), turbine())
    assert word(table, "ten-minute wind of 50", "class II") == expected
    row = table[table["condition"].str.startswith("ten-minute wind of 50")].set_index("against")
    assert row.loc["class II", "margin"] == pytest.approx(margin)
    cold = table[table["condition"] == "lowest temperature"].set_index("against")
    assert cold["margin"]["extreme range of the standard"] == pytest.approx(5.0)


# --- turbulence ------------------------------------------------------------------------------


def mast(interval: int = 10, *, apart: float = 450.0) -> Settings:
    """The small study with a spread beside the main cup, three turbines in a row."""
    text = SETTINGS.replace("interval_min = 60", f"interval_min = {interval}", 1)
    spread = channel("speed_60_sd", "wind_speed", 60.0, "m/s").replace(
        'quantity = "wind_speed"\n', 'quantity = "wind_speed"\nstatistic = "sd"\n'
    )
    at = text.index('[[mast.channels]]\nname = "speed_40"')
    text = text[:at] + spread + text[at:]
    text = text.replace("easting_m = 400.0", f"easting_m = {apart}").replace(
        "easting_m = 800.0", f"easting_m = {2 * apart}"
    )
    return parse_settings(tomllib.loads(text))


def gusty(seed: int = 1, n: int = 40_000) -> pd.DataFrame:
    """Intensity normal about 12 % with a spread of 2 %, independent of speed and direction."""
    rng = np.random.default_rng(seed)
    speed = 9 * rng.weibull(2, n)
    intensity = np.clip(rng.normal(0.12, 0.02, n), 0.01, None)
    index = pd.date_range("2022-01-01", periods=n, freq="10min", tz="UTC", name="time")
    return pd.DataFrame(
        {
            "speed_60": speed,
            "speed_60_sd": intensity * speed,
            "direction_58": rng.uniform(0, 360, n),
        },
        index=index,
    )


def found(settings: Settings, frame: pd.DataFrame) -> SiteTurbulence:
    out = site_turbulence(settings, frame, "speed_60", rated_speed=12.0)
    assert isinstance(out, SiteTurbulence), out
    return out


def test_the_ninety_per_cent_value_and_its_class():
    # id IEC-4: mean + 1.28 spreads: 0.12 + 1.28 x 0.02 = 14.56 % in every bin. Iref (0.75 V +
    # 5.6)/V falls below that beyond 12.1 m/s for class C and beyond 19.3 m/s for class B; class A
    # has 15.6 % at 25 m/s and is the mildest that is nowhere below.
    out = found(mast(), gusty())
    busy = out.by_speed[out.by_speed["count"] > 500]
    assert busy["mean"].to_numpy() == pytest.approx(0.12, abs=0.002)
    assert busy["representative"].to_numpy() == pytest.approx(0.1456, abs=0.004)
    assert out.by_speed["wind_speed_m_s"].max() > 20.0
    assert out.mildest == "A"
    assert out.strong == pytest.approx(0.12, abs=0.002)
    assert out.judged == (pytest.approx(7.2), 25.0)
    frame = gusty()
    slow = found(mast(), frame[frame["speed_60"] < 20.5])
    assert slow.bins_judged == (8.0, 20.0)
    assert out.by_sector["mean"].to_numpy() == pytest.approx(0.12, abs=0.002)
    assert out.by_sector["count"].sum() == (gusty()["speed_60"] >= 5).sum()
    assert out.classes["class A"].loc[15.0] == pytest.approx(0.17973, abs=1e-5)  # id IEC-3


def test_wakes_add_to_the_most_disturbed_turbine():
    # id IEC-8b's formula: sigma_T = sqrt(0.9 V^2/(1.5 + 0.3 d sqrt(V))^2 + sigma^2); the middle
    # one of three has neighbours at 5 D on both sides: two wakes of 6 % of the time (id IEC-9).
    out = found(mast(apart=450.0), gusty())
    row = out.by_speed[out.by_speed["wind_speed_m_s"] == 10.0].iloc[0]
    ambient = row["representative"]
    wake = np.sqrt(0.9 / (1.5 + 0.3 * 5 * np.sqrt(10.0)) ** 2 + ambient**2)
    expected = (0.88 * ambient**10 + 0.12 * wake**10) ** 0.1
    assert row["effective"] == pytest.approx(expected, rel=1e-9)
    assert out.nearest_neighbour == ("T2", pytest.approx(5.0))
    alone = found(mast(apart=2000.0), gusty())
    assert alone.by_speed["effective"].isna().all()
    assert alone.nearest_neighbour[1] == np.inf


def test_thin_bins_are_left_out_and_the_rest_counts_everything():
    frame = gusty()
    out = found(mast(), frame)
    assert (out.by_speed["count"] >= 20).all()
    inside = frame["speed_60"].between(9.5, 10.5, inclusive="left").sum()
    at_ten = out.by_speed.loc[out.by_speed["wind_speed_m_s"] == 10.0, "count"].iloc[0]
    assert at_ten == inside


def test_hourly_intervals_and_a_missing_spread_are_said():
    hourly = site_turbulence(mast(60), gusty(), "speed_60", rated_speed=12.0)
    assert isinstance(hourly, str)
    assert "these last 60" in hourly
    without = site_turbulence(mast(), gusty()[["speed_60"]], "speed_60", rated_speed=12.0)
    assert isinstance(without, str)
    assert "no standard deviation" in without


# --- temperature and ice -----------------------------------------------------------------------


def test_hours_and_days_below_the_cold_limit_of_a_year():
    # Ten nights of six hours at -25 degC in January, the rest at +5: in a year of 8766 h the
    # months weigh the same, so that 60 of 744 hours of January are 60/744/12 of the year.
    settings = parse_settings(
        tomllib.loads(SETTINGS.replace("height_m = 5.0", "height_m = 90.0", 1))
    )
    index = pd.date_range("2022-01-01", "2023-01-01", freq="h", tz="UTC", name="time")[:-1]
    cold = (index.month == 1) & (index.day <= 10) & (index.hour < 6)
    frame = pd.DataFrame({"temperature_5": np.where(cold, -25.0, 5.0) + 273.15}, index=index)
    out = site_air(settings, frame, pd.Series(dtype=float), hub_height=90.0)
    line = out.table.iloc[0]
    assert line["hours_below_cold_limit_per_year"] == pytest.approx(8766 * 60 / 744 / 12)
    assert line["days_below_cold_limit_per_year"] == pytest.approx(365.25 * 10 / 31 / 12)
    assert (out.lowest_c, out.highest_c) == (pytest.approx(-25), pytest.approx(5))
    assert out.icing_hours is None
    share = out.frequency.iloc[:, 0]
    assert share.sum() == pytest.approx(1.0)
    assert share[-25] == pytest.approx(60 / 8760)


def test_icing_hours_need_cold_and_damp_at_once():
    text = SETTINGS.replace(
        "[[references]]",
        channel("rh", "relative_humidity", 5.0, "1") + "[[references]]",
        1,
    )
    settings = parse_settings(tomllib.loads(text))
    index = pd.date_range("2022-01-01", "2023-01-01", freq="h", tz="UTC", name="time")[:-1]
    # A quarter of the hours is cold, half is damp, an eighth both, alike in every month.
    step = np.arange(index.size) % 8
    frame = pd.DataFrame(
        {
            "temperature_5": np.where(step < 2, -2.0, 5.0) + 273.15,
            "rh": np.where(step % 2 == 0, 0.99, 0.6),
        },
        index=index,
    )
    out = site_air(settings, frame, pd.Series(dtype=float), hub_height=5.0)
    assert out.icing_hours == pytest.approx(8766 / 8, rel=1e-3)


def test_the_reference_speaks_for_more_winters_than_the_mast():
    settings = parse_settings(tomllib.loads(SETTINGS))
    index = pd.date_range("2022-03-01", periods=240, freq="h", tz="UTC", name="time")
    frame = pd.DataFrame({"temperature_5": 280.0}, index=index)
    decade = pd.date_range("2011", "2021", freq="h", tz="UTC")[:-1]
    long = pd.Series(np.where(decade.year == 2014, 250.0, 280.0), index=decade)
    out = site_air(settings, frame, long, hub_height=90.0)
    assert out.lowest_c == pytest.approx(250 - 273.15)
    assert len(out.table) == 2
    line = out.table.iloc[1]
    assert line["hours_below_cold_limit_per_year"] == pytest.approx(876.6, rel=1e-3)


def test_a_short_campaign_says_nothing_of_a_year_s_cold():
    settings = parse_settings(tomllib.loads(SETTINGS))
    index = pd.date_range("2022-01-01", "2022-02-10", freq="h", tz="UTC", name="time")
    frame = pd.DataFrame({"temperature_5": 270.0}, index=index)
    out = site_air(settings, frame, pd.Series(dtype=float), hub_height=90.0)
    assert (out.lowest_c, out.highest_c, out.icing_hours) == (None, None, None)
    # Ten of 28 days of February are less than half of it.
    assert out.why_not == "temperature of 1 of 12 calendar months only"
    assert "1 of 12 calendar months" in out.warnings[0]
    assert not [row for row in out.rows if "below" in row.key]
    assert "whole year" in out.said


# --- the step --------------------------------------------------------------------------------


def test_the_step_on_a_study_without_ten_minute_data(finished):
    step = assess_conditions(open_study(finished))
    assert step.turbulence.by_speed.empty
    assert "these last 60" in step.outcome.said["turbulence"]
    assert "turbulence" in step.outcome.said["verdict"]
    assert step.outcome.number("conditions.v50_m_s") > 15
    assert set(step.outcome.tables) >= {"verdict", "extreme_levels", "temperature"}
    words = ("inside", "near_limit", "outside", "not_assessed")
    counts = [step.outcome.number(f"conditions.verdict.{each}") for each in words]
    printed = about_the_machine(step.verdict)
    assert sum(counts) == len(printed) == 15
    assert counts[0] + counts[1] >= 2
    assert "Of the 15 conditions" in step.outcome.said["verdict"]
    assert f"{counts[3]:.0f} of 15 conditions are not assessed" in step.outcome.warnings[-1]
    assert "flow inclination" in step.outcome.warnings[-1]


def test_another_hub_height_of_the_yield_step_is_carried_on(finished):
    higher = {"yield": {"turbine.hub_height_m": 120.0}}
    before = assess_conditions(open_study(finished)).outcome
    run_steps(finished, "yield", overrides=higher)
    after = assess_conditions(open_study(finished)).outcome
    assert after.number("conditions.v50_m_s") > before.number("conditions.v50_m_s")
    assert after.number("conditions.lowest_temperature_c") < before.number(
        "conditions.lowest_temperature_c"
    )


def test_the_hub_series_and_its_frequency_are_artifacts(finished_once):
    energy = load_artifact(open_study(finished_once), "yield")
    series = energy.tables["hub_series"]
    assert series["wind_speed"].mean() == pytest.approx(energy.number("hub.mean_speed_m_s"))
    assert series["air_density"].between(1.0, 1.3).all()
    table = energy.tables["hub_frequency"]
    assert table.to_numpy().sum() == pytest.approx(1.0)
    assert table.index[-1] == "no direction"
    # The bins hold the series: shares of each speed bin by numpy's own count.
    edges = [float(name) for name in table.columns] + [np.inf]
    counted = np.histogram(series["wind_speed"], edges)[0] / len(series)
    assert table.sum().to_numpy() == pytest.approx(counted)


@pytest.mark.parametrize(
    ("added", "told"),
    [
        ('[conditions]\nexposure = "hill"', "conditions.exposure"),
        ('[conditions]\nmaxima = "weeks"', "conditions.maxima"),
        ("[conditions]\nstorms = 3", "conditions.storms: unknown key"),
        ('[profile]\nmethod = "magic"', "profile.method"),
        ("[profile]\nmin_counts = 3", "write min_count if that is meant"),
    ],
)
def test_a_wrong_key_is_named(small, added, told):
    with (small / "study.toml").open("a") as stream:
        stream.write(f"\n{added}\n")
    with pytest.raises(StudyError) as caught:
        open_study(small)
    assert told in str(caught.value)


@pytest.mark.parametrize(
    ("line", "told"),
    [
        ('design_class = "V"', "turbine.design_class"),
        ('turbulence_class = "D"', "turbine.turbulence_class"),
        ("lowest_temperature_c = 253.15", "turbine.lowest_temperature_c"),
    ],
)
def test_a_class_that_no_standard_has_is_refused(small, line, told):
    edit(small / "study.toml", "cut_out_m_s = 25.0", f"cut_out_m_s = 25.0\n{line}")
    with pytest.raises(StudyError) as caught:
        open_study(small)
    assert told in str(caught.value)
