"""Checks of windkit.kernels.bootstrap against the arch package and the loop it replaces."""

import numpy as np
import pytest
from arch.bootstrap import CircularBlockBootstrap, StationaryBootstrap, optimal_block_length
from scipy import signal

from windkit.kernels.bootstrap import (
    block_counts,
    block_length,
    circular_block_indices,
    resample_sector_lines,
    stationary_indices,
)


def red_noise(seed, count, phi):
    return signal.lfilter([1], [1, -phi], np.random.default_rng(seed).normal(size=count))


@pytest.mark.parametrize("phi", [0.3, 0.6, 0.9])
@pytest.mark.parametrize("count", [200, 365, 2000])
def test_block_length_against_arch(phi, count):
    # arch 8.0, optimal_block_length: Politis and White 2004 with the correction of 2009.
    x = red_noise(count, count, phi)
    theirs = optimal_block_length(x).iloc[0]
    ours = block_length(x)
    if theirs["stationary"] > 1:
        assert ours[0] == pytest.approx(theirs["stationary"], rel=0.02)
        assert ours[1] == pytest.approx(theirs["circular"], rel=0.02)
    else:  # a block is never shorter than one step
        assert ours == (1.0, pytest.approx(max(theirs["circular"], 1.0), rel=0.02))


@pytest.mark.parametrize(
    ("ours", "theirs"),
    [(stationary_indices, StationaryBootstrap), (circular_block_indices, CircularBlockBootstrap)],
)
def test_interval_of_a_mean_against_arch(ours, theirs):
    # The 80 % percentile interval of the mean of a series with memory; 4000 resamples either way.
    x = 7 + red_noise(3, 400, 0.7)
    index = ours(400, 15, 4000, seed=1)
    got = np.quantile(x[index].mean(axis=1), [0.1, 0.9])
    expected = theirs(15, x, seed=2).conf_int(np.mean, 4000, method="percentile", size=0.8)[:, 0]
    np.testing.assert_allclose(got, expected, atol=0.04 * np.ptp(expected))


def test_counts_say_how_often_a_step_is_drawn():
    counts = block_counts(50, 5, 300, seed=4)
    assert counts.shape == (300, 50)
    np.testing.assert_array_equal(counts.sum(axis=1), 50)
    index = stationary_indices(50, 5, 300, seed=4)
    np.testing.assert_array_equal(counts[7], np.bincount(index[7], minlength=50))


def test_resampled_lines_are_those_of_the_loop():
    rng = np.random.default_rng(9)
    n, days = 24 * 120, 120
    x, d = 8 * rng.weibull(2, n), rng.uniform(0, 360, n)
    y = 0.9 * x + 0.5 + rng.normal(size=n)
    long_x, long_d = 8 * rng.weibull(2, 20_000), rng.uniform(0, 360, 20_000)

    def power(v):
        return np.interp(v, [3, 12, 25, 25.001], [0, 3e6, 3e6, 0])

    counts = block_counts(days, 4, 5, seed=0)
    got = resample_sector_lines(x, d, y, long_x, long_d, counts=counts, power=power)
    sector = np.floor((d + 15) % 360 / 30).astype(int)
    long_sector = np.floor((long_d + 15) % 360 / 30).astype(int)
    for k in range(5):
        weight = np.repeat(counts[k], 24)
        predicted = np.empty_like(long_x)
        for s in range(12):
            inside = sector == s
            line = np.polyfit(x[inside], y[inside], 1, w=np.sqrt(weight[inside]))
            predicted[long_sector == s] = np.polyval(line, long_x[long_sector == s])
        assert got.mean[k] == pytest.approx(predicted.mean(), rel=1e-9)
        assert got.mean_cube[k] == pytest.approx(np.mean(predicted**3), rel=1e-9)
        assert got.energy[k] == pytest.approx(power(predicted).mean(), rel=2e-4)


def test_short_or_holed_series_are_refused():
    with pytest.raises(ValueError, match="at least 10 finite values"):
        block_length([1.0, 2.0])
    assert block_length(np.full(50, 2.0)) == (1.0, 1.0)
