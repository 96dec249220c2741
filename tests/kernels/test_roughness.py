"""Roughness classes and the drag law against published tables and figures worked outside."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from windkit.kernels.roughness import (
    ROUGHNESS_CLASSES,
    TERRAIN_ROUGHNESS,
    change_roughness,
    coriolis_parameter,
    geostrophic_friction_velocity,
    geostrophic_wind,
)

ROUGHNESS = np.array([0.0002, 0.03, 0.1, 0.4])


def test_terrain_classes_as_printed():
    # SHR-1: Davenport et al. 2000; WMO-No. 8 (the last one, 2 m or more, from memory).
    assert list(TERRAIN_ROUGHNESS.values()) == [0.0002, 0.005, 0.03, 0.10, 0.25, 0.5, 1.0, 2.0]


def test_atlas_classes_as_printed():
    # SHR-2: Troen and Petersen 1989, European Wind Atlas; SHR-2b: half classes of a university
    # wind-energy reader and Jain 2011, table 3-5.
    whole = {0.0: 0.0002, 1.0: 0.03, 2.0: 0.10, 3.0: 0.40}
    half = {0.5: 0.0024, 1.5: 0.055, 2.5: 0.2, 3.5: 0.8, 4.0: 1.6}
    assert dict(ROUGHNESS_CLASSES) == whole | half
    lengths = [ROUGHNESS_CLASSES[key] for key in sorted(ROUGHNESS_CLASSES)]
    assert lengths == sorted(lengths)


def test_drag_law():
    # SHR-6: Troen and Petersen 1989, ch. 8 (constants from memory), G = 10, f = 1.2e-4.
    u = geostrophic_friction_velocity(10.0, ROUGHNESS, 1.2e-4)
    np.testing.assert_allclose(u, [0.264855, 0.372582, 0.410592, 0.463022], atol=1e-5)


@pytest.mark.parametrize(
    ("height", "expected"),
    [
        # SHR-6b: the same, neutral speeds at 10 and 100 m.
        (10.0, [7.16417, 5.41095, 4.72711, 3.72602]),
        (100.0, [8.68879, 7.55571, 7.09067, 6.39139]),
    ],
)
def test_speeds_under_one_geostrophic_wind(height, expected):
    speeds = change_roughness(7.16417, 10.0, 0.0002, height, ROUGHNESS, 1.2e-4)
    np.testing.assert_allclose(speeds, expected, atol=1e-4)


def test_coriolis_parameter():
    # Textbook value at 45 degrees: 1.03e-4 1/s, the same on both sides of the equator.
    np.testing.assert_allclose(coriolis_parameter([45.0, -45.0]), 1.03e-4, rtol=2e-3)


@given(st.floats(0.5, 40.0), st.floats(1e-5, 2.0), st.floats(2e-5, 1.45e-4))
def test_drag_law_solved_both_ways(speed, roughness, coriolis):
    u = geostrophic_friction_velocity(speed, roughness, coriolis)
    assert geostrophic_wind(u, roughness, coriolis) == pytest.approx(speed, rel=1e-10)


@given(st.floats(3.0, 20.0), st.floats(2e-4, 0.5))
def test_rougher_ground_is_slower_and_the_same_ground_the_same(speed, roughness):
    same = change_roughness(speed, 50.0, roughness, 50.0, roughness, 1.1e-4)
    assert same == pytest.approx(speed, rel=1e-9)
    assert change_roughness(speed, 50.0, roughness, 50.0, 2 * roughness, 1.1e-4) < speed


def test_calm_and_missing():
    np.testing.assert_array_equal(
        change_roughness([0.0, np.nan], 10.0, 0.03, 50.0, 0.1, 1.1e-4), [0.0, np.nan]
    )


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: coriolis_parameter(2.0), "at least 5 degrees from the equator, got 2"),
        (lambda: coriolis_parameter(95.0), "between -90 and 90"),
        (lambda: geostrophic_wind(0.3, 0.0, 1e-4), "roughness_length must be positive"),
        (lambda: geostrophic_friction_velocity(-1.0, 0.1, 1e-4), "geostrophic_speed must not be"),
    ],
)
def test_bad_input_is_named(call, message):
    with pytest.raises(ValueError, match=message):
        call()
