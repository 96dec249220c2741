"""Frequency tables against hand counts, a published histogram and their own totals."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from windkit.kernels.frequency import (
    FrequencyTable,
    frequency_table,
    sector_index,
    speed_bin_edges,
)

# WEI-5: hours at each whole speed 0 to 25 m/s, after Masters 2004, Renewable and Efficient
# Electric Power Systems, ch. 6 (hours from memory, sum 8757).
HOURS_TEXT = (
    "24 276 527 729 869 941 946 896 805 690 565 444 335 243 170 114 74 46 28 16 9 5 3 1 1 0"
)
HOURS = np.array(HOURS_TEXT.split(), dtype=int)


def test_sectors_are_centred_on_north():
    # Common practice: with 16 sectors north is 348.75 to 11.25, with 12 it is 345 to 15.
    np.testing.assert_array_equal(
        sector_index([348.75, 0.0, 11.2, 11.25, 348.7, 360.0], 16), [0, 0, 0, 1, 15, 0]
    )
    np.testing.assert_array_equal(
        sector_index([344.9, 345.0, 14.9, 15.0, 180.0, np.nan], 12), [11, 0, 0, 1, 6, -1]
    )


def test_bins_are_centred_on_whole_numbers():
    # Common practice: the first bin is half a width, the others are centred on whole numbers.
    np.testing.assert_allclose(speed_bin_edges(3.2), [0.0, 0.5, 1.5, 2.5, 3.5])
    np.testing.assert_allclose(speed_bin_edges(3.5), [0.0, 0.5, 1.5, 2.5, 3.5, 4.5])
    np.testing.assert_allclose(speed_bin_edges(1.1, 0.5), [0.0, 0.25, 0.75, 1.25])
    np.testing.assert_allclose(speed_bin_edges(0.0), [0.0, 0.5])


@given(st.floats(0.0, 90.0), st.floats(0.01, 5.0))
def test_last_edge_is_just_above_the_largest_speed(max_speed, width):
    edges = speed_bin_edges(max_speed, width)
    assert edges[-1] > max_speed
    assert edges.size == 2 or edges[-2] <= max_speed * (1 + 1e-12)


def test_twelve_records_by_hand():
    # Counted by hand: 2 calms, 1 without a direction, 9 in sectors, 1 without a speed.
    speed = [0.0, 0.0, 3.0, 3.4, 3.5, 7.0, 7.0, 6.6, 1.0, 1.2, 2.0, 2.0, np.nan]
    direction = [np.nan, 90, 0, 359, 10, 90, 95, 180, 270, 260, np.nan, 275, 90]
    table = frequency_table(speed, direction, sector_count=4)
    assert table.count == 12
    assert table.calm_share == pytest.approx(2 / 12)
    expected = np.zeros((4, 8))
    expected[0, 3], expected[0, 4] = 2, 1
    expected[1, 7] = 2
    expected[2, 7] = 1
    expected[3, 1], expected[3, 2] = 2, 1
    np.testing.assert_allclose(table.share * 12, expected, atol=1e-12)
    np.testing.assert_allclose(table.undirected * 12, [2, 0, 1, 0, 0, 0, 0, 0], atol=1e-12)
    np.testing.assert_allclose(table.sector_share * 12, [3, 2, 1, 3])
    np.testing.assert_allclose(table.sector_centres, [0, 90, 180, 270])


def test_histogram_of_hours_keeps_its_mean_and_cube():
    # WEI-5: mean 7.0 m/s; the mean of cubes of whole speeds is 653.24 over 8760 h. Spread
    # evenly over bins 1 m/s wide, a cube gains v/4, so about 7/4 in the mean.
    speed = np.repeat(np.arange(26.0), HOURS)
    table = frequency_table(speed, np.full(speed.size, 45.0))
    assert table.count == 8757
    np.testing.assert_allclose(table.speed_share * 8757, HOURS[:25], atol=1e-9)
    assert table.mean_speed == pytest.approx(7.0, abs=0.01)
    assert table.mean_cube * 8757 / 8760 == pytest.approx(653.24 + 7.0 / 4, abs=0.2)
    assert table.calm_share == pytest.approx(24 / 8757)


SERIES = st.integers(1, 60).flatmap(
    lambda n: st.tuples(
        hnp.arrays(float, n, elements=st.one_of(st.just(0.0), st.floats(0.0, 40.0))),
        hnp.arrays(float, n, elements=st.one_of(st.just(np.nan), st.floats(0.0, 360.0))),
        hnp.arrays(float, n, elements=st.floats(0.01, 10.0)),
    )
)


@given(
    SERIES,
    st.integers(1, 36),
    st.sampled_from([0.1, 0.5, 1.0, 2.0]),
    st.floats(0.0, 1.0),
    st.booleans(),
)
@settings(max_examples=150)
def test_every_hour_is_in_its_place_once(series, sector_count, bin_width, calm, weighted):
    speed, direction, weight = series
    table = frequency_table(
        speed,
        direction,
        sector_count=sector_count,
        bin_width=bin_width,
        calm_threshold=calm,
        weight=weight if weighted else None,
    )
    assert table.share.sum() + table.undirected.sum() == pytest.approx(1.0, abs=1e-12)
    assert table.speed_share.sum() == pytest.approx(1.0, abs=1e-12)
    assert table.sector_share.sum() == pytest.approx(1.0 - table.undirected.sum(), abs=1e-12)
    mass = weight if weighted else np.ones_like(weight)
    undirected = (speed <= calm) | np.isnan(direction)
    assert table.undirected.sum() == pytest.approx(mass[undirected].sum() / mass.sum(), abs=1e-12)
    assert table.calm_share == pytest.approx(mass[speed <= calm].sum() / mass.sum(), abs=1e-12)
    # Each speed is within its bin, so the means differ by half a bin at most.
    mean = np.average(speed, weights=mass)
    assert abs(table.mean_speed - mean) <= bin_width / 2 + 1e-9


def test_fine_bins_approach_the_series():
    rng = np.random.default_rng(4)
    speed = rng.weibull(2.0, 20_000) * 8.0
    direction = rng.uniform(0.0, 360.0, speed.size)
    errors = []
    for width in (2.0, 0.2, 0.02):
        table = frequency_table(speed, direction, bin_width=width)
        errors.append(abs(table.mean_cube / np.mean(speed**3) - 1.0))
    # Bins 2 m/s wide add about v w^2/4 to the cube; fine bins are left with sampling noise.
    assert max(errors[1:]) < 1e-4 < errors[0] < 0.05
    assert table.mean_speed == pytest.approx(speed.mean(), rel=1e-4)


def test_a_weight_of_two_is_a_record_twice():
    once = frequency_table([3.0, 5.0, 5.0], [10.0, 200.0, 200.0])
    weighted = frequency_table([3.0, 5.0], [10.0, 200.0], weight=[1.0, 2.0])
    np.testing.assert_allclose(weighted.share, once.share)


def test_constant_series_has_one_cell():
    table = frequency_table(np.full(50, 7.0), np.full(50, 90.0))
    assert table.share[3, 7] == pytest.approx(1.0)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: sector_index([10.0, -999.0], 12), "between 0 and 360 .deg., got -999 at pos"),
        (lambda: sector_index(10.0, 0), "sector_count must be at least 1, got 0"),
        (lambda: speed_bin_edges(10.0, 0.0), "bin_width must be positive"),
        (lambda: speed_bin_edges(np.nan), "max_speed must be zero or more"),
        (lambda: frequency_table([1.0, 2.0], [10.0]), "series of one length"),
        (lambda: frequency_table([np.nan], [10.0]), "at least one known wind_speed.*0 known of 1"),
        (lambda: frequency_table([1.0], [10.0], weight=[-1.0]), "weight must be zero or more"),
        (lambda: frequency_table([1.0], [10.0], weight=[np.nan]), "weight must be zero or more"),
        (lambda: frequency_table([-1.0], [10.0]), "wind_speed must not be negative"),
    ],
)
def test_bad_input_is_named(call, message):
    with pytest.raises(ValueError, match=message):
        call()


def test_table_that_lost_its_calms_is_refused():
    with pytest.raises(ValueError, match=r"must sum to one, got 0\.9"):
        FrequencyTable(
            share=np.array([[0.5, 0.4]]),
            undirected=np.zeros(2),
            speed_edges=np.array([0.0, 0.5, 1.5]),
            sector_centres=np.array([0.0]),
            count=10,
        )
    with pytest.raises(ValueError, match=r"\(sectors, bins\) = \(1, 2\)"):
        FrequencyTable(
            share=np.ones((2, 2)),
            undirected=np.zeros(2),
            speed_edges=np.array([0.0, 0.5, 1.5]),
            sector_centres=np.array([0.0]),
            count=10,
        )
