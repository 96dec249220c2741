"""Checks of windkit.kernels.blend and back_test: numpy on single windows, known truths."""

import numpy as np
import pytest
from scipy import stats
from statsmodels.tsa.arima_process import ArmaProcess

from windkit.kernels.back_test import (
    draw_errors,
    held_out_rms,
    persistent_mean_variance,
    stand_in_coverage,
    widening_factor,
)
from windkit.kernels.blend import (
    blend_references,
    campaign_moments,
    fill_gaps,
    window_moments,
)


def test_window_moments_are_numpys():
    rng = np.random.default_rng(0)
    values = 6 + rng.normal(size=(300, 3)) @ rng.normal(size=(3, 3))
    starts = np.array([0, 57, 200])
    mean, sd, correlation = window_moments(values, np.ones(100), starts)
    for row, start in enumerate(starts):
        window = values[start : start + 100]
        np.testing.assert_allclose(mean[row], window.mean(axis=0))
        np.testing.assert_allclose(sd[row], window.std(axis=0))
        np.testing.assert_allclose(correlation[row], np.corrcoef(window.T), atol=1e-9)


def test_window_pattern_leaves_out_what_the_campaign_left_out():
    values = np.random.default_rng(1).normal(size=(60, 2)) + 5
    pattern = np.r_[np.ones(10), np.zeros(5), np.ones(10)]
    mean = window_moments(values, pattern, np.array([20]))[0]
    kept = np.r_[20:30, 35:45]
    np.testing.assert_allclose(mean[0], values[kept].mean(axis=0))


def test_gaps_are_filled_at_the_references_own_level():
    rng = np.random.default_rng(2)
    weather = 1 + 0.3 * rng.random(4000)
    whole = weather[:, None] * np.array([5.0, 8.0, 6.5])
    holed = whole.copy()
    holed[:1500, 1] = np.nan
    holed[10:20] = np.nan
    filled, measured = fill_gaps(holed)
    np.testing.assert_allclose(filled[20:1500, 1], whole[20:1500, 1], rtol=2e-3)
    assert np.count_nonzero(~measured) == 1500 + 20
    np.testing.assert_array_equal(filled[measured], holed[measured])


def _study(seed, *, years=12, common=0.06, own=0.02):
    """Daily records that share yearly changes, and one year of a site that shares them too."""
    rng = np.random.default_rng(seed)
    level = np.exp(common * rng.normal(size=years))[:, None] * np.exp(
        own * rng.normal(size=(years, 6))
    )
    days = np.repeat(level, 365, axis=0)
    weather = rng.weibull(2.2, size=(days.shape[0], 1)) ** 0.8
    values = days * weather * np.exp(0.25 * rng.normal(size=days.shape)) * rng.uniform(4, 9, 6)
    start = int(rng.integers(0, (years - 1) * 365))
    weight = np.zeros(days.shape[0])
    weight[start : start + 365] = 1
    return values[:, 0], values[:, 1:], weight


def _blended(site, references, weight):
    moments = campaign_moments(site, references, weight)
    starts = np.arange(0, site.size - 365, 30)
    found = blend_references(
        moments, references, np.ones(references.shape, bool), np.ones(365), starts
    )
    return found, np.log(site.mean() / moments.target_mean[0])


def test_blend_beats_doing_nothing_and_knows_its_error():
    errors, nothing, claimed = [], [], []
    for seed in range(40):
        found, truth = _blended(*_study(seed))
        errors.append(truth - found.correction)
        nothing.append(truth)
        claimed.append(found.blend_rms)
    rms = np.sqrt(np.mean(np.square(errors)))
    assert rms < 0.5 * np.sqrt(np.mean(np.square(nothing)))
    assert np.sqrt(np.mean(np.square(claimed))) == pytest.approx(rms, rel=0.3)


def test_blend_shrinks_where_the_references_say_nothing():
    # Stations that share no change of climate: a correction would only add noise.
    shrunk = np.mean([_blended(*_study(s, common=0.0, own=0.06))[0].shrinkage for s in range(15)])
    kept = np.mean([_blended(*_study(s))[0].shrinkage for s in range(15)])
    assert shrunk < 0.9 * kept
    assert kept > 0.9


def test_scale_of_a_sensor_makes_no_difference():
    site, references, weight = _study(3)
    first = _blended(site, references, weight)[0]
    second = _blended(site, references * np.array([1.1, 0.9, 1.3, 1.0, 0.7]), weight)[0]
    assert second.correction == pytest.approx(first.correction, abs=1e-9)
    np.testing.assert_allclose(second.errors, first.errors, atol=1e-9)


def test_coverage_and_widening_of_known_errors():
    rng = np.random.default_rng(0)
    even = rng.normal(size=(10, 2000))
    # Nine others: an interval of Student's t with 4 x 8 degrees of freedom, held by the normal.
    claimed = stats.norm.cdf(stats.t.ppf(0.9, 32)) * 2 - 1
    assert stand_in_coverage(even, 0.8) == pytest.approx(claimed, abs=0.006)
    assert widening_factor(even) == pytest.approx(1.0, abs=0.02)
    # Two stand-ins of which one errs three times as far: neither's errors speak for the other.
    uneven = even[:2] * np.array([[1.0], [6.0]])
    assert stand_in_coverage(uneven, 0.8) < 0.75
    assert widening_factor(uneven) > 1.3
    # That one stand-in says little of another is allowed for in the draws, not asked for again.
    assert widening_factor(even[:2] * np.array([[1.0], [1.5]])) == 1.0


def test_draws_widen_for_few_stand_ins():
    rng = np.random.default_rng(1)
    many, few = rng.normal(size=(40, 300)), rng.normal(size=(2, 300))
    wide = np.quantile(draw_errors(few, 4000), [0.1, 0.9])
    narrow = np.quantile(draw_errors(many, 4000), [0.1, 0.9])
    # Student's t with 4 degrees of freedom has its 90 % point at 1.533, the normal at 1.282. The
    # site has two references where a stand-in had one: variance 1 + 1/2 in place of 1 + 1.
    np.testing.assert_allclose(wide, np.sqrt(0.75) * np.array([-1.533, 1.533]), atol=0.12)
    np.testing.assert_allclose(narrow, [-1.282, 1.282], atol=0.06)
    np.testing.assert_array_equal(draw_errors(few, 100, seed=3), draw_errors(few, 100, seed=3))


def test_a_site_among_exchangeable_stations_errs_as_drawn():
    # Three of four stations alike stand in for the fourth: the rms of the draws is its rms error.
    rng = np.random.default_rng(5)
    stations = rng.normal(size=(4, 20_000))
    site = stations[0] - stations[1:].mean(axis=0)
    stand_ins = stations[1:] - (stations[1:].sum(axis=0) - stations[1:]) / 2
    draws = draw_errors(stand_ins, 4000)
    # Student's t with 8 degrees of freedom has the variance 8/6.
    assert np.std(draws) == pytest.approx(np.sqrt(8 / 6) * np.std(site), rel=0.04)


def test_variance_of_a_mean_with_memory():
    # statsmodels' autocovariance of an AR(1), summed over all pairs of 20 values.
    phi, n = 0.4, 20
    process = ArmaProcess([1, -phi], [1]).acovf(n)
    lag = np.abs(np.subtract.outer(np.arange(n), np.arange(n)))
    assert persistent_mean_variance(n, phi) == pytest.approx(
        process[lag].sum() / n**2 / process[0], rel=1e-6
    )
    # MCP-3: independent years, sd/sqrt(n).
    assert persistent_mean_variance(10, 0.0) == pytest.approx(0.1)


def test_held_out_error_is_nothing_for_a_proportional_site():
    rng = np.random.default_rng(4)
    references = rng.uniform(3, 9, (300, 1)) * np.array([1.0, 1.4])
    blocks = np.arange(300) // 30
    weight = np.ones(300)
    assert held_out_rms(0.7 * references[:, 0], references, weight, blocks) < 1e-12
    noisy = references[:, 0] * np.exp(rng.normal(size=10)[blocks] * 0.1)
    assert held_out_rms(noisy, references, weight, blocks) == pytest.approx(0.1, rel=0.6)
