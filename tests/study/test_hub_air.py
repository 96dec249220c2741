"""Air at the hub against tables, an independent library, and hours that can be worked out."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from test_hub import channel

from tests.small_study import SETTINGS
from windkit.study.borrowed_air import density_by_step, reference_air
from windkit.study.hub_air import HubAir, hub_air
from windkit.study.settings import Settings, parse_settings


def study(*, hub: float = 100.0, elevation: float = 0.0, sensors: str = "", reference: str = "",
          reference_elevation: float | None = None) -> Settings:  # fmt: skip
    """The small study with these sensors of air on mast and reference."""
    import tomllib

    text = SETTINGS
    start = text.index('[[mast.channels]]\nname = "temperature_5"')
    stop = text.index("[[references]]")
    text = text[:start] + sensors + text[stop:]
    text = text.replace("hub_height_m = 90.0", f"hub_height_m = {hub}")
    text = text.replace("elevation_m = 300.0\n\n[screening]",
                        f"elevation_m = {elevation}\n\n[screening]")  # fmt: skip
    at = text.index("[long_term]")
    text = text[:at] + reference.replace("mast.channels", "references.channels") + text[at:]
    if reference_elevation is not None:
        text = text.replace('kind = "station"',
                            f'kind = "station"\nelevation_m = {reference_elevation}')  # fmt: skip
    return parse_settings(tomllib.loads(text))


AIR = (
    channel("t", "air_temperature", 100.0, "K")
    + channel("p", "air_pressure", 100.0, "Pa")
    + channel("rh", "relative_humidity", 100.0, "1")
)
FAR = channel("t_far", "air_temperature", 2.0, "K") + channel("p_far", "air_pressure", 2.0, "Pa")


def hours(start: str = "2022-01-01", days: int = 365) -> pd.DatetimeIndex:
    return pd.date_range(start, periods=days * 24, freq="h", tz="UTC", name="time")


def share_of(found: HubAir, quantity: str, word: str) -> float:
    rows = found.sources[found.sources["quantity"] == quantity]
    return float(rows.loc[rows["source"].str.contains(word), "share"].sum())


@pytest.mark.parametrize(
    ("celsius", "pressure", "humidity", "expected"),
    # ids AIR-3b, AIR-3d, AIR-3e, AIR-3g: IEC 61400-12-1, density of moist air.
    [
        (20.0, 101_325.0, 0.5, 1.19902),
        (30.0, 100_000.0, 0.8, 1.13433),
        (-10.0, 90_000.0, 0.6, 1.19044),
        (10.0, 85_000.0, 0.7, 1.04186),
    ],
)
def test_density_of_moist_air_where_the_sensors_hang(celsius, pressure, humidity, expected):
    settings = study(sensors=AIR)
    index = hours()
    frame = pd.DataFrame({"t": celsius + 273.15, "p": pressure, "rh": humidity}, index=index)
    assert hub_air(settings, frame).mean == pytest.approx(expected, abs=1e-5)


def test_density_within_a_thousandth_and_a_half_of_an_independent_library():
    # id AIR-4b: CoolProp (ASHRAE RP-1485), which knows nothing of the power-curve standard.
    humid_air = pytest.importorskip("CoolProp.HumidAirProp")
    rng = np.random.default_rng(2)
    t, p = rng.uniform(263, 308, 50), rng.uniform(80_000, 103_000, 50)
    rh = rng.uniform(0.2, 1.0, 50)
    ours, _, _ = density_by_step(
        t, p, rh, temperature_height=50.0, pressure_height=50.0, hub_height=50.0
    )
    theirs = [
        (1 + humid_air.HAPropsSI("W", "T", a, "P", b, "R", c))
        / humid_air.HAPropsSI("V", "T", a, "P", b, "R", c)
        for a, b, c in zip(t, p, rh, strict=True)
    ]
    assert ours == pytest.approx(theirs, rel=1.5e-3)


def test_sensors_below_are_carried_up_as_the_standard_atmosphere_is():
    # ids AIR-1, AIR-1b: 0 m has 288.15 K, 101 325 Pa; 500 m has 95 461 Pa and 1.1673 kg/m3, dry.
    density, t, p = density_by_step(
        np.array([288.15]), np.array([101_325.0]), np.array([0.0]),
        temperature_height=0.0, pressure_height=0.0, hub_height=500.0,
    )  # fmt: skip
    assert p[0] == pytest.approx(95_461, abs=2)
    assert t[0] == pytest.approx(288.15 - 3.25)
    assert density[0] == pytest.approx(1.1673, abs=6e-5)


def test_without_any_sensor_the_standard_atmosphere():
    # id AIR-1b: 1.1117 kg/m3 at 1000 m.
    found = hub_air(study(elevation=900.0), pd.DataFrame({"speed_60": 8.0}, index=hours()))
    assert found.mean == pytest.approx(1.1117, abs=6e-5)
    assert found.basis.startswith("standard atmosphere")
    assert found.warnings == []


def test_a_missing_barometer_is_filled_from_the_standard_atmosphere():
    # id AIR-1: 95 461 Pa at 500 m; 280 K and half saturated, the vapour by the standard's fit.
    settings = study(elevation=400.0, sensors=channel("t", "air_temperature", 100.0, "K"))
    found = hub_air(settings, pd.DataFrame({"t": 280.0}, index=hours()))
    vapour = 0.5 * 2.05e-5 * np.exp(0.0631846 * 280)
    expected = (95_461 / 287.05 - vapour * (1 / 287.05 - 1 / 461.5)) / 280
    assert found.mean == pytest.approx(expected, rel=3e-5)
    assert share_of(found, "air_pressure", "standard atmosphere") == 1.0
    assert share_of(found, "air_temperature", "measured") == 1.0
    assert "air pressure: 100.0% standard atmosphere" in found.said


def test_a_gap_is_filled_from_the_reference_at_the_mast_s_own_level():
    # The reference is 3 K warmer and has 1.02 times the pressure, all year.
    index = hours()
    warm = 283 + 8 * np.sin(np.arange(index.size) / 500) + np.sin(np.arange(index.size))
    press = 96_000 + 500 * np.cos(np.arange(index.size) / 70)
    frame = pd.DataFrame({"t": warm, "p": press, "rh": 0.7}, index=index)
    gap = slice(3000, 4000)
    frame.iloc[gap, :2] = np.nan
    far = pd.DataFrame({"t_far": warm + 3, "p_far": press * 1.02}, index=index)
    settings = study(sensors=AIR, reference=FAR)
    found = hub_air(settings, frame, reference_air(far, settings.references[0]))
    truth, _, _ = density_by_step(
        warm, press, np.full(index.size, 0.7),
        temperature_height=100.0, pressure_height=100.0, hub_height=100.0,
    )  # fmt: skip
    assert found.density == pytest.approx(truth, rel=1e-9)
    assert share_of(found, "air_temperature", "reference") == pytest.approx(1000 / 8760)
    assert found.warnings == []


def test_without_a_reference_a_gap_takes_the_mast_s_own_habit():
    index = hours(days=30)
    by_hour = 283.0 + index.hour.to_numpy() / 4
    frame = pd.DataFrame({"t": by_hour, "p": 96_000.0, "rh": 0.7}, index=index)
    frame.iloc[100:150, 0] = np.nan
    found = hub_air(study(sensors=AIR), frame)
    truth, _, _ = density_by_step(
        by_hour, np.full(index.size, 96_000.0), np.full(index.size, 0.7),
        temperature_height=100.0, pressure_height=100.0, hub_height=100.0,
    )  # fmt: skip
    assert found.density == pytest.approx(truth, rel=1e-12)
    assert share_of(found, "air_temperature", "own hours") == pytest.approx(50 / 720)


def test_months_that_were_not_measured_come_from_the_reference():
    # A campaign of the summer half; the reference knows the winter too, at the same level here.
    index = hours()
    month = index.month.to_numpy()
    warm = np.where((month >= 4) & (month <= 9), 288.0, 275.0)
    far = pd.DataFrame({"t_far": warm, "p_far": 96_000.0}, index=index)
    summer = (month >= 4) & (month <= 9)
    frame = pd.DataFrame({"t": warm[summer], "p": 96_000.0, "rh": 0.5}, index=index[summer])
    settings = study(sensors=AIR, reference=FAR)
    found = hub_air(settings, frame, reference_air(far, settings.references[0]))
    alone = hub_air(settings, frame)
    ratio = found.climatology.iloc[0].mean() / found.climatology.iloc[6].mean()
    assert ratio == pytest.approx(288.0 / 275.0, rel=2e-3)  # the ideal gas law, vapour aside
    assert found.mean > alone.mean
    assert "and 6 from the reference" in found.basis
    # Hours of the long term take the density of their month.
    at = found.at(pd.DatetimeIndex(["2010-01-15 06:00", "2010-07-15 06:00"], tz="UTC"))
    assert at[0] / at[1] == pytest.approx(ratio, rel=1e-9)


def test_a_mast_without_thermometer_uses_a_reference_whose_elevation_is_known():
    # id AIR-1: reference at sea level with 288.15 K and 101 325 Pa, mast ground at 400 m, hub at
    # 500 m: 95 461 Pa and 284.90 K.
    settings = study(elevation=400.0, reference=FAR, reference_elevation=-2.0)
    index = hours(days=40)
    far = pd.DataFrame({"t_far": 288.15, "p_far": 101_325.0}, index=index)
    frame = pd.DataFrame({"speed_60": 8.0}, index=index)
    found = hub_air(settings, frame, reference_air(far, settings.references[0]))
    assert found.monthly["pressure_hpa"].to_numpy() == pytest.approx(954.61, abs=0.05)
    assert found.monthly["temperature_c"].to_numpy() == pytest.approx(11.75, abs=0.01)
    assert share_of(found, "air_pressure", "reference") == 1.0


def test_a_barometer_that_drifts_is_told_by_the_cross_check():
    index = hours()
    press = np.full(index.size, 96_000.0)
    far = pd.DataFrame({"t_far": 283.0, "p_far": press}, index=index)
    drifting = press * np.where(index.month >= 10, 1.04, 1.0)
    frame = pd.DataFrame({"t": 283.0, "p": drifting, "rh": 0.5}, index=index)
    settings = study(sensors=AIR, reference=FAR)
    found = hub_air(settings, frame, reference_air(far, settings.references[0]))
    assert len(found.warnings) == 1
    assert "differ by more than 1% in 3 of 12 months" in found.warnings[0]
    ratio = found.monthly.set_index("month")["mast_over_reference"]
    assert ratio[11] / ratio[5] == pytest.approx(1.04, rel=1e-3)


def test_two_winter_months_are_not_the_year():
    # id AIR-1b: 1.1673 kg/m3 at 500 m for the ten months no sensor saw; 1.2 or so in winter.
    settings = study(elevation=400.0, sensors=AIR)
    index = hours(days=59)
    frame = pd.DataFrame({"t": 270.0, "p": 95_461.0, "rh": 0.5}, index=index)
    found = hub_air(settings, frame)
    winter = found.climatology.loc[1].mean()
    assert winter == pytest.approx(95_461 / 287.05 / 270.0, rel=2e-3)
    assert found.mean == pytest.approx((2 * winter + 10 * 1.1673) / 12, abs=1e-4)
    assert "10 of the standard atmosphere" in found.basis
    assert any("2 of 12 calendar months" in text for text in found.warnings)


def test_a_month_counts_from_half_its_hours():
    settings = study(elevation=400.0, sensors=AIR)
    frame = pd.DataFrame({"t": 270.0, "p": 95_461.0, "rh": 0.5}, index=hours(days=31 + 13))
    found = hub_air(settings, frame)  # 13 of 28 days of February
    assert found.climatology.loc[2].mean() == pytest.approx(1.1673, abs=6e-5)
    assert found.climatology.loc[1].mean() > 1.2


def test_a_reference_of_unknown_level_is_drawn_at_the_hub():
    index = hours()
    frame = pd.DataFrame({"t": 283.0, "p": 96_000.0, "rh": 0.5}, index=index)
    far = pd.DataFrame({"t_far": 283.0, "p_far": 101_000.0}, index=index)  # five per cent denser
    settings = study(sensors=AIR, reference=FAR)
    found = hub_air(settings, frame, reference_air(far, settings.references[0]))
    ours, theirs = found.monthly["air_density_kg_m3"], found.monthly["reference_air_density_kg_m3"]
    assert theirs.to_numpy() == pytest.approx(ours.to_numpy(), rel=1e-9)
    assert found.reference in found.said
    assert "between" not in found.said.split(".  ")[0].split(" Against")[0]
