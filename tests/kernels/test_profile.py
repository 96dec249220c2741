"""Profiles against the log law worked outside, textbook cases, and numpy's own least squares."""

import time

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from windkit.kernels.profile import (
    fit_roughness,
    fit_shear,
    friction_velocity,
    log_law,
    power_law,
    shear_exponent,
)
from windkit.kernels.weibull import rayleigh_scale, weibull_power_density

ROUGHNESS = np.array([0.0002, 0.03, 0.1, 0.4])


def test_log_law_ratios():
    # SHR-3, SHR-3b: log law, computed outside this project.
    np.testing.assert_allclose(
        log_law(1.0, 10.0, 80.0, ROUGHNESS), [1.19219, 1.35796, 1.45154, 1.64601], atol=1e-5
    )
    np.testing.assert_allclose(
        log_law(1.0, 50.0, 100.0, ROUGHNESS), [1.05577, 1.09343, 1.11154, 1.14356], atol=1e-5
    )


@pytest.mark.parametrize(
    ("lower", "upper", "expected"),
    [
        # SHR-3c, SHR-3d: power law through the log law, computed outside this project.
        (10.0, 80.0, [0.0845376, 0.147147, 0.179196, 0.239659]),
        (50.0, 100.0, [0.0782923, 0.128866, 0.152554, 0.193531]),
    ],
)
def test_exponent_between_two_heights_of_the_log_law(lower, upper, expected):
    above = log_law(6.0, lower, upper, ROUGHNESS)
    np.testing.assert_allclose(shear_exponent(6.0, above, lower, upper), expected, atol=1e-6)
    speeds = np.stack([np.full(4, 6.0), above], axis=-1)
    np.testing.assert_allclose(fit_shear(speeds, [lower, upper]), expected, atol=1e-6)


def test_seventh_root_to_50_m():
    # SHR-4: Masters 2004, ch. 6 worked example: 6 m/s at 10 m, 1/7: 7.55 m/s and 504 W/m2.
    above = power_law(6.0, 10.0, 50.0, 1 / 7)
    assert above == pytest.approx(7.55, abs=0.005)
    assert weibull_power_density(rayleigh_scale(above), 2.0, 1.225) == pytest.approx(504, abs=1)


def test_exponent_by_arithmetic():
    # SHR-4b: ln(8.9/6.2) / ln(80/10).
    assert shear_exponent(6.2, 8.9, 10.0, 80.0) == pytest.approx(0.1738, abs=1e-4)


def test_normal_profile_of_the_design_standard():
    # IEC-7: IEC 61400-1 normal wind profile, exponent 0.2.
    np.testing.assert_allclose(
        power_law(1.0, 100.0, [50.0, 150.0], 0.2), [0.870551, 1.084472], atol=1e-6
    )


def test_friction_velocity():
    # SHR-5: 5 m/s at 10 m, von Karman 0.4, z0 = 0.03 and 0.1.
    np.testing.assert_allclose(
        friction_velocity(5.0, 10.0, [0.03, 0.1]), [0.344285, 0.434294], atol=1e-6
    )


def test_displacement_lifts_the_origin():
    # By hand: heights 30 and 60 over a canopy lifted by 10 m are 20 and 50 over its origin.
    lifted = log_law(5.0, 30.0, 60.0, 1.0, displacement_height=10.0)
    assert lifted == pytest.approx(5.0 * np.log(50.0) / np.log(20.0))
    assert power_law(5.0, 30.0, 60.0, 0.3, displacement_height=10.0) == pytest.approx(
        5.0 * 2.5**0.3
    )
    assert fit_shear([5.0, 5.0 * 2.5**0.3], [30.0, 60.0], displacement_height=10.0) == (
        pytest.approx(0.3)
    )


def test_negative_shear_is_kept():
    # By hand: ln(4/5) / ln 2 = -0.321928.
    assert shear_exponent(5.0, 4.0, 40.0, 80.0) == pytest.approx(-0.321928, abs=1e-6)
    assert fit_shear([5.0, 4.0], [40.0, 80.0]) == pytest.approx(-0.321928, abs=1e-6)
    assert power_law(5.0, 40.0, 80.0, -0.321928) == pytest.approx(4.0, abs=1e-5)


@pytest.fixture(scope="module")
def mast():
    """Five hundred records at four heights, a fifth of them missing at random."""
    rng = np.random.default_rng(11)
    height = np.array([20.0, 40.0, 60.0, 80.0])
    exponent = rng.normal(0.15, 0.15, (500, 1))
    speed = 7.0 * (height / 80.0) ** exponent * rng.lognormal(0.0, 0.02, (500, 4))
    speed[rng.random((500, 4)) < 0.2] = np.nan
    return speed, height


def test_fit_is_numpy_least_squares(mast):
    # numpy.polyfit of ln v on ln z (and of v on ln z), record by record.
    speed, height = mast
    exponent, roughness = fit_shear(speed, height), fit_roughness(speed, height)
    for row in range(0, 500, 7):
        known = ~np.isnan(speed[row])
        if known.sum() < 2:
            assert np.isnan(exponent[row])
            assert np.isnan(roughness[row])
            continue
        log_z, v = np.log(height[known]), speed[row, known]
        assert exponent[row] == pytest.approx(np.polyfit(log_z, np.log(v), 1)[0], abs=1e-9)
        slope, intercept = np.polyfit(log_z, v, 1)
        if slope > 0.0:
            assert np.log(roughness[row]) == pytest.approx(-intercept / slope, rel=1e-6)
        else:
            assert np.isnan(roughness[row])


@given(st.floats(-0.5, 0.8), st.floats(1.0, 25.0))
def test_fit_finds_the_exponent_it_was_made_with(exponent, speed):
    height = np.array([30.0, 50.0, 80.0, 100.0])
    speeds = power_law(speed, 50.0, height, exponent)
    assert fit_shear(speeds, height) == pytest.approx(exponent, abs=1e-9)


@given(st.floats(1e-4, 2.0))
def test_fit_finds_the_roughness_it_was_made_with(roughness):
    height = np.array([30.0, 50.0, 80.0, 100.0])
    speeds = log_law(6.0, 50.0, height, roughness)
    assert fit_roughness(speeds, height) == pytest.approx(roughness, rel=1e-6)


def test_calms_and_gaps_drop_out_at_their_height_only():
    speeds = [[0.0, 4.0, 5.0], [0.0, 0.0, 5.0], [np.nan, 4.0, np.nan]]
    exponent = fit_shear(speeds, [20.0, 40.0, 80.0])
    assert exponent[0] == pytest.approx(np.log(1.25) / np.log(2.0))
    assert np.isnan(exponent[1:]).all()
    assert np.isnan(shear_exponent(0.0, 5.0, 10.0, 20.0))


def test_more_dimensions_keep_their_shape():
    assert fit_shear(np.ones((3, 5, 4)), [10.0, 20.0, 30.0, 40.0]).shape == (3, 5)


def test_ten_years_of_hours_in_a_blink():
    speed = np.random.default_rng(0).weibull(2.0, (100_000, 4)) * 8.0
    start = time.perf_counter()
    fit_shear(speed, [20.0, 40.0, 60.0, 80.0])
    assert time.perf_counter() - start < 0.5


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: shear_exponent(5.0, 6.0, 80.0, 40.0), "height_upper must be above height_lower"),
        (lambda: shear_exponent(-5.0, 6.0, 40.0, 80.0), "wind_speed_lower must not be negative"),
        (lambda: power_law(5.0, 0.0, 80.0, 0.2), "height must be positive"),
        (lambda: power_law(5.0, 10.0, 80.0, 0.2, displacement_height=12.0), "above the displ"),
        (lambda: log_law(5.0, 10.0, 80.0, 0.0), "roughness_length must be positive"),
        (lambda: log_law(5.0, 10.0, 80.0, 30.0), "roughness_length is in metres"),
        (lambda: friction_velocity(-1.0, 10.0, 0.03), "wind_speed must not be negative"),
        (lambda: fit_shear([5.0, 6.0], [40.0, 40.0]), "two different heights"),
        (lambda: fit_shear([5.0, 6.0, 7.0], [40.0, 60.0]), "one column for each of the 2 heights"),
        (lambda: fit_shear([5.0, -6.0], [40.0, 60.0]), "got -6 at position 1"),
        (lambda: fit_roughness([5.0], [40.0]), "at least two different heights"),
    ],
)
def test_bad_input_is_named(call, message):
    with pytest.raises(ValueError, match=message):
        call()
