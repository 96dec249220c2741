"""Units against exact definitions and handbook facts."""

import numpy as np
import pytest

from windkit.kernels.units import SI_UNITS, UNITS, from_si, to_si


def test_mile_an_hour_is_5280_feet_in_3600_seconds():
    # Common practice: 1 mph = 5280/3600 ft/s; 1 ft = 0.3048 m exactly (1959 agreement).
    assert to_si(1.0, "mph", "wind_speed") == pytest.approx(5280 / 3600 * 0.3048, rel=1e-15)
    assert from_si(to_si(1.0, "mph", "wind_speed"), "ft/s", "wind_speed") == pytest.approx(
        5280 / 3600, rel=1e-14
    )


@pytest.mark.parametrize(
    ("value", "unit", "quantity", "expected", "rel"),
    [
        # NIST SP 811, appendix B.8 and B.9 (printed factors).
        (1.0, "mph", "wind_speed", 0.44704, 1e-12),
        (1.0, "kn", "wind_speed", 0.5144444, 1e-7),
        (1.0, "km/h", "wind_speed", 0.2777778, 1e-6),
        (1.0, "inHg", "air_pressure", 3386.389, 1e-6),
        (1.0, "mmHg", "air_pressure", 133.3224, 1e-6),
        (1.0, "slug/ft3", "air_density", 515.3788, 1e-7),
        (1.0, "lb/ft3", "air_density", 16.01846, 3e-7),
        (1.0, "acre", "area", 4046.856, 1e-5),  # SP 811 prints the US survey acre: 4046.873
        (1.0, "hp", "power", 745.6999, 1e-7),
        (1.0, "ft lbf/s", "power", 1.355818, 1e-6),
        # Fixed points of the scales, by definition.
        (0.0, "degC", "air_temperature", 273.15, 1e-15),
        (32.0, "degF", "air_temperature", 273.15, 1e-12),
        (212.0, "degF", "air_temperature", 373.15, 1e-12),
        (1013.25, "hPa", "air_pressure", 101_325.0, 1e-12),
        (55.0, "%", "relative_humidity", 0.55, 1e-12),
        (np.pi, "rad", "wind_from_direction", 180.0, 1e-12),
        (3.6e6, "J", "energy", 1000.0, 1e-12),
    ],
)
def test_against_handbook_factors(value, unit, quantity, expected, rel):
    assert to_si(value, unit, quantity) == pytest.approx(expected, rel=rel)


def test_sea_level_air_in_slugs():
    # Common practice: air at sea level, 1.225 kg/m3, is about 0.0024 slug/ft3.
    assert from_si(1.225, "slug/ft3", "air_density") == pytest.approx(0.0024, abs=5e-5)


def test_horsepower_is_550_foot_pounds_a_second():
    # Common practice: 550 ft lbf/s is one horsepower.
    assert from_si(to_si(550.0, "ft lbf/s", "power"), "hp", "power") == pytest.approx(1.0)


@pytest.mark.parametrize("quantity", list(UNITS))
def test_every_unit_comes_back_and_the_inner_unit_changes_nothing(quantity):
    values = np.array([0.2, 1.0, 250.0, np.nan])
    np.testing.assert_array_equal(to_si(values, SI_UNITS[quantity], quantity), values)
    for unit in UNITS[quantity]:
        back = from_si(to_si(values, unit, quantity), unit, quantity)
        np.testing.assert_allclose(back, values, rtol=1e-12)


def test_input_is_left_alone():
    values = np.array([10.0, 20.0])
    to_si(values, "degC", "air_temperature")
    np.testing.assert_array_equal(values, [10.0, 20.0])


def test_unknown_unit_is_named_with_the_accepted_ones():
    with pytest.raises(ValueError, match=r"'furlong' is not accepted for wind_speed.*'mph'"):
        to_si(1.0, "furlong", "wind_speed")


def test_unknown_quantity_is_named_with_the_known_ones():
    with pytest.raises(ValueError, match=r"'wind' ?; write one of: wind_speed"):
        to_si(1.0, "m/s", "wind")


def test_table_cannot_be_changed():
    with pytest.raises(TypeError):
        UNITS["wind_speed"]["m/s"] = (2.0, 0.0)  # type: ignore[index]
