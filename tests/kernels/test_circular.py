"""Directions against scipy.stats, compass facts and trigonometry."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from windkit.kernels.circular import (
    components,
    direction_difference,
    mean_direction,
    resultant_length,
    speed_weighted_mean_direction,
    wind_from_components,
)

DIRECTIONS = st.lists(st.floats(0.0, 359.99), min_size=2, max_size=40)


def test_mean_across_north():
    # Common practice: the mean of 350 and 10 degrees is north, not south.
    assert direction_difference(mean_direction([350.0, 10.0]), 0.0) == pytest.approx(0.0, abs=1e-9)
    assert 0.0 <= mean_direction([350.0, 10.0]) < 360.0


@given(DIRECTIONS)
def test_mean_and_spread_as_scipy(directions):
    # scipy.stats.circmean and circvar (one less the resultant length).
    length = float(resultant_length(directions))
    assert length == pytest.approx(1.0 - stats.circvar(directions, high=360), abs=1e-9)
    if length > 1e-6:
        reference = stats.circmean(directions, high=360, low=0)
        difference = direction_difference(mean_direction(directions), reference)
        assert difference == pytest.approx(0.0, abs=1e-6)


@pytest.mark.parametrize("cancelling", [[0.0, 180.0], [10.0, 130.0, 250.0], [0, 90, 180, 270]])
def test_directions_that_cancel_have_no_mean(cancelling):
    assert np.isnan(mean_direction(cancelling))
    assert resultant_length(cancelling) == pytest.approx(0.0, abs=1e-12)


def test_mean_skips_missing_and_works_along_an_axis():
    table = np.array([[80.0, np.nan, 100.0], [np.nan, np.nan, np.nan]])
    means = mean_direction(table, axis=1)
    assert means[0] == pytest.approx(90.0)
    assert np.isnan(means[1])
    assert np.isnan(resultant_length(table, axis=1)[1])


def test_two_means_answer_two_questions():
    # By hand: 9 m/s once from the south, 1 m/s eight times from the north: most of the time
    # the wind is northerly, but the air has come from the south.
    speed = [9.0] + [1.0] * 8
    direction = [180.0] + [0.0] * 8
    assert mean_direction(direction) == pytest.approx(0.0, abs=1e-9)
    assert speed_weighted_mean_direction(speed, direction) == pytest.approx(180.0)


def test_calms_carry_nothing_into_the_weighted_mean():
    assert speed_weighted_mean_direction([5.0, 0.0, 0.0], [90.0, np.nan, 270.0]) == pytest.approx(
        90.0
    )


@pytest.mark.parametrize(
    ("u", "v", "direction"),
    [(0.0, -5.0, 0.0), (-5.0, 0.0, 90.0), (0.0, 5.0, 180.0), (5.0, 0.0, 270.0)],
)
def test_wind_comes_from_where_the_components_start(u, v, direction):
    # Common practice (CF wind_from_direction): a northward component is a wind from the south.
    speed, found = wind_from_components(u, v)
    assert speed == pytest.approx(5.0)
    assert found == pytest.approx(direction)
    assert components(5.0, direction) == pytest.approx((u, v), abs=1e-12)


def test_calm_has_no_direction_but_has_components():
    speed, direction = wind_from_components(0.0, 0.0)
    assert speed == 0.0
    assert np.isnan(direction)
    assert components(0.0, np.nan) == (0.0, 0.0)
    assert np.isnan(components(3.0, np.nan)).all()
    assert np.isnan(wind_from_components(np.nan, 1.0)).all()


@given(st.floats(-30.0, 30.0), st.floats(-30.0, 30.0))
def test_direction_stays_below_360(u, v):
    _, direction = wind_from_components(u, v)
    assert np.isnan(direction) or 0.0 <= direction < 360.0


def test_direction_a_hair_west_of_north_is_not_360():
    _, direction = wind_from_components(1e-20, -5.0)
    assert direction == 0.0


@pytest.mark.parametrize(
    ("first", "second", "difference"),
    [(10.0, 350.0, 20.0), (350.0, 10.0, -20.0), (0.0, 180.0, -180.0), (90.0, 45.0, 45.0)],
)
def test_difference_goes_the_short_way(first, second, difference):
    assert direction_difference(first, second) == pytest.approx(difference)


@given(st.floats(0.0, 359.9), st.floats(-179.9, 179.9))
def test_difference_finds_the_turn(direction, turn):
    found = direction_difference((direction + turn) % 360.0, direction)
    assert found == pytest.approx(turn, abs=1e-9)


def test_negative_speed_is_named():
    with pytest.raises(ValueError, match="wind_speed must not be negative"):
        components(-1.0, 90.0)
    with pytest.raises(ValueError, match="wind_speed must not be negative"):
        speed_weighted_mean_direction([-1.0], [90.0])
