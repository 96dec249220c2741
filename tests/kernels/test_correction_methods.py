"""Checks of windkit.kernels.correction_methods against scipy, closed forms and scikit-learn."""

import warnings

import numpy as np
import pytest
from scipy import stats
from sklearn.base import clone
from sklearn.model_selection import GroupKFold, cross_val_score

from windkit.kernels.correction import BySector
from windkit.kernels.correction_methods import (
    ConditionalDistributions,
    QuantileMapping,
    SectorVeer,
    TotalLeastSquares,
    WeibullParameterScaling,
)


@pytest.fixture
def pairs():
    rng = np.random.default_rng(3)
    x = 7.0 * rng.weibull(2.1, 5000)
    return x, np.maximum(0.8 * x + 1.2 + rng.normal(0, 1.0, x.size), 0.0)


def test_total_least_squares_against_the_principal_axis(pairs):
    # With equal errors Deming's line is the first principal axis: numpy's eigenvectors.
    x, y = pairs
    axis = np.linalg.eigh(np.cov(x, y))[1][:, -1]
    assert TotalLeastSquares().fit(x, y).slope_ == pytest.approx(axis[1] / axis[0], rel=1e-9)


def test_total_least_squares_against_orthogonal_distance_regression(pairs):
    # scipy.odr (ODRPACK) with the site's error half as large again as the reference's.
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        odr = pytest.importorskip("scipy.odr")
        x, y = pairs
        data = odr.RealData(x, y, sx=1.0, sy=1.5)
        fit = odr.ODR(data, odr.unilinear, beta0=[1.0, 0.0]).run()
    ours = TotalLeastSquares(error_ratio=1.5**2).fit(x, y)
    np.testing.assert_allclose([ours.slope_, ours.intercept_], fit.beta, rtol=1e-4)


def test_total_least_squares_finds_the_line_that_regression_flattens():
    # Fuller 1987, Measurement Error Models: errors in x pull a regression towards zero.
    rng = np.random.default_rng(0)
    truth = rng.normal(8, 3, 20_000)
    x, y = truth + rng.normal(size=truth.size), 1.3 * truth + rng.normal(size=truth.size)
    assert TotalLeastSquares().fit(x, y).slope_ == pytest.approx(1.3, abs=0.02)
    assert np.polyfit(x, y, 1)[0] == pytest.approx(1.3 * 9 / 10, abs=0.02)


def test_quantile_mapping_gives_the_sites_distribution(pairs):
    # Two-sample Kolmogorov-Smirnov distance (scipy) between mapped and measured speeds.
    x, y = pairs
    mapped = QuantileMapping().fit(x, y).predict(x)
    assert stats.ks_2samp(mapped, y).statistic < 0.01
    assert np.all(np.diff(mapped[np.argsort(x)]) >= 0)
    beyond = QuantileMapping().fit(x, y).predict([2 * x.max()])
    assert beyond[0] == pytest.approx(2 * y.max())


def test_weibull_scaling_is_exact_for_weibull_records():
    # Closed form: quantiles of one Weibull distribution carried into another (scipy.stats).
    share = (np.arange(20_000) + 0.5) / 20_000
    reference = stats.weibull_min(2.2, scale=8.0).ppf(share)
    site = stats.weibull_min(1.8, scale=6.5).ppf(share)
    fitted = WeibullParameterScaling().fit(reference, site)
    assert fitted.site_shape_ == pytest.approx(1.8, rel=2e-3)
    assert fitted.reference_scale_ == pytest.approx(8.0, rel=2e-3)
    np.testing.assert_allclose(fitted.predict(reference[50:-50]), site[50:-50], rtol=5e-3)


def test_conditional_distributions_keep_mean_and_cube(pairs):
    x, y = pairs
    drawn = ConditionalDistributions(seed=1).fit(x, y).predict(x)
    assert drawn.mean() == pytest.approx(y.mean(), rel=0.01)
    assert np.mean(drawn**3) == pytest.approx(np.mean(y**3), rel=0.02)
    assert set(np.round(drawn[x < 10], 9)) <= set(np.round(y, 9))


def test_veer_of_each_sector_is_found_and_turned_back():
    rng = np.random.default_rng(2)
    reference = rng.uniform(0, 360, 5000)
    veer = np.where((reference > 75) & (reference < 105), 20.0, -8.0)
    site = (reference + veer + rng.normal(0, 5, 5000)) % 360
    fitted = SectorVeer().fit(reference, site)
    assert fitted.veer_[3] == pytest.approx(20, abs=1)
    assert fitted.veer_[0] == pytest.approx(-8, abs=1)
    got = fitted.predict([2.0, 90.0, np.nan])
    np.testing.assert_allclose(got[:2], [354.0, 110.0], atol=1.0)
    assert np.isnan(got[2])


@pytest.mark.parametrize(
    "estimator",
    [
        TotalLeastSquares(),
        QuantileMapping(quantile_count=50),
        ConditionalDistributions(seed=3),
        WeibullParameterScaling(),
        BySector(QuantileMapping(), sector_count=4, min_count=50),
    ],
)
def test_scikit_learn_can_clone_split_and_score(estimator, pairs):
    x, y = pairs
    X = np.column_stack([x, np.linspace(0, 3599, x.size) % 360])
    groups = np.arange(x.size) // 500
    scores = cross_val_score(clone(estimator), X, y, cv=GroupKFold(5), groups=groups)
    assert np.all(scores > 0.3)
    assert np.isnan(clone(estimator).fit(X, y).predict([[np.nan, 10.0]])[0])


def test_a_reference_that_falls_when_the_site_rises_is_refused(pairs):
    x, y = pairs
    with pytest.raises(ValueError, match="choose another reference"):
        TotalLeastSquares().fit(-x, y)
