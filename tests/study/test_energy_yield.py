"""Energy yield on short series whose energy can be added up on paper."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from hand_made import save_long_term, save_measured

from tests.small_study import edit, run_steps
from windkit.study.energy_yield import EnergyYield, compute_yield
from windkit.study.folder import open_study

HOURS = 8.760  # MWh/year for each kW
#: Two hours on one straight piece of the curve, together 1432 kW in the curve's own air.
BRISK = [9.2, 9.9]


@pytest.fixture
def sea_level(small):
    """The small study without thermometer, its hubs where the standard air is 1.225 kg/m3.

    T1 and T2 stand with the mast, T2 with a speed factor of 1.05; T3 has its hub at 500 m.
    """
    file = small / "study.toml"
    text = file.read_text()
    start = text.index('[[mast.channels]]\nname = "temperature_5"')
    stop = text.index("[[references]]")
    text = (text[:start] + text[stop:]).replace("elevation_m = 300.0", "elevation_m = -90.0")
    file.write_text(text.replace("elevation_m = 800.0", "elevation_m = 410.0"))
    return small


def yielded(folder, speeds, *, exponent=0.0, record=None, **overrides) -> EnergyYield:
    save_measured(folder, exponent=exponent, record=record)
    save_long_term(folder, speeds)
    chosen = {f"turbine.{name}": value for name, value in overrides.items()}
    return compute_yield(open_study(folder, chosen))


def test_energy_of_four_hours_on_paper(sea_level):
    # T1: 5, 8, 12, 26 m/s give 200, 830, 2000 kW and, above cut-out, nothing.
    # T2: 5.25, 8.4, 12.6, 27.3 m/s give 237.5, 974, 2000 kW and nothing.
    found = yielded(sea_level, [5.0, 8.0, 12.0, 26.0])
    gross = found.turbines.set_index("turbine")["gross_mwh_per_year"]
    assert gross["T1"] == pytest.approx(HOURS * (200 + 830 + 2000) / 4, rel=1e-6)
    assert gross["T2"] == pytest.approx(HOURS * (237.5 + 974 + 2000) / 4, rel=1e-6)
    assert found.outcome.number("energy.gross_mwh_per_year") == pytest.approx(gross.sum())


def test_each_turbine_has_the_air_of_its_own_height(sea_level):
    # id AIR-1b: US Standard Atmosphere 1976, 1.2250 kg/m3 at 0 m and 1.1673 at 500 m (geometric).
    # Speeds of T3 count (1.1673/1.225)^(1/3) = 0.98405 times: a mean of 9.55 m/s as one of 9.3977,
    # on a straight piece of the curve: 1190 + 0.3977 x 440 = 1365.0 kW against 1432.
    found = yielded(sea_level, BRISK)
    by_turbine = found.turbines.set_index("turbine")
    assert by_turbine["air_density_kg_m3"].tolist() == pytest.approx(
        [1.2250, 1.2250, 1.1673], abs=6e-5
    )
    assert by_turbine.loc["T3", "gross_mwh_per_year"] == pytest.approx(HOURS * 1365.0, abs=1.0)
    assert by_turbine.loc["T1", "gross_mwh_per_year"] == pytest.approx(HOURS * 1432, rel=1e-6)


def test_speed_is_carried_up_by_the_measured_exponent(sea_level):
    found = yielded(sea_level, [6.0, 9.0], exponent=0.2)
    expected = 7.5 * (90 / 60) ** 0.2
    assert found.outcome.number("hub.mean_speed_m_s") == pytest.approx(expected)
    assert found.turbines["hub_mean_speed_m_s"].tolist() == pytest.approx(
        [expected, 1.05 * expected, expected]
    )


def test_losses_multiply_and_their_table_adds_up(sea_level):
    # id LOS-1: 8, 3, 2, 1, 1 % leave 85.7148 %, a loss of 14.2852 % and not of 15.
    with (sea_level / "study.toml").open("a") as stream:
        for group in ("environmental", "curtailment"):
            stream.write(f'\n[[losses]]\ngroup = "{group}"\nname = "x {group}"\nloss = 0.01\n')
            stream.write('basis = "assumed"\n')
    found = yielded(sea_level, [5.0, 8.0, 12.0])
    assert found.outcome.number("energy.total_loss") == pytest.approx(0.142852, abs=1e-6)
    gross = found.outcome.number("energy.gross_mwh_per_year")
    net = found.outcome.number("energy.net_p50_mwh_per_year")
    assert net == pytest.approx(gross * 0.92 * 0.97 * 0.98 * 0.99 * 0.99)
    assert found.turbines["net_mwh_per_year"].sum() == pytest.approx(net)
    assert found.losses["energy_mwh_per_year"].sum() == pytest.approx(gross - net)
    taken = found.losses.set_index("name")["energy_mwh_per_year"]
    assert taken["wakes"] == pytest.approx(0.08 * gross)
    assert taken["turbines"] == pytest.approx(0.03 * 0.92 * gross)
    steps = found.staircase["energy_mwh_per_year"]
    assert steps.iloc[0] == pytest.approx(gross)
    assert steps.iloc[-1] == pytest.approx(net)
    assert (np.diff(steps) < 0).all()
    considered = found.losses[found.losses["name"] == "not considered"]
    assert considered["group"].tolist() == ["turbine_performance", "other"]
    assert considered["loss"].tolist() == [0.0, 0.0]


def test_the_capacity_factor_is_net_over_rated(sea_level):
    found = yielded(sea_level, [5.0, 8.0, 12.0])
    net = found.outcome.number("energy.net_p50_mwh_per_year")
    assert found.outcome.number("energy.capacity_factor") == pytest.approx(net / (3 * 2000 * HOURS))


def test_the_sensitivity_on_one_straight_piece_of_the_curve(sea_level):
    # Between 9 and 10 m/s P = 1190 + 440 (v - 9); at 9.4 m/s it is 1366 kW, so that
    # (dE/E)/(dv/v) = 440 x 9.4/1366 = 3.0278. All three turbines alike.
    edit(sea_level / "study.toml", "speed_factor = 1.05", "speed_factor = 1.0")
    edit(sea_level / "study.toml", "elevation_m = 410.0", "elevation_m = -90.0")
    found = yielded(sea_level, [9.1, 9.7])
    assert found.outcome.number("energy.sensitivity") == pytest.approx(3.0278, abs=1e-4)


def ten_minutes(folder, values) -> pd.DataFrame:
    """A record of ten-minute speeds, and the study told so."""
    edit(
        folder / "study.toml",
        'interval_min = 60\nstamp = "start"\ncalm_below_m_s = 0.5\ndirection_reference = "true"\n'
        'main_wind_speed = "speed_60"',
        'interval_min = 10\nstamp = "start"\ncalm_below_m_s = 0.5\ndirection_reference = "true"\n'
        'main_wind_speed = "speed_60"',
    )
    index = pd.date_range("2022-03-01", periods=len(values), freq="10min", tz="UTC", name="time")
    return pd.DataFrame({"speed_60": values}, index=index)


def test_constant_wind_has_no_averaging_effect(sea_level):
    record = ten_minutes(sea_level, np.full(60, 7.3))
    found = yielded(sea_level, BRISK, record=record)
    assert found.outcome.number("energy.averaging_effect") == pytest.approx(1.0, abs=1e-12)


def test_the_averaging_effect_on_paper(sea_level):
    # Hours of 6 and 10 m/s in turn: (350 + 1630)/2 = 990 kW against 830 kW at their mean of 8.
    # An hour with a gap, and the hour cut off at the end, have no part in it.
    values = np.tile([6.0, 10.0], 3 * 4 + 2)
    values[13] = np.nan
    found = yielded(sea_level, BRISK, record=ten_minutes(sea_level, values))
    effect = found.outcome.number("energy.averaging_effect")
    assert effect == pytest.approx(990 / 830, rel=1e-6)
    gross = found.turbines.set_index("turbine")["gross_mwh_per_year"]
    assert gross["T1"] == pytest.approx(HOURS * 1432 * effect, rel=1e-6)


def test_hourly_data_have_no_averaging_effect(sea_level):
    assert yielded(sea_level, BRISK).outcome.number("energy.averaging_effect") == 1.0


def test_density_is_the_mean_of_months_of_the_standards_formula(small):
    # id AIR-3: IEC 61400-12-1, rho = (p/R0 - phi Pw (1/R0 - 1/Rw))/T, half saturated since no
    # humidity is measured. T falls by 6.5 K/km (ISO 2533) from 5 m to 90 m, p by the barometric
    # formula p exp(-g dz/(R T)) of the layer. Odd months lack ten days: months weigh the same.
    index = pd.date_range("2022-01-01", periods=8760, freq="h", tz="UTC", name="time")
    index = index[(index.month % 2 == 0) | (index.day > 10)]
    odd = index.month % 2 == 1
    record = pd.DataFrame(
        {
            "speed_60": 8.0,
            "temperature_5": np.where(odd, 275.0, 285.0),
            "pressure_5": np.where(odd, 98_500.0, 97_000.0),
        },
        index=index,
    )
    expected = np.mean(
        [
            (
                p * np.exp(-9.80665 * 85 / (287.05 * (t - 0.0065 * 42.5))) / 287.05
                - 0.5 * 2.05e-5 * np.exp(0.0631846 * (t - 0.5525)) * (1 / 287.05 - 1 / 461.5)
            )
            / (t - 0.5525)
            for p, t in ((98_500.0, 275.0), (97_000.0, 285.0))
        ]
    )
    found = yielded(small, BRISK, record=record).outcome
    assert found.number("hub.air_density_kg_m3") == pytest.approx(expected, rel=2e-6)


def test_damp_air_is_lighter(small):
    # id AIR-3: at 20 degC, 101 325 Pa and 50 % the density is 1.19902 kg/m3. Thermometer and
    # barometer are put at the height of the hub, so that both are what is measured there.
    edit(
        small / "study.toml",
        '[[mast.channels]]\nname = "pressure_5"\ncolumn = "Pressure5"\nquantity = "air_pressure"\n'
        "height_m = 5.0",
        '[[mast.channels]]\nname = "humidity_5"\ncolumn = "H"\nquantity = "relative_humidity"\n'
        'height_m = 5.0\nunit = "%"\n\n'
        '[[mast.channels]]\nname = "pressure_5"\ncolumn = "Pressure5"\nquantity = "air_pressure"\n'
        "height_m = 90.0",
    )
    edit(
        small / "study.toml",
        'quantity = "air_temperature"\nheight_m = 5.0',
        'quantity = "air_temperature"\nheight_m = 90.0',
    )
    index = pd.date_range("2022-01-01", periods=8760, freq="h", tz="UTC", name="time")
    record = pd.DataFrame(
        {"speed_60": 8.0, "temperature_5": 293.15, "pressure_5": 101_325.0, "humidity_5": 0.5},
        index=index,
    )
    found = yielded(small, BRISK, record=record).outcome
    assert found.number("hub.air_density_kg_m3") == pytest.approx(1.19902, abs=1e-5)


def test_a_hub_far_above_the_mast_is_told(sea_level):
    told = yielded(sea_level, BRISK, hub_height_m=90.0).outcome.warnings
    assert not any("times as high" in warning for warning in told)
    told = yielded(sea_level, BRISK, hub_height_m=95.0).outcome.warnings
    assert any("1.58 times as high" in warning for warning in told)


def test_hours_without_a_speed_are_left_out_not_taken_as_calm(sea_level):
    plain = yielded(sea_level, [5.0, 8.0]).outcome.number("energy.gross_mwh_per_year")
    gappy = yielded(sea_level, [5.0, np.nan, 8.0]).outcome.number("energy.gross_mwh_per_year")
    assert gappy == pytest.approx(plain, rel=1e-12)


def test_more_wind_never_makes_less_below_rated(sea_level):
    speeds = np.random.default_rng(4).weibull(2.0, 500) * 6.0
    energies = [
        yielded(sea_level, np.minimum(speeds * scale, 20.0)).outcome.number(
            "energy.gross_mwh_per_year"
        )
        for scale in (0.9, 1.0, 1.1)
    ]
    assert energies == sorted(energies)


def test_a_parameter_changes_the_result_and_shows_as_a_departure(finished):
    plain = compute_yield(open_study(finished)).outcome.number("energy.net_p50_mwh_per_year")
    run_steps(finished, "yield", overrides={"yield": {"turbine.hub_height_m": 100.0}})
    study = open_study(finished, {"turbine.hub_height_m": 100.0})
    assert compute_yield(study).outcome.number("energy.net_p50_mwh_per_year") > plain
