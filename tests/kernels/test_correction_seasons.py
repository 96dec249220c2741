"""Checks of windkit.kernels.correction_seasons against fits by group of other packages."""

import numpy as np
import pandas as pd
import pytest
import statsmodels.formula.api as smf
from sklearn import linear_model
from sklearn.base import clone
from sklearn.model_selection import GroupKFold, cross_val_score

from windkit.kernels.correction import BySector, LinearRegression, RatioOfMeans, VarianceRatio
from windkit.kernels.correction_seasons import BySeason


@pytest.fixture
def year():
    """A year of hours whose slope on the reference changes with the month."""
    rng = np.random.default_rng(8)
    times = pd.date_range("2019-01-01", periods=365 * 24, freq="h")
    month = times.month.to_numpy()
    x = 7.0 * rng.weibull(2.0, times.size)
    slope = 0.9 + 0.1 * np.cos(2 * np.pi * (month - 1) / 12)
    y = np.maximum(slope * x + 0.6 + rng.normal(0, 0.8, x.size), 0.0)
    return x, month, y


def test_months_of_their_own_are_statsmodels_with_month_effects(year):
    # statsmodels: least squares with an intercept and a slope for each month.
    x, month, y = year
    frame = pd.DataFrame({"x": x, "m": month, "y": y})
    expected = smf.ols("y ~ C(m) * x", frame).fit().fittedvalues.to_numpy()
    X = np.column_stack([x, month])
    fitted = BySeason(LinearRegression(), min_count=500).fit(X, y)
    assert fitted.merged_neighbours_.tolist() == [0] * 12
    np.testing.assert_allclose(fitted.predict(X), expected, atol=1e-9)


def test_thin_months_take_in_neighbours_as_scikit_learn_on_the_joined_months(year):
    # scikit-learn: one line on the three months round each, December next to January.
    x, month, y = year
    X = np.column_stack([x, month])
    fitted = BySeason(LinearRegression(), min_count=1500).fit(X, y)
    assert fitted.merged_neighbours_.tolist() == [1] * 12
    for centre in (1, 6, 12):
        near = np.isin(month, [(centre - 2) % 12 + 1, centre, centre % 12 + 1])
        line = linear_model.LinearRegression().fit(x[near, None], y[near])
        own = month == centre
        np.testing.assert_allclose(fitted.predict(X[own]), line.predict(x[own, None]), atol=1e-9)


def test_a_month_never_measured_is_predicted_by_its_neighbours(year):
    x, month, y = year
    X = np.column_stack([x, month])
    seen = month != 4
    fitted = BySeason(RatioOfMeans(), min_count=600).fit(X[seen], y[seen])
    near = np.isin(month, [3, 5])
    ratio = y[near].mean() / x[near].mean()
    np.testing.assert_allclose(fitted.predict(X[month == 4]), ratio * x[month == 4])


def test_too_few_pairs_for_any_season_make_one_fit(year):
    x, month, y = year
    X = np.column_stack([x, month])
    fitted = BySeason(VarianceRatio(), min_count=10**6).fit(X, y)
    np.testing.assert_allclose(fitted.predict(X), VarianceRatio().fit(x, y).predict(x))


def test_sectors_stand_inside_seasons(year):
    x, month, y = year
    direction = np.random.default_rng(1).uniform(0, 360, x.size)
    X = np.column_stack([x, direction, month])
    nested = BySeason(BySector(RatioOfMeans(), sector_count=4, min_count=50), min_count=500)
    july = month == 7
    alone = BySector(RatioOfMeans(), sector_count=4, min_count=50).fit(X[july, :2], y[july])
    got = nested.fit(X, y).predict(X[july])
    np.testing.assert_allclose(got, alone.predict(X[july, :2]))


def test_scikit_learns_clone_and_scorers_work_on_it(year):
    x, month, y = year
    estimator = BySeason(LinearRegression(restore_scatter=True, seed=3), min_count=77)
    copied = clone(estimator)
    assert copied.get_params()["min_count"] == 77
    assert copied.get_params()["estimator__seed"] == 3
    assert copied.estimator is not estimator.estimator
    week = np.arange(x.size) // 168
    X = np.column_stack([x, month])
    plain, season = (
        cross_val_score(e, X[:, :k], y, groups=week, cv=GroupKFold(4)).mean()
        for e, k in ((LinearRegression(), 1), (BySeason(LinearRegression()), 2))
    )
    assert season > plain


def test_gaps_predict_nan_and_are_left_out_of_the_fit(year):
    x, month, y = year
    X = np.column_stack([x, month])
    X[::7, 0] = np.nan
    fitted = BySeason(RatioOfMeans()).fit(X, y)
    assert fitted.pair_count_ == np.count_nonzero(np.isfinite(X[:, 0]))
    np.testing.assert_array_equal(np.isnan(fitted.predict(X)), np.isnan(X[:, 0]))


@pytest.mark.parametrize(
    ("X", "words"),
    [
        (np.ones(30), "calendar month as its last column"),
        (np.column_stack([np.ones(30), np.full(30, 250.0)]), "the first 250; a direction goes"),
        (np.column_stack([np.ones(30), np.full(30, np.nan)]), "30 of 30 rows"),
    ],
)
def test_what_is_no_month_is_refused(X, words):
    with pytest.raises(ValueError, match=words):
        BySeason().fit(X, np.ones(30))
