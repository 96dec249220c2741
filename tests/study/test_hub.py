"""The way up to the hub on records whose wind aloft is known on paper."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from tests.small_study import SETTINGS
from windkit.study.artifacts import Outcome, Row
from windkit.study.errors import StudyError
from windkit.study.hub import HubWind, carry_to_hub
from windkit.study.settings import Settings, parse_settings

HOURS = 60 * 24


def channel(name: str, quantity: str, height: float, unit: str) -> str:
    return (
        f'[[mast.channels]]\nname = "{name}"\ncolumn = "{name}"\nquantity = "{quantity}"\n'
        f'height_m = {height}\nunit = "{unit}"\n\n'
    )


def study(
    heights: dict[str, float],
    *,
    hub: float = 100.0,
    profile: str = "min_count = 20",
    extra: str = "",
    longitude: float = 0.0,
) -> Settings:
    """The small study with cups at these heights, the first being the main one."""
    import tomllib

    text = SETTINGS
    start = text.index("[[mast.channels]]")
    stop = text.index("[[references]]")
    cups = "".join(channel(name, "wind_speed", z, "m/s") for name, z in heights.items())
    vane = channel("vane", "wind_from_direction", 58.0, "degree")
    text = text[:start] + cups + vane + extra + text[stop:]
    main = next(iter(heights))
    text = text.replace('main_wind_speed = "speed_60"', f'main_wind_speed = "{main}"')
    text = text.replace('"direction_58"', '"vane"')
    text = text.replace("hub_height_m = 90.0", f"hub_height_m = {hub}")
    text = text.replace("longitude_deg = -6.5", f"longitude_deg = {longitude}")
    return parse_settings(tomllib.loads(text + f"\n[profile]\n{profile}"))


def clock(start: str = "2022-03-01", hours: int = HOURS) -> pd.DatetimeIndex:
    return pd.date_range(start, periods=hours, freq="h", tz="UTC", name="time")


def measured(settings: Settings, exponent: float = 0.2, basis: str = "by hand") -> Outcome:
    main = settings.mast.channel(settings.mast.main_wind_speed)
    return Outcome(
        "measure",
        [
            Row("measured.channel", "", main.name, "", ""),
            Row("measured.height_m", "", main.height_m, "m", ""),
            Row("measured.shear_exponent", "", exponent, "1", basis),
        ],
    )


def record(
    settings: Settings, exponent: np.ndarray | float, base: np.ndarray | float = 8.0
) -> pd.DataFrame:
    """Speeds of a power law through `base` at 80 m, wind from the south-west."""
    columns = {
        c.name: np.broadcast_to(base * (c.height_m / 80.0) ** np.asarray(exponent), HOURS)
        for c in settings.mast.mean_speeds
    }
    return pd.DataFrame({**columns, "vane": 240.0}, index=clock())


def long_term(speed: np.ndarray | float = 8.0, start: str = "2022-03-01") -> pd.DataFrame:
    return pd.DataFrame(
        {"wind_speed": np.broadcast_to(speed, HOURS), "wind_direction": 240.0}, index=clock(start)
    )


def carried(settings: Settings, exponent, *, base=8.0, series=None, frame=None) -> HubWind:
    own = record(settings, exponent, base) if frame is None else frame
    return carry_to_hub(
        settings, measured(settings), own, long_term() if series is None else series
    )


CUPS = {"a": 80.0, "b": 60.0, "c": 40.0}


def test_each_hour_takes_the_shear_of_its_own_time_of_day():
    # By hand: (100/80)^0.10 by day and (100/80)^0.30 by night.
    settings = study(CUPS)
    day = np.arange(HOURS) % 24 < 12
    found = carried(settings, np.where(day, 0.10, 0.30))
    expected = 8.0 * np.where(day, 1.25**0.10, 1.25**0.30)
    assert found.series["wind_speed"].to_numpy() == pytest.approx(expected, rel=1e-9)
    by_hour = found.exponent_by_hour["Mar-May"]
    assert by_hour.iloc[3] == pytest.approx(0.10)
    assert by_hour.iloc[20] == pytest.approx(0.30)


def test_hours_follow_the_sun_and_not_the_clock():
    # 90 degrees east the sun is six hours ahead of UTC: what is measured at 0 h UTC is the sixth
    # hour of the day, in the record and in the long term alike.
    settings = study(CUPS, longitude=90.0)
    exponent = np.where(np.arange(HOURS) % 24 == 0, 0.4, 0.1)
    found = carried(settings, exponent)
    at_six = found.series["wind_speed"].to_numpy()[::24]
    assert at_six == pytest.approx(8.0 * 1.25**0.4)
    assert found.exponent_by_hour["Mar-May"].iloc[6] == pytest.approx(0.4)


def test_sectors_keep_their_own_shear():
    settings = study(CUPS)
    east = np.random.default_rng(1).random(HOURS) < 0.5
    frame = record(settings, np.where(east, 0.1, 0.3))
    frame["vane"] = np.where(east, 90.0, 270.0)
    series = long_term()
    series["wind_direction"] = 270.0
    found = carried(settings, 0.0, frame=frame, series=series)
    assert found.series["wind_speed"].to_numpy() == pytest.approx(8.0 * 1.25**0.3)


def test_wind_that_falls_with_height_is_kept_and_not_clipped():
    settings = study(CUPS)
    falling = np.where(np.arange(HOURS) % 24 < 8, -0.1, 0.2)
    found = carried(settings, falling)
    assert found.series["wind_speed"].iloc[3] == pytest.approx(8.0 * 1.25**-0.1)


def test_a_calm_stays_a_calm_and_a_gap_a_gap():
    settings = study(CUPS)
    speed = np.full(HOURS, 8.0)
    speed[:2] = 0.0, np.nan
    series = long_term(speed)
    series.iloc[0, 1] = np.nan  # a calm has no direction
    found = carried(settings, 0.2, series=series).series["wind_speed"]
    assert found.iloc[0] == 0.0
    assert np.isnan(found.iloc[1])
    assert found.notna().sum() == HOURS - 1


def test_a_thin_class_takes_the_next_wider_one():
    # A thousand intervals asked for: no class of an hour has them, all records together do.
    settings = study(CUPS, profile="min_count = 1000")
    found = carried(settings, np.where(np.arange(HOURS) % 24 < 12, 0.1, 0.3))
    assert found.levels["told_apart_by"].tolist() == ["all records"]
    assert np.ptp(found.series["wind_speed"].to_numpy()) == 0.0


def test_one_exponent_is_that_of_the_mean_speeds():
    settings = study(CUPS, profile='method = "single"')
    found = carried(settings, 0.17)
    assert found.series["wind_speed"].to_numpy() == pytest.approx(8.0 * 1.25**0.17)
    assert found.method == "power law, one exponent"


def test_the_log_law_over_a_known_roughness():
    # id SHR-3b: z0 = 0.1 m: U100/U50 = 1.11154.
    settings = study({"a": 50.0, "b": 30.0, "c": 20.0}, profile='method = "log_law"')
    profile = {name: 8 * np.log(z / 0.1) for name, z in {"a": 50, "b": 30, "c": 20}.items()}
    frame = pd.DataFrame({**profile, "vane": 240.0}, index=clock())
    found = carried(settings, 0.0, frame=frame)
    assert found.series["wind_speed"].iloc[0] / 8.0 == pytest.approx(1.11154, abs=1e-5)


def test_the_diabatic_law_knows_the_profile_of_a_stable_night():
    # Dyer 1974, written out: u = ln(z/z0) + 5 z/L, theta' = theta*/kappa (1/z + 5/L); Ri at z is
    # (z/L)/(1 + 5 z/L) there. Half of the hours are neutral, which is where z0 is found.
    z0, obukhov, n = 0.05, 300.0, HOURS
    stable = np.arange(n) % 24 >= 12
    over = np.where(stable, 1 / obukhov, 0.0)
    settings = study(
        {"a": 60.0, "b": 40.0, "c": 20.0},
        hub=90.0,
        profile='method = "diabatic"\nmin_count = 20',
        extra=channel("t_low", "air_temperature", 20.0, "K")
        + channel("t_high", "air_temperature", 60.0, "K"),
    )
    star = 0.4  # friction velocity [m/s]

    def wind(z: float) -> np.ndarray:
        return star / 0.4 * (np.log(z / z0) + 5 * (z - z0) * over)

    # 1/L = kappa g theta*/(T u*^2), so theta* = T u*^2/(kappa g L).
    theta_star = 283.0 * star**2 / (0.4 * 9.80665) * over
    potential = theta_star / 0.4 * (np.log(60 / 20) + 5 * 40 * over)
    frame = pd.DataFrame(
        {
            "a": wind(60.0), "b": wind(40.0), "c": wind(20.0), "vane": 240.0,
            "t_low": 283.0,
            "t_high": 283.0 + potential - 9.80665 / 1004.7 * 40.0,
        },
        index=clock(),
    )  # fmt: skip
    series = long_term(wind(60.0))
    found = carried(settings, 0.0, frame=frame, series=series).series["wind_speed"].to_numpy()
    # Ri from differences over 20 to 60 m is not that of one height: the night within 1 %.
    assert found[~stable] == pytest.approx(wind(90.0)[~stable], rel=1e-3)
    assert found[stable] == pytest.approx(wind(90.0)[stable], rel=0.01)
    plain = study({"a": 60.0, "b": 40.0, "c": 20.0}, hub=90.0, profile='method = "single"')
    by_one = carried(plain, 0.0, frame=frame, series=series).series["wind_speed"].to_numpy()
    assert np.abs(by_one - wind(90.0)).mean() > 3 * np.abs(found - wind(90.0)).mean()


def test_a_displacement_height_lifts_the_profile():
    # By hand: power law in z - d with d = 10 m.
    settings = study(CUPS, profile="displacement_height_m = 10.0")
    speeds = {name: 8 * ((z - 10) / 70) ** 0.25 for name, z in CUPS.items()}
    frame = pd.DataFrame({**speeds, "vane": 240.0}, index=clock())
    found = carried(settings, 0.0, frame=frame)
    assert found.series["wind_speed"].iloc[0] == pytest.approx(8 * (90 / 70) ** 0.25)


# --- how sure --------------------------------------------------------------------------------


def test_the_rule_of_thumb_where_the_mast_tests_itself_well():
    # 0.06 ln(100/80) = 1.339 %, from 60 to 100 m it would be 3.06 % (published as 3.1 %).
    found = carried(study(CUPS), 0.2)
    assert found.left_out is not None
    assert found.left_out.scaled < 1e-9
    assert found.standard_uncertainty == pytest.approx(0.06 * np.log(1.25))
    assert 0.06 * np.log(100 / 60) == pytest.approx(0.031, abs=5e-4)
    assert "the second is the larger and is used" in found.uncertainty_basis


def test_a_larger_miss_of_the_mast_is_used_instead():
    settings = study(CUPS)
    frame = record(settings, 0.2)
    frame["a"] *= 0.96
    found = carried(settings, 0.2, frame=frame)
    miss = (1 / 0.96 - 1) * np.log(1.25) / np.log(80 / 60)
    assert found.standard_uncertainty == pytest.approx(miss)
    assert "the first is the larger and is used" in found.uncertainty_basis


def test_a_reason_lets_the_smaller_miss_stand():
    settings = study(CUPS, profile='reason_to_trust_left_out_error = "a lidar agreed"')
    found = carried(settings, 0.2)
    assert found.standard_uncertainty < 1e-9
    assert "a lidar agreed" in found.uncertainty_basis


def test_an_assumed_exponent_is_in_more_doubt():
    settings = study({"a": 80.0})
    own = measured(settings, 1 / 7, "assumed: the seventh-root law")
    found = carry_to_hub(settings, own, record(settings, 0.2), long_term())
    assert found.standard_uncertainty == pytest.approx(0.1 * np.log(1.25))
    assert found.series["wind_speed"].iloc[0] == pytest.approx(8 * 1.25 ** (1 / 7))


def test_nothing_is_in_doubt_at_the_main_height_itself():
    found = carried(study(CUPS, hub=80.0), 0.2)
    assert found.standard_uncertainty == 0.0
    assert (found.series["wind_speed"] == 8.0).all()


# --- bad input -------------------------------------------------------------------------------


def test_swapped_sensors_are_named_with_both_remedies():
    settings = study(CUPS)
    frame = record(settings, 0.2).rename(columns={"b": "c", "c": "b"})
    with pytest.raises(StudyError) as caught:
        carried(settings, 0.2, frame=frame)
    told = str(caught.value)
    assert "mast.channels (b and c)" in told
    assert "b at 60 m is below c at 40 m in 100% of the intervals above 4 m/s" in told
    assert "Compare both with the mast's drawing" in told
    assert "accept_falling_profile = true" in told
    accepted = study(CUPS, profile="accept_falling_profile = true")
    assert carried(accepted, 0.2, frame=frame).series["wind_speed"].notna().all()


def test_two_sensors_at_one_height_are_one_height():
    settings = study({"a": 80.0, "twin": 80.0})
    found = carry_to_hub(settings, measured(settings, 0.1), record(settings, 0.1), long_term())
    assert any("twin hangs at the height of a" in note for note in found.notes)
    assert "step 2" in found.basis
    settings = study({"a": 80.0, "twin": 79.0, "b": 40.0})
    found = carried(settings, 0.2)
    assert "at 40, 80 m" in found.basis


def test_a_height_above_the_hub_is_told():
    found = carried(study({"a": 80.0, "b": 60.0, "high": 120.0}), 0.2)
    assert any("measured at 120 m, above the hub at 100 m" in w for w in found.warnings)
    assert found.series["wind_speed"].iloc[0] == pytest.approx(8 * 1.25**0.2)
    below = carried(study({"a": 80.0, "b": 60.0, "top": 95.0}), 0.2)
    assert any("naming it as main_wind_speed" in w for w in below.warnings)


@pytest.mark.parametrize(("hub", "told"), [(120.0, False), (121.0, True)])
def test_a_mast_below_two_thirds_of_the_hub_is_a_named_warning(hub, told):
    warnings = carried(study(CUPS, hub=hub), 0.2).warnings
    assert any(w.startswith("Long extrapolation") for w in warnings) is told


def test_one_height_says_that_it_has_no_classes_and_shows_no_empty_table():
    found = carried(study({"a": 80.0}, hub=100.0), 0.2)
    assert any('asks for "by_class"' in w and "0.200" in w for w in found.warnings)
    assert found.methods["hub_mean_speed_m_s"].tolist() == pytest.approx([8.0 * 1.25**0.2])
    assert found.levels["told_apart_by"].tolist() == ["no classes of hour and month"]


def test_a_dead_sensor_does_not_take_the_others_with_it():
    settings = study(CUPS)
    frame = record(settings, 0.2)
    frame.loc[frame.index[HOURS // 4 :], "b"] = np.nan
    found = carried(settings, 0.2, frame=frame)
    assert any("b has 25% of the values of a" in note for note in found.notes)
    assert "at 40, 80 m" in found.basis


@pytest.mark.parametrize(
    ("profile", "told"),
    [
        ("displacement_height_m = 45.0", "It is 45 m, and a height is 40 m"),
        ('method = "diabatic"', "no two thermometers at different heights"),
    ],
)
def test_what_cannot_be_used_with_this_mast_is_refused(profile, told):
    with pytest.raises(StudyError) as caught:
        carried(study(CUPS, profile=profile), 0.2)
    assert told.lower() in str(caught.value).lower()


def test_a_log_law_through_falling_wind_is_refused():
    settings = study(CUPS, profile='method = "log_law"\naccept_falling_profile = true')
    with pytest.raises(StudyError, match="does not rise with height"):
        carried(settings, -0.2)
