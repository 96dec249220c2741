"""Turbulence against the wake formulas worked outside, and plain loops over bins."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from windkit.kernels.frequency import sector_index
from windkit.kernels.turbulence import (
    REPRESENTATIVE_FACTOR,
    effective_turbulence,
    gust_factor,
    turbulence_in_sectors,
    turbulence_in_speed_bins,
    turbulence_intensity,
    wake_standard_deviation_frandsen_2005,
    wake_turbulence_frandsen_2007,
)


@pytest.fixture(scope="module")
def station():
    rng = np.random.default_rng(8)
    speed = rng.weibull(2.0, 5000) * 8.0
    deviation = speed * rng.normal(0.14, 0.02, 5000).clip(0.02)
    direction = rng.uniform(0.0, 360.0, 5000)
    speed[:50], deviation[50:90], direction[90:150] = 0.0, np.nan, np.nan
    return speed, deviation, direction


def test_intensity_by_hand():
    # Definition: 1.2 over 8 is 15 %; a calm has none.
    np.testing.assert_allclose(turbulence_intensity([8.0, 0.0], [1.2, 0.0]), [0.15, np.nan])


def test_bins_are_those_of_a_plain_loop(station):
    # The same arithmetic with masks, numpy.mean and numpy.std(ddof=1).
    speed, deviation, _ = station
    table = turbulence_in_speed_bins(speed, deviation)
    known = (speed > 0.0) & ~np.isnan(deviation)
    assert table.count.sum() == known.sum()
    for low, high, count, mean, spread, representative in zip(
        table.speed_edges[:-1],
        table.speed_edges[1:],
        table.count,
        table.mean,
        table.spread,
        table.representative,
        strict=True,
    ):
        inside = known & (speed >= low) & (speed < high)
        intensity = deviation[inside] / speed[inside]
        assert count == intensity.size
        if count > 1:
            assert mean == pytest.approx(intensity.mean())
            assert spread == pytest.approx(intensity.std(ddof=1))
            # IEC-4: IEC 61400-1: representative = mean + 1.28 spread.
            assert representative == pytest.approx(intensity.mean() + 1.28 * intensity.std(ddof=1))
        else:
            assert np.isnan(spread)


def test_sectors_are_those_of_a_plain_loop(station):
    speed, deviation, direction = station
    table = turbulence_in_sectors(speed, deviation, direction, sector_count=6)
    assert table.mean.shape == (6, table.speed_edges.size - 1)
    known = (speed > 0.0) & ~np.isnan(deviation) & ~np.isnan(direction)
    assert table.count.sum() == known.sum()
    inside = known & (sector_index(direction, 6) == 2) & (speed >= 7.5) & (speed < 8.5)
    intensity = deviation[inside] / speed[inside]
    assert table.count[2, 8] == inside.sum()
    assert table.mean[2, 8] == pytest.approx(intensity.mean())
    assert table.spread[2, 8] == pytest.approx(intensity.std(ddof=1))


def test_representative_value_is_near_the_90_percent_point_of_a_normal():
    # UNC-2: the normal 90 % quantile is 1.28155; IEC 61400-1 rounds it to 1.28.
    assert pytest.approx(1.28155, abs=2e-3) == REPRESENTATIVE_FACTOR


def test_wake_turbulence():
    # IEC-8: Frandsen 2007; IEC 61400-1:2019 annex E (formula from memory): Ct 0.8, I0 0.08.
    np.testing.assert_allclose(
        wake_turbulence_frandsen_2007([3.0, 5.0, 7.0, 10.0], 0.8, 0.08),
        [0.252078, 0.185574, 0.151665, 0.124769],
        atol=1e-6,
    )


def test_wake_standard_deviation():
    # IEC-8b: IEC 61400-1:2005 annex D (formula from memory): V 10, sigma 0.8.
    np.testing.assert_allclose(
        wake_standard_deviation_frandsen_2005(10.0, 0.8, [5.0, 7.0]),
        [1.717225, 1.413518],
        atol=1e-6,
    )


@pytest.mark.parametrize(("exponent", "expected"), [(4.0, 0.128807), (10.0, 0.140957)])
def test_effective_turbulence(exponent, expected):
    # IEC-9: eight neighbours at 7 D, p_w = 0.06.
    wakes = wake_turbulence_frandsen_2007(np.full(8, 7.0), 0.8, 0.08)
    assert effective_turbulence(0.08, wakes, exponent) == pytest.approx(expected, abs=1e-6)


@given(st.floats(0.02, 0.3), st.floats(1.0, 15.0), st.integers(1, 8))
def test_effective_turbulence_is_between_ambient_and_wake(ambient, exponent, neighbours):
    wakes = wake_turbulence_frandsen_2007(np.full(neighbours, 5.0), 0.7, ambient)
    effective = effective_turbulence(ambient, wakes, exponent)
    assert ambient - 1e-12 <= effective <= wakes[0] + 1e-12


def test_effective_turbulence_of_many_bins():
    ambient = np.array([0.15, 0.12, 0.10])
    wakes = wake_turbulence_frandsen_2007([[4.0, 6.0]], 0.8, ambient[:, None])
    assert effective_turbulence(ambient, wakes, 4.0).shape == (3,)


def test_gust_factor():
    # SHR-8: Wieringa 1973, in Burton et al. 2001, eq. 2.40: 3 s gusts.
    np.testing.assert_allclose(
        gust_factor([0.10, 0.15, 0.20], 3.0), [1.29778, 1.44667, 1.59557], atol=1e-5
    )
    assert gust_factor(0.15, 3600.0) == 1.0


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: turbulence_intensity(8.0, 15.0 * 8), "not a percentage or a maximum"),
        (lambda: turbulence_intensity(8.0, -1.0), "speed_standard_deviation must not be negative"),
        (lambda: turbulence_in_speed_bins([8.0], [1.0, 2.0]), "series of one length"),
        (lambda: turbulence_in_speed_bins([0.0], [0.0]), "none of 1"),
        (lambda: turbulence_in_sectors([8.0], [1.0], [10.0, 20.0]), "length of wind_speed"),
        (lambda: turbulence_in_sectors([8.0], [1.0], [np.nan]), "check the vane"),
        (lambda: wake_turbulence_frandsen_2007(5.0, 0.8, 8.0), "looks like percent"),
        (lambda: wake_turbulence_frandsen_2007(0.0, 0.8, 0.1), "distance_diameters must be"),
        (lambda: effective_turbulence(0.1, np.full(9, 0.2), 4.0), "at most 8 neighbours, got 9"),
        (lambda: effective_turbulence(0.1, [0.2], 0.5), "woehler_exponent must be at least 1"),
        (lambda: effective_turbulence(0.1, [0.2], 4.0, wake_probability=1.5), "wake_probab"),
        (lambda: gust_factor(0.1, 7200.0), "gust_duration must be at most 3600 s"),
    ],
)
def test_bad_input_is_named(call, message):
    with pytest.raises(ValueError, match=message):
        call()
