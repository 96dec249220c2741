"""Mast distortion against the figures of the standard, potential flow, and planted shadows."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from windkit.kernels.mast_shadow import (
    LATTICE_THRUST_FACTOR,
    TUBE_BOOM_LENGTH,
    cylinder_flow_speed,
    in_mast_shadow,
    lattice_boom_length,
    lattice_flow_speed,
    lattice_thrust_coefficient,
    paired_speed_ratio,
)


def test_lattice_deficit():
    # MEA-5: IEC 61400-12-1:2005 annex G (from memory): Ct 0.5, booms of 3.7 and 5.7 face widths
    # leave 99.0 and 99.5 % of the speed.
    np.testing.assert_allclose(lattice_flow_speed([3.7, 5.7], 1.0, 0.5), [0.990, 0.995], atol=2e-4)
    np.testing.assert_allclose(
        lattice_boom_length([0.01, 0.005], 0.6, 0.5) / 0.6, [3.7, 5.7], atol=0.05
    )


@given(st.floats(0.001, 0.03), st.floats(0.1, 2.0), st.floats(0.2, 0.9))
def test_boom_of_the_asked_length_has_the_allowed_deficit(deficit, width, thrust):
    length = lattice_boom_length(deficit, width, thrust)
    found = 1.0 - lattice_flow_speed(length, width, thrust)
    assert found <= deficit + 1e-12
    if length > width:
        assert found == pytest.approx(deficit, rel=1e-9)


def test_lattice_thrust():
    # From memory: IEC 61400-12-1:2005 annex G, table of Ct; t = 0.2 by hand: c x 0.8 x 0.2.
    found = [lattice_thrust_coefficient(0.2, section=name) for name in LATTICE_THRUST_FACTOR]
    np.testing.assert_allclose(found, [0.704, 0.416, 0.336])


def test_tube_boom_lengths():
    # MEA-6: IEC 61400-12-1:2005 annex G (from memory): 6.1 diameters for 1 %, 8.2 for 0.5 %.
    assert dict(TUBE_BOOM_LENGTH) == {0.01: 6.1, 0.005: 8.2}


def test_cylinder_flow():
    # Batchelor 1967, section 6.6: stagnation in front of a cylinder, twice the speed at its
    # side; on the centre line 1 - (a/r)^2, so 1 % at ten radii.
    np.testing.assert_allclose(cylinder_flow_speed(0.5, [0.0, 90.0]), [0.0, 2.0], atol=1e-12)
    assert cylinder_flow_speed(5.0, 0.0) == pytest.approx(0.99)
    assert cylinder_flow_speed(5.0, 90.0) == pytest.approx(1.01)
    assert np.isnan(cylinder_flow_speed(5.0, 180.0))


@given(st.floats(0.6, 20.0), st.floats(-119.0, 119.0))
def test_cylinder_flow_from_its_components(distance, angle):
    # Batchelor 1967: radial (1 - q) cos, tangential (1 + q) sin with q = (a/r)^2.
    q, theta = (0.5 / distance) ** 2, np.radians(angle)
    expected = np.hypot((1 - q) * np.cos(theta), (1 + q) * np.sin(theta))
    assert cylinder_flow_speed(distance, angle) == pytest.approx(expected, abs=1e-9)


def test_shadow_is_behind_the_boom():
    # By hand: a boom to the south-west (225) is shadowed by winds from the north-east.
    found = in_mast_shadow([45.0, 15.0, 14.9, 75.1, 225.0, np.nan], 225.0)
    np.testing.assert_array_equal(found, [True, True, False, False, False, False])
    assert in_mast_shadow(355.0, 180.0, half_width=10.0)
    assert not in_mast_shadow(349.0, 180.0, half_width=10.0)


def test_planted_shadows_show_in_the_pair():
    # Two sensors, booms to 300 and 120 degrees; each loses a fifth with the mast in the wind.
    rng = np.random.default_rng(12)
    direction = rng.uniform(0.0, 360.0, 60_000)
    speed = rng.weibull(2.2, direction.size) * 9.0
    first = (
        speed
        * rng.normal(1.0, 0.01, speed.size)
        * np.where(in_mast_shadow(direction, 300.0, half_width=15.0), 0.8, 1.0)
    )
    second = (
        speed
        * rng.normal(1.0, 0.01, speed.size)
        * np.where(in_mast_shadow(direction, 120.0, half_width=15.0), 0.8, 1.0)
    )
    pair = paired_speed_ratio(first, second, direction)
    low = pair.sector_centres[pair.ratio < 0.85]  # the sectors at both edges are half in it
    high = pair.sector_centres[pair.ratio > 1.2]
    np.testing.assert_array_equal(low, [110.0, 115.0, 120.0, 125.0, 130.0])
    np.testing.assert_array_equal(high, [290.0, 295.0, 300.0, 305.0, 310.0])
    free = (np.abs(pair.ratio - 1.0) < 0.05) & (pair.count > 100)
    score = (pair.ratio[free] - 1.0) / pair.standard_error[free]
    # Most free sectors are within two standard errors of one, and the error is no ornament.
    assert 0.85 < np.mean(np.abs(score) < 2.0) <= 1.0
    assert score.std() == pytest.approx(1.0, abs=0.3)


def test_pair_leaves_out_slow_and_missing_records():
    pair = paired_speed_ratio(
        [8.0, 3.0, np.nan, 6.0, 10.0],
        [8.0, 4.0, 8.0, np.nan, 5.0],
        [0, 0, 0, 0, 90],
        sector_count=4,
    )
    np.testing.assert_array_equal(pair.count, [1, 1, 0, 0])
    np.testing.assert_array_equal(pair.ratio, [1.0, 2.0, np.nan, np.nan])
    assert np.isnan(pair.standard_error).all()


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: lattice_flow_speed(0.5, 1.0, 0.5), "boom_length must be at least face_width"),
        (lambda: lattice_flow_speed(3.0, 1.0, 0.0), "thrust_coefficient must be positive"),
        (lambda: lattice_boom_length(1.0, 1.0, 0.5), "flow_distortion must be a fraction"),
        (lambda: lattice_thrust_coefficient(20.0, section="square, round"), "between 0.1 and 0.5"),
        (lambda: lattice_thrust_coefficient(0.2, section="round"), "write one of: 'square, sh"),
        (lambda: cylinder_flow_speed(0.4, 0.0), "at least 0.5"),
        (lambda: in_mast_shadow(10.0, -90.0), "boom_direction must be between 0 and 360"),
        (lambda: in_mast_shadow(10.0, 90.0, half_width=0.0), "half_width must be above 0"),
        (lambda: paired_speed_ratio([8.0], [8.0, 9.0], [10.0]), "series of one length"),
        (lambda: paired_speed_ratio([8.0], [-8.0], [10.0]), "other_speed must not be negative"),
    ],
)
def test_bad_input_is_named(call, message):
    with pytest.raises(ValueError, match=message):
        call()
