"""Tests of windkit.kernels.exceedance."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from windkit.kernels.exceedance import (
    combine_correlated,
    combine_in_quadrature,
    exceedance_level,
    exceedance_table,
    from_rectangular_bound,
    from_triangular_bound,
    shortfall_rate,
    total_uncertainty,
    wind_to_energy,
)

PARTS = st.lists(st.floats(0.0, 0.3), min_size=1, max_size=8)


def test_published_table_of_energy_uncertainties():
    # UNC-1: Jain 2011, Wind Energy Engineering, table 8-8: sensitivity 1.5 on four wind-speed
    # terms, one on four energy terms; printed total 10.5 %.
    wind = wind_to_energy([0.05, 0.03, 0.03, 0.02], 1.5)
    energy = [0.003, 0.006, 0.017, 0.010]
    assert combine_in_quadrature([*wind, *energy]) == pytest.approx(0.105, abs=5e-4)


@pytest.mark.parametrize(
    ("probability", "z"),
    [(0.75, 0.67449), (0.84, 0.99446), (0.90, 1.28155), (0.95, 1.64485), (0.99, 2.32635)],
)
def test_normal_quantiles(probability, z):
    # UNC-2: quantiles of the standard normal distribution, any statistical table.
    assert 1 - exceedance_level(1.0, 1.0, probability) == pytest.approx(z, abs=1e-5)


def test_levels_of_a_worked_example():
    # UNC-3: Jain 2011, p. 164: mean 2000, standard deviation 300; mean less one sd is P84.
    levels = exceedance_level(2000.0, 0.15, [0.5, 0.75, 0.9, 0.95, 0.99])
    expected = [2000, 1797.65, 1615.53, 1506.54, 1302.10]
    np.testing.assert_allclose(levels, expected, atol=0.01)
    # One standard deviation is exceeded with probability 0.8413 (normal table).
    assert exceedance_level(2000.0, 0.15, 0.841345) == pytest.approx(1700.0, abs=0.01)


def test_levels_at_ten_percent():
    # UNC-4: normal quantiles on P50 = 100 and 10 %.
    levels = exceedance_level(100.0, 0.1, [0.75, 0.9, 0.95, 0.99])
    np.testing.assert_allclose(levels, [93.2551, 87.1845, 83.5515, 76.7365], atol=1e-4)


def test_only_the_yearly_part_shrinks():
    # UNC-5: sqrt(s^2 + v^2/n) for 8 % and 6 %; P90 over P50 through the normal quantile.
    table = exceedance_table(1.0, 0.08, 0.06)
    np.testing.assert_allclose(table.standard_uncertainty, [0.10, 0.082219, 0.081117], atol=1e-6)
    np.testing.assert_allclose(table.level[:, 2], [0.871845, 0.894632, 0.896044], atol=1e-6)


def test_ratio_of_p90_for_one_and_many_years():
    # Needs G20, a calculation, not a publication: static 8 %, yearly 9 % give P90/P50 of 0.846,
    # 0.891 and 0.894 over 1, 10 and 20 years; P99/P50 of 0.72 and 0.80 over 1 and 10.
    table = exceedance_table(1.0, 0.08, 0.09)
    np.testing.assert_allclose(table.level[:, 2], [0.846, 0.891, 0.894], atol=5e-4)
    np.testing.assert_allclose(table.level[:2, 4], [0.72, 0.80], atol=5e-3)


def test_correlated_components_add_and_uncorrelated_ones_do_not():
    # UNC-6: Jain 2011, equations 8-22 and 8-23; JCGM 100:2008 (GUM), 5.2.2 note 1: with full
    # correlation the combined uncertainty is the linear sum.
    parts = np.array([0.03, 0.02, 0.01])
    assert combine_correlated(parts, np.ones((3, 3))) == pytest.approx(0.06)
    assert combine_correlated(parts, np.eye(3)) == pytest.approx(np.sqrt(14) / 100)


def test_correlated_components_against_drawn_ones():
    # Simulation: the spread of a sum of drawn quantities.
    parts = np.array([0.03, 0.05])
    matrix = np.array([[1.0, 0.4], [0.4, 1.0]])
    drawn = np.random.default_rng(3).multivariate_normal(
        [0, 0], matrix * np.outer(parts, parts), 400_000
    )
    assert combine_correlated(parts, matrix) == pytest.approx(drawn.sum(axis=1).std(), rel=5e-3)


def test_ten_resistors_in_series():
    # JCGM 100:2008 (GUM), 5.2.2 example: ten resistors of 1000 ohm, each calibrated against the
    # same standard with 100 milliohm: fully correlated they make 1 ohm, independent 0.32 ohm.
    parts = np.full(10, 0.1)
    assert combine_correlated(parts, np.ones((10, 10))) == pytest.approx(1.0)
    assert combine_in_quadrature(parts) == pytest.approx(0.32, abs=0.005)


def test_bounds_into_standard_uncertainties():
    # UNC-8: Burton et al. 2001, Wind Energy Handbook, 4.11.3; the spread of drawn values agrees.
    assert from_rectangular_bound(3.0) == pytest.approx(3 / np.sqrt(3))
    assert from_triangular_bound(3.0) == pytest.approx(3 / np.sqrt(6))
    rng = np.random.default_rng(5)
    assert rng.uniform(-3, 3, 200_000).std() == pytest.approx(from_rectangular_bound(3.0), rel=0.01)
    drawn = rng.triangular(-3, 0, 3, 200_000)
    assert drawn.std() == pytest.approx(from_triangular_bound(3.0), rel=0.01)


def test_share_of_projects_below_p90_under_a_bias():
    # Needs G2, a calculation: P50 6.6 % too high with a stated 9 % puts 29 % below P90.
    assert shortfall_rate(0.09, 0.9, bias=-0.066) == pytest.approx(0.29, abs=5e-3)
    np.testing.assert_allclose(shortfall_rate([0.05, 0.2], 0.9, bias=0.0), 0.1)


@given(PARTS, st.floats(0.0, 0.3))
def test_one_more_uncertainty_never_lowers_the_total(parts, extra):
    assert combine_in_quadrature([*parts, extra]) >= combine_in_quadrature(parts) * (1 - 1e-12)


@given(PARTS)
def test_any_positive_correlation_lies_between_quadrature_and_sum(parts):
    size = len(parts)
    total = combine_correlated(parts, np.full((size, size), 0.3) + 0.7 * np.eye(size))
    assert combine_in_quadrature(parts) - 1e-12 <= total <= sum(parts) + 1e-12


@given(st.floats(0.0, 0.2), st.floats(0.0, 0.2))
def test_higher_confidence_and_fewer_years_mean_less_energy(static, yearly):
    level = exceedance_table(100.0, static, yearly).level
    assert np.all(np.diff(level, axis=1) <= 0)
    assert np.all(np.diff(level[:, 1:], axis=0) >= 0)
    np.testing.assert_allclose(level[:, 0], 100.0)


def test_missing_values_stay_missing():
    assert np.isnan(combine_in_quadrature([0.02, np.nan]))
    assert np.isnan(exceedance_level(np.nan, 0.1, 0.9))
    assert np.isnan(total_uncertainty(np.nan, 0.06, 1))


@pytest.mark.parametrize(
    ("call", "words"),
    [
        (lambda: exceedance_level(1.0, 0.1, 90), "write 0.9 for P90"),
        (lambda: exceedance_level(1.0, 8.0, 0.9), "write 0.08 for 8 %"),
        (lambda: total_uncertainty(0.08, 0.06, 0.5), "years must be at least 1"),
        (lambda: combine_in_quadrature([0.1, -0.1]), "must not be negative"),
        (lambda: combine_correlated([0.1, 0.1], [[1.0]]), "has shape"),
        (lambda: combine_correlated([0.1, 0.1], [[1, 2], [2, 1]]), "from -1 to 1"),
        (lambda: combine_correlated([0.1, 0.1], [[1, 0.5], [0.2, 1]]), "above and below"),
        (
            lambda: combine_correlated(
                [0.1, 0.1, 0.1], [[1, 0.9, -0.9], [0.9, 1, 0.9], [-0.9, 0.9, 1]]
            ),
            "contradict each other",
        ),
        (lambda: shortfall_rate(0.0, 0.9, bias=-0.05), "above zero"),
    ],
)
def test_messages(call, words):
    with pytest.raises(ValueError, match=words):
        call()
