"""Air against the standard atmosphere, the density standard, and CoolProp's humid air."""

import numpy as np
import pytest
from CoolProp.HumidAirProp import HAPropsSI
from hypothesis import given
from hypothesis import strategies as st

from windkit.kernels.air import (
    STANDARD_LAPSE_RATE,
    density_speed_factor,
    dry_air_density,
    moist_air_density,
    pressure_at_height,
    relative_humidity_from_dew_point,
    standard_atmosphere,
    temperature_at_height,
    water_vapour_pressure,
)

ELEVATIONS = [0.0, 500.0, 1000.0, 1500.0, 2000.0, 3000.0]

# temperature [degC], pressure [Pa], relative humidity [1]: the states of AIR-3 and AIR-4.
STATES = [
    (15.0, 101_325.0, 0.0),
    (20.0, 101_325.0, 0.5),
    (15.0, 101_325.0, 0.5),
    (30.0, 100_000.0, 0.8),
    (-10.0, 90_000.0, 0.6),
    (35.0, 101_325.0, 1.0),
    (10.0, 85_000.0, 0.7),
]


def test_standard_pressure_and_density_by_geometric_height():
    # AIR-1, AIR-1b: US Standard Atmosphere 1976, table I (figures from memory of the table).
    _, pressure, density = standard_atmosphere(ELEVATIONS)
    np.testing.assert_allclose(pressure, [101325, 95461, 89876, 84560, 79501, 70121], atol=1.0)
    np.testing.assert_allclose(
        density, [1.2250, 1.1673, 1.1117, 1.0581, 1.0066, 0.90925], atol=6e-5
    )


def test_standard_state_by_geopotential_height():
    # AIR-2, AIR-2b: formula of ISO 2533:1975, computed outside this project.
    temperature, pressure, density = standard_atmosphere(ELEVATIONS, geopotential=True)
    np.testing.assert_allclose(
        pressure, [101325, 95460.8, 89874.6, 84556.0, 79495.2, 70108.5], atol=0.1
    )
    np.testing.assert_allclose(
        density, [1.22500, 1.16727, 1.11164, 1.05807, 1.00649, 0.909122], atol=1e-5
    )
    np.testing.assert_allclose(temperature[[2, 4, 5]], [281.65, 275.15, 268.65], atol=1e-9)


def test_density_at_sea_level_to_the_printed_digits():
    # ISO 2533:1975, sea level: 1.225 kg/m3, half of the last digit is the tolerance.
    assert dry_air_density(288.15, 101_325.0) == pytest.approx(1.225, abs=5e-4)


def test_moist_density_of_the_standard():
    # AIR-3a..g: equation of IEC 61400-12-1, computed outside this project.
    t, p, rh = np.array(STATES).T
    expected = [1.22501, 1.19902, 1.22123, 1.13433, 1.19044, 1.12048, 1.04186]
    np.testing.assert_allclose(moist_air_density(t + 273.15, p, rh), expected, atol=1e-5)


def test_moist_density_near_the_metrological_equation():
    # AIR-4: CIPM-2007 (Picard et al. 2008, Metrologia 45:149), coefficients from memory.
    t, p, rh = np.array(STATES).T
    expected = [1.22552, 1.19931, 1.22163, 1.13478, 1.19138, 1.12184, 1.04221]
    np.testing.assert_allclose(moist_air_density(t + 273.15, p, rh), expected, rtol=1.5e-3)


@pytest.mark.parametrize("celsius", [-20.0, -5.0, 5.0, 15.0, 25.0, 34.0])
@pytest.mark.parametrize("pressure", [80_000.0, 101_325.0])
@pytest.mark.parametrize("humidity", [0.0, 0.5, 0.95])
def test_moist_density_near_coolprop(celsius, pressure, humidity):
    # AIR-4b: CoolProp, humid air after ASHRAE RP-1485; volume per kilogram of humid air.
    T = celsius + 273.15
    reference = 1.0 / HAPropsSI("Vha", "T", T, "P", pressure, "R", humidity)
    assert moist_air_density(T, pressure, humidity) == pytest.approx(reference, rel=1.5e-3)


def test_vapour_pressure_of_the_standard():
    # AIR-5: fit of IEC 61400-12-1, computed outside this project.
    np.testing.assert_allclose(
        water_vapour_pressure([288.15, 293.15, 303.15]), [1655.0, 2269.9, 4269.8], atol=0.1
    )


def test_vapour_pressure_is_about_three_percent_below_the_steam_tables():
    # AIR-5: saturation pressures of CIPM-2007 at 15 and 20 degC.
    fit = water_vapour_pressure([288.15, 293.15])
    np.testing.assert_allclose(fit / [1705.7, 2339.2], 0.97, atol=0.003)


@pytest.mark.parametrize(("celsius", "dew"), [(20.0, 10.0), (35.0, 20.0), (5.0, 4.0), (15.0, 0.1)])
def test_humidity_from_dew_point_near_coolprop(celsius, dew):
    # CoolProp HAPropsSI: relative humidity from temperature and dew point.
    reference = HAPropsSI("R", "T", celsius + 273.15, "P", 101_325.0, "D", dew + 273.15)
    humidity = relative_humidity_from_dew_point(celsius + 273.15, dew + 273.15)
    assert humidity == pytest.approx(reference, rel=4e-3)


def test_saturated_air_has_humidity_one():
    assert relative_humidity_from_dew_point(285.0, 285.0) == pytest.approx(1.0, rel=1e-12)


def test_speed_factor_of_the_standard():
    # AIR-6: IEC 61400-12-1, (rho / 1.225)^(1/3).
    np.testing.assert_allclose(density_speed_factor([1.10, 1.18]), [0.964759, 0.987602], atol=1e-6)


def test_pressure_aloft_follows_the_standard_atmosphere():
    # AIR-2: ISO 2533:1975; the gas constants of the two standards differ by 1e-5.
    aloft = pressure_at_height(101_325.0, 288.15, [500.0, 1000.0, 2000.0, -0.0])
    np.testing.assert_allclose(aloft, [95460.8, 89874.6, 79495.2, 101_325.0], rtol=5e-6)


def test_pressure_falls_by_about_twelve_pascal_a_metre_near_the_ground():
    # Common practice: 1 hPa for about 8.3 m at sea level.
    assert 101_325.0 - pressure_at_height(101_325.0, 288.15, 8.3) == pytest.approx(100.0, rel=0.01)


def test_temperature_falls_with_the_lapse_rate():
    # ISO 2533:1975: 6.5 K for a kilometre.
    assert temperature_at_height(288.15, 1000.0) == pytest.approx(281.65)
    assert STANDARD_LAPSE_RATE == 0.0065


@given(
    temperature=st.floats(240.0, 320.0),
    pressure=st.floats(60_000.0, 108_000.0),
    humidity=st.floats(0.01, 1.0),
)
def test_moist_air_is_lighter_than_dry(temperature, pressure, humidity):
    moist = moist_air_density(temperature, pressure, humidity)
    assert moist < dry_air_density(temperature, pressure)
    assert moist > 0.9 * dry_air_density(temperature, pressure)


def test_missing_stays_missing_and_shapes_broadcast():
    density = moist_air_density([[280.0], [np.nan]], [100_000.0, np.nan, 90_000.0], 0.5)
    assert density.shape == (2, 3)
    np.testing.assert_array_equal(np.isnan(density), [[False, True, False], [True, True, True]])


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: dry_air_density(15.0, 101_325.0), "add 273.15 if it is in degrees Celsius"),
        (lambda: dry_air_density(288.0, 1013.25), "looks like hPa: multiply by 100"),
        (lambda: dry_air_density(288.0, 101.3), "looks like kPa: multiply by 1000"),
        (lambda: dry_air_density(288.0, [1e5, -1.0]), "positive .Pa., got -1 at position 1"),
        (lambda: moist_air_density(288.0, 1e5, 55.0), "looks like percent: divide by 100"),
        (lambda: moist_air_density(288.0, 1e5, -0.1), "relative_humidity must not be negative"),
        (lambda: standard_atmosphere(12_000.0), "between -2000 and 11000 m, got 12000"),
        (lambda: relative_humidity_from_dew_point(280.0, 290.0), "order of the two arguments"),
        (lambda: relative_humidity_from_dew_point(280.0, 10.0), "dew_point_temperature must be in"),
        (lambda: pressure_at_height(1e5, 288.0, 50_000.0), "height_difference"),
        (lambda: density_speed_factor(0.0), "air_density must be positive"),
    ],
)
def test_bad_input_is_named(call, message):
    with pytest.raises(ValueError, match=message):
        call()
