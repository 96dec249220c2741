"""Maxima of blocks and storms against hand counts and a plain loop."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from windkit.kernels.extreme_samples import block_maxima, storm_maxima


def test_blocks_by_hand():
    speed = [5.0, 9.0, np.nan, 7.0, 6.0, 8.0, np.nan, np.nan, 11.0]
    year = [2001, 2001, 2001, 2002, 2002, 2002, 2003, 2003, 2003]
    years, maximum, share = block_maxima(speed, year, least_known=0.6)
    np.testing.assert_array_equal(years, [2001, 2002, 2003])
    np.testing.assert_array_equal(maximum, [9.0, 8.0, np.nan])
    np.testing.assert_allclose(share, [2 / 3, 1.0, 1 / 3])


def test_storms_by_hand():
    #        0  1   2   3  4  5   6  7  8  9  10  11
    speed = [3, 21, 25, 5, 5, 22, 5, 5, 5, 5, 23, np.nan]
    # Records 1, 2 and 5 are one storm while three steps may pass, two storms if only two may.
    np.testing.assert_array_equal(storm_maxima(speed, threshold=20.0, separation=3), [2, 10])
    np.testing.assert_array_equal(storm_maxima(speed, threshold=20.0, separation=2), [2, 5, 10])
    assert storm_maxima(speed, threshold=30.0, separation=2).size == 0


def test_of_equal_peaks_the_first_counts():
    np.testing.assert_array_equal(
        storm_maxima([25.0, 22.0, 25.0], threshold=20.0, separation=4), [0]
    )


@given(
    st.lists(st.one_of(st.just(float("nan")), st.integers(0, 30)), min_size=1, max_size=80),
    st.integers(1, 10),
)
def test_storms_are_those_of_a_plain_loop(values, separation):
    speed = np.array(values, dtype=float)
    peaks, last = [], None
    for i, v in enumerate(speed):
        if v > 20:
            if last is None or i - last > separation:
                peaks.append(i)
            elif v > speed[peaks[-1]]:
                peaks[-1] = i
            last = i
    np.testing.assert_array_equal(
        storm_maxima(speed, threshold=20.0, separation=separation), np.array(peaks, dtype=int)
    )


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: block_maxima([1.0, 2.0], [2001]), "series of one length"),
        (lambda: block_maxima([1.0], [2001.0]), "blocks must hold whole numbers"),
        (lambda: block_maxima([1.0], [2001], least_known=90.0), "least_known must be above 0"),
        (lambda: storm_maxima([[1.0]], threshold=1.0, separation=1), "must be one series"),
        (lambda: storm_maxima([1.0], threshold=1.0, separation=0), "at least 1 step, got 0"),
    ],
)
def test_bad_input_is_named(call, message):
    with pytest.raises(ValueError, match=message):
        call()
