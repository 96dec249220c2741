"""Ordered Gumbel values against Lieblein's table, closed forms and simulation."""

import numpy as np
import pytest

from windkit.kernels.gumbel_order import (
    MOST_ORDERED_VALUES,
    best_linear_weights,
    gumbel_order_moments,
)


def test_best_linear_weights_for_ten():
    # EXT-6, EXT-6b: Lieblein 1974, NBSIR 74-602 (figures from memory of the table).
    location, scale = best_linear_weights(10)
    np.testing.assert_allclose(
        location.reshape(2, 5),
        [
            [0.222867, 0.162308, 0.133845, 0.112868, 0.095636],
            [0.080618, 0.066988, 0.054193, 0.041748, 0.028929],
        ],
        atol=1e-5,
    )
    np.testing.assert_allclose(
        scale.reshape(2, 5),
        [
            [-0.347830, -0.091158, -0.019210, 0.022179, 0.048671],
            [0.066064, 0.077021, 0.082771, 0.083552, 0.077940],
        ],
        atol=1e-5,
    )


@pytest.mark.parametrize("count", [2, 7, 40, 150])
def test_moments_keep_the_closed_forms(count):
    # The largest of n Gumbel values is Gumbel moved by ln n; all of them together keep the
    # mean (Euler's constant) and the variance (pi^2/6) of the sample.
    mean, covariance = gumbel_order_moments(count)
    assert mean[-1] == pytest.approx(np.euler_gamma + np.log(count), abs=1e-12)
    assert covariance[-1, -1] == pytest.approx(np.pi**2 / 6, abs=1e-10)
    assert mean.mean() == pytest.approx(np.euler_gamma, abs=1e-12)
    assert covariance.sum() / count == pytest.approx(np.pi**2 / 6, abs=1e-10)
    assert np.linalg.eigvalsh(covariance).min() > 0.0


def test_moments_as_simulated():
    # 400 000 sorted samples of numpy's Gumbel generator.
    sample = np.sort(np.random.default_rng(2).gumbel(size=(400_000, 6)), axis=1)
    mean, covariance = gumbel_order_moments(6)
    np.testing.assert_allclose(mean, sample.mean(axis=0), atol=0.01)
    np.testing.assert_allclose(covariance, np.cov(sample.T), atol=0.02)


@pytest.mark.parametrize("count", [2, 3, 25, 100])
def test_weights_are_unbiased(count):
    location, scale = best_linear_weights(count)
    mean, _ = gumbel_order_moments(count)
    assert [location.sum(), scale.sum()] == pytest.approx([1.0, 0.0], abs=1e-12)
    assert [location @ mean, scale @ mean] == pytest.approx([0.0, 1.0], abs=1e-12)


def test_size_out_of_range_is_named():
    with pytest.raises(ValueError, match="2 to 400 maxima, got 401"):
        gumbel_order_moments(MOST_ORDERED_VALUES + 1)
    with pytest.raises(ValueError, match="got 1"):
        gumbel_order_moments(1)
