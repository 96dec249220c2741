"""Return levels against scipy's quantiles, closed forms and published ratios."""

import numpy as np
import pytest
from scipy import stats

from windkit.kernels.extremes import (
    ExtremeFit,
    extreme_over_mean_from_weibull,
    gumbel_variate,
    return_level,
    return_level_standard_error,
)


def _fit(shape, covariance=None):
    known = np.zeros((3, 3)) if covariance is None else np.asarray(covariance)
    return ExtremeFit(25.0, 2.5, shape, known, 30, "given")


def test_gumbel_variate():
    # EXT-5: -ln(-ln(1 - 1/T)).
    np.testing.assert_allclose(
        gumbel_variate([2.0, 10.0, 20.0, 50.0, 100.0]),
        [0.366513, 2.250367, 2.970195, 3.901939, 4.600149],
        atol=1e-6,
    )


@pytest.mark.parametrize("shape", [-0.3, -1e-6, 0.0, 1e-6, 0.2])
def test_levels_are_quantiles_as_scipy(shape):
    # scipy.stats.genextreme and gumbel_r, whose shape has the other sign.
    T = np.array([2.0, 20.0, 50.0, 500.0])
    reference = stats.genextreme(-shape, 25.0, 2.5) if shape else stats.gumbel_r(25.0, 2.5)
    np.testing.assert_allclose(return_level(_fit(shape), T), reference.ppf(1 - 1 / T), rtol=1e-6)


def test_storms_of_a_year_make_its_maximum():
    # Closed form: the highest of r Gumbel storms is Gumbel, moved up by scale x ln r.
    storms = _fit(0.0)
    yearly = ExtremeFit(25.0 + 2.5 * np.log(12.0), 2.5, 0.0, np.zeros((3, 3)), 30, "given")
    assert return_level(storms, 50.0, events_per_year=12.0) == pytest.approx(
        return_level(yearly, 50.0), rel=1e-12
    )


@pytest.mark.parametrize("shape", [-0.25, 0.0, 2e-5, 0.15])
def test_standard_error_is_the_gradient_in_each_parameter(shape):
    # One parameter unsure at a time: the error is how far the level moves for a small change.
    for unsure in range(3):
        covariance = np.zeros((3, 3))
        covariance[unsure, unsure] = 1e-8
        change = np.zeros(3)
        change[unsure] = 1e-4
        moved = [
            return_level(
                ExtremeFit(
                    *(np.array([25.0, 2.5, shape]) + sign * change), covariance, 30, "given"
                ),
                50.0,
            )
            for sign in (1, -1)
        ]
        assert return_level_standard_error(_fit(shape, covariance), 50.0) == pytest.approx(
            abs(moved[0] - moved[1]) / 2, rel=1e-4
        )


def test_extreme_over_mean():
    # EXT-7: Bergstroem 1992 and European Wind Turbine Standards II 1998; k = 1.75 gives the
    # factor 5 of IEC 61400-1.
    np.testing.assert_allclose(
        extreme_over_mean_from_weibull([1.5, 1.75, 2.0, 2.25, 2.5, 3.0]),
        [6.4183, 5.0617, 4.2140, 3.6421, 3.2340, 2.6956],
        atol=1e-4,
    )
    assert extreme_over_mean_from_weibull(1.75) == pytest.approx(5.0, abs=0.1)


def test_extreme_over_mean_is_a_quantile_of_the_highest_of_many():
    # scipy: 0.98 quantile of the highest of N Weibull values, over their mean.
    parent = stats.weibull_min(2.1)
    expected = parent.ppf(0.98 ** (1 / 23_037)) / parent.mean()
    assert extreme_over_mean_from_weibull(2.1) == pytest.approx(expected, rel=1e-6)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: return_level(_fit(0.0), 1.0), "return_period must be above 1"),
        (lambda: gumbel_variate(50.0, events_per_year=0.0), "events_per_year must be positive"),
        (lambda: extreme_over_mean_from_weibull(0.0), "weibull_shape must be positive"),
    ],
)
def test_bad_input_is_named(call, message):
    with pytest.raises(ValueError, match=message):
        call()
