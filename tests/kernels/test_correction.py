"""Checks of windkit.kernels.correction against published forms and independent packages."""

import numpy as np
import pytest
import statsmodels.api as sm
from hypothesis import given
from hypothesis import strategies as st
from sklearn import linear_model
from sklearn.base import clone
from sklearn.model_selection import GroupKFold, TimeSeriesSplit, cross_val_score

from windkit.kernels.correction import (
    BySector,
    LinearRegression,
    RatioOfMeans,
    VarianceRatio,
    long_term_standard_uncertainty,
    record_extension_variance,
)
from windkit.kernels.estimator import merged_neighbours
from windkit.kernels.frequency import sector_index

# MCP-2: correlation, concurrent values, further values (Matalas and Jacobs 1964).
EXTENSION_CASES = [(0.9, 12, 108), (0.7, 12, 108), (0.5, 12, 108), (0.9, 10, 20), (0.3, 8, 40)]


@pytest.fixture
def pairs():
    rng = np.random.default_rng(3)
    x = 7.0 * rng.weibull(2.1, 4000)
    return x, np.maximum(0.8 * x + 1.2 + rng.normal(0, 1.0, x.size), 0.0)


def test_standard_uncertainty_in_closed_form():
    # MCP-1: Taylor et al. 2004; 4 % a year, ten years of reference, one of campaign.
    r = np.sqrt([0.5, 0.7, 0.8, 0.9, 0.95, 1.0])
    got = 100 * long_term_standard_uncertainty(r, 0.04, 10, 1)
    np.testing.assert_allclose(got, [2.966, 2.433, 2.117, 1.744, 1.523, 1.265], atol=1e-3)
    # MCP-1b: 6 % a year, twenty years.
    got = 100 * long_term_standard_uncertainty(r, 0.06, 20, 1)
    np.testing.assert_allclose(got, [4.347, 3.473, 2.939, 2.285, 1.874, 1.342], atol=1e-3)


def test_record_extension_in_closed_form():
    # MCP-2: Matalas and Jacobs 1964, USGS Professional Paper 434-E.
    expected = [0.0241667, 0.0508333, 0.0708333, 0.0478095, 0.1345833]
    got = [record_extension_variance(*case) for case in EXTENSION_CASES]
    np.testing.assert_allclose(got, expected, atol=1e-7)


def test_extension_pays_only_above_the_published_correlation():
    # MCP-2b: it pays only if rho2 > 1/(n1-2); (0.3, 8, 40) raises the variance by 7.7 %.
    n1 = np.array([6, 8, 12, 40])
    edge = 1 / np.sqrt(n1 - 2)
    assert np.all(record_extension_variance(edge + 0.01, n1, 100) < 1 / n1)
    assert np.all(record_extension_variance(edge - 0.01, n1, 100) > 1 / n1)
    assert record_extension_variance(0.3, 8, 40) * 8 == pytest.approx(1.077, abs=5e-4)


def _extended_mean(estimator, x, y, n1):
    fitted = estimator.fit(x[:n1], y[:n1])
    return np.concatenate([y[:n1], fitted.predict(x[n1:])]).mean()


@pytest.mark.parametrize(
    ("method", "expected"),
    [
        # MCP-2: Monte Carlo of the closed form (Matalas and Jacobs 1964), as a share of 1/n1.
        (LinearRegression, [record_extension_variance(*c) * c[1] for c in EXTENSION_CASES]),
        # MCP-2c: Hirsch 1982, the variance-ratio line, as a share of 1/n1.
        (VarianceRatio, [0.301, 0.705, 1.114, 0.485, 1.591]),
    ],
)
@pytest.mark.parametrize("index", range(5))
def test_variance_of_the_extended_mean_by_monte_carlo(method, expected, index):
    rho, n1, n2 = EXTENSION_CASES[index]
    rng = np.random.default_rng(11)
    trials = 6000
    x = rng.normal(size=(trials, n1 + n2))
    y = rho * x + np.sqrt(1 - rho**2) * rng.normal(size=x.shape)
    means = [_extended_mean(method(), x[t], y[t], n1) for t in range(trials)]
    # A variance from 6000 trials has a standard error of sqrt(2/6000) = 1.8 %: three of them.
    assert np.var(means) * n1 == pytest.approx(expected[index], rel=0.055)


def test_line_against_statsmodels_and_scikit_learn(pairs):
    x, y = pairs
    ours = LinearRegression().fit(x, y)
    theirs = sm.OLS(y, sm.add_constant(x)).fit()
    np.testing.assert_allclose([ours.intercept_, ours.slope_], theirs.params, rtol=1e-10)
    assert ours.residual_standard_deviation_ == pytest.approx(np.sqrt(theirs.scale), rel=1e-10)
    reference = linear_model.LinearRegression().fit(x[:, None], y)
    np.testing.assert_allclose(ours.predict(x), reference.predict(x[:, None]), rtol=1e-10)
    assert ours.score(x, y) == pytest.approx(reference.score(x[:, None], y), rel=1e-10)


def test_ratio_of_means_against_a_weighted_line_through_the_origin(pairs):
    # Least squares through the origin with weights 1/x is the ratio of sums, a textbook identity.
    x, y = pairs
    theirs = sm.WLS(y, x[:, None], weights=1 / x).fit().params[0]
    assert RatioOfMeans().fit(x, y).ratio_ == pytest.approx(theirs, rel=1e-10)


def test_scatter_gives_back_the_variance_that_the_line_loses(pairs):
    # Rogers et al. 2005: a plain line keeps r2 of the variance; with the scatter it is kept.
    x, y = pairs
    r2 = np.corrcoef(x, y)[0, 1] ** 2
    plain = LinearRegression().fit(x, y).predict(x)
    assert np.var(plain) / np.var(y) == pytest.approx(r2, rel=1e-9)
    restored = LinearRegression(restore_scatter=True, seed=5).fit(x, y).predict(x)
    assert np.var(restored) / np.var(y) == pytest.approx(1.0, abs=0.03)
    assert restored.mean() == pytest.approx(y.mean(), rel=0.01)
    assert np.mean(restored**3) == pytest.approx(np.mean(y**3), rel=0.03)
    assert restored.min() >= 0
    again = LinearRegression(restore_scatter=True, seed=5).fit(x, y).predict(x)
    np.testing.assert_array_equal(restored, again)


@given(st.integers(0, 1000), st.floats(0.2, 3.0), st.floats(0.1, 5.0))
def test_variance_ratio_keeps_mean_and_spread(seed, slope, noise):
    rng = np.random.default_rng(seed)
    x = 7 * rng.weibull(2, 300)
    y = slope * x + rng.normal(0, noise, 300)
    predicted = VarianceRatio().fit(x, y).predict(x)
    assert predicted.mean() == pytest.approx(y.mean())
    assert predicted.std() == pytest.approx(y.std())


def test_sectors_find_their_own_lines():
    rng = np.random.default_rng(0)
    speed, direction = 8 * rng.weibull(2, 6000), rng.uniform(0, 360, 6000)
    slope = 1 + 0.4 * np.cos(np.radians(np.floor(direction / 30 + 0.5) % 12 * 30))
    y = slope * speed
    fitted = BySector(RatioOfMeans(), min_count=50).fit(np.column_stack([speed, direction]), y)
    got = [e.ratio_ for e in fitted.estimators_]
    np.testing.assert_allclose(got, 1 + 0.4 * np.cos(np.radians(np.arange(12) * 30)), rtol=1e-9)
    # A calm has no direction: it is predicted by the fit over all directions.
    calm = fitted.predict([[2.0, np.nan]])
    assert calm[0] == pytest.approx(2 * fitted.all_directions_.ratio_)


def test_thin_sectors_take_in_their_neighbours():
    # Sector 1 has 5 pairs and needs its two neighbours; four sectors of 100 need none.
    np.testing.assert_array_equal(merged_neighbours([100, 5, 100, 100], 50), [0, 1, 0, 0])
    np.testing.assert_array_equal(merged_neighbours([2, 1, 1, 1, 1, 1], 100), [3] * 6)
    rng = np.random.default_rng(0)
    X = np.column_stack([8 * rng.weibull(2, 60), rng.uniform(0, 360, 60)])
    fitted = BySector(RatioOfMeans(), min_count=100).fit(X, 1.1 * X[:, 0])
    assert all(e is fitted.all_directions_ for e in fitted.estimators_)


def test_the_first_sector_is_centred_on_north():
    # Common practice, and the draft IEC 61400-15-1 form: twelve sectors, the first centred on 0.
    np.testing.assert_array_equal(
        sector_index([345.1, 0.0, 14.9, 15.1, 344.9, 360.0, np.nan], 12), [0, 0, 0, 1, 11, 0, -1]
    )


@pytest.mark.parametrize(
    "estimator",
    [
        RatioOfMeans(),
        LinearRegression(restore_scatter=True, seed=4),
        VarianceRatio(),
        BySector(LinearRegression(), sector_count=8, min_count=20),
    ],
)
def test_scikit_learn_can_clone_split_and_score(estimator, pairs):
    x, y = pairs
    X = np.column_stack([x, np.linspace(0, 3600, x.size) % 360])
    twin = clone(estimator)
    assert repr(twin) == repr(estimator)
    assert twin is not estimator
    groups = np.arange(x.size) // 200
    r2 = cross_val_score(twin, X, y, cv=GroupKFold(5), groups=groups)
    mse = cross_val_score(
        twin, X, y, cv=TimeSeriesSplit(3), scoring="neg_mean_squared_error", error_score="raise"
    )
    assert np.all(r2 > 0.5)
    assert np.all(mse < 0)


def test_nested_parameters_are_reached_by_name():
    estimator = BySector(LinearRegression()).set_params(estimator__seed=9, sector_count=16)
    assert estimator.get_params()["estimator__seed"] == 9
    assert estimator.sector_count == 16
    with pytest.raises(ValueError, match="has no parameter 'sectors'"):
        estimator.set_params(sectors=8)


def test_nan_is_left_out_of_a_fit_and_comes_back_from_a_prediction(pairs):
    x, y = (values.copy() for values in pairs)
    clean = VarianceRatio().fit(x[10:], y[10:])
    x[:5], y[5:10] = np.nan, np.nan
    fitted = VarianceRatio().fit(x, y)
    assert (fitted.slope_, fitted.pair_count_) == (clean.slope_, x.size - 10)
    assert np.isnan(fitted.predict([np.nan, 5.0])).tolist() == [True, False]


def test_bad_input_is_refused_with_the_remedy(pairs):
    x, y = pairs
    with pytest.raises(ValueError, match="join the two series on their time index"):
        RatioOfMeans().fit(x[1:], y)
    with pytest.raises(ValueError, match="share 0 values; a fit needs at least 3"):
        RatioOfMeans().fit(x * np.nan, y)
    with pytest.raises(ValueError, match=r"constant at 4 m/s .* stuck sensor"):
        VarianceRatio().fit(np.full_like(y, 4.0), y)
    with pytest.raises(ValueError, match="needs X with two columns"):
        BySector().fit(x, y)
    with pytest.raises(ValueError, match="within -1 to 1"):
        long_term_standard_uncertainty(1.2, 0.06, 10, 1)
    with pytest.raises(ValueError, match="more than 3"):
        record_extension_variance(0.9, 3, 10)
