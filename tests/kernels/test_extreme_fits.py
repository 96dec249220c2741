"""Extreme value fits against textbook examples, scipy and simulation.

Data, each copied as published: fastest mile at Great Falls 1944-1977 [mph] (Simiu and Scanlan,
Wind Effects on Structures); yearly highest wind at Lisbon [km/h] (Tiago de Oliveira 1997); yearly
highest wind at Hartford and Albany 1944-1983 [kn] and sea level at Port Pirie [m] (Coles 2001).
"""

import numpy as np
import pytest
from scipy import stats

from windkit.kernels.extreme_fits import (
    gev_maximum_likelihood,
    gumbel_best_linear,
    gumbel_l_moments,
    gumbel_least_squares,
    gumbel_maximum_likelihood,
    gumbel_moments,
)
from windkit.kernels.extremes import return_level, return_level_standard_error


def _numbers(text):
    return np.array([float(word) for word in text.split()])


GREAT_FALLS = _numbers("""
57 65 62 58 64 65 59 65 59 60 64 65 73 60 67 50 74 60 66 55 51 60 55 60 51 51 62 51 54 52 59 56 52
49""")
LISBON = _numbers("""
129 117 100 100 132 94 108 113 96 113 96 72 98 85 124 108 102 102 112 107 86 91 96 89 90 89 89 84
107 111""")
HARTFORD = _numbers("""
49 54 60 49 57 51 79 57 45 60 54 55 49 58 51 59 51 47 46 57 57 51 47 62 45 48 45 57 53 42 53 51 55
55 60 49 48 45 50 52""")
ALBANY = _numbers("""
52 46 48 44 42 41 68 50 55 68 47 43 41 47 41 55 44 46 40 49 46 44 48 49 47 46 46 62 46 38 51 49 53
46 43 48 44 46 44 40""")
PORT_PIRIE = _numbers("""
4.03 3.83 3.65 3.88 4.01 4.08 4.18 3.8 4.36 3.96 3.98 4.69 3.85 3.96 3.85 3.93 3.75 3.63 3.57
4.25 3.97 4.05 4.24 4.22 3.73 4.37 4.06 3.71 3.96 4.06 4.55 3.79 3.89 4.11 3.85 3.86 3.86 4.21
4.01 4.11 4.24 3.96 4.21 3.74 3.85 3.88 3.66 4.11 3.71 4.18 3.9 3.78 3.91 3.72 4.0 3.66 3.62
4.33 4.55 3.75 4.08 3.9 3.88 3.94 4.33""")

GUMBEL_FITS = [
    gumbel_moments,
    gumbel_l_moments,
    gumbel_least_squares,
    gumbel_best_linear,
    gumbel_maximum_likelihood,
]


def test_great_falls_by_moments():
    # EXT-1, EXT-1b, EXT-1c: Simiu and Scanlan, worked example: mean 59, sd 6.41, v50 = 76,
    # v1000 = 91, standard errors 3.7 and 6.4.
    assert GREAT_FALLS.size == 34
    assert GREAT_FALLS.mean() == pytest.approx(59.0, abs=0.3)
    assert GREAT_FALLS.std(ddof=1) == pytest.approx(6.41, abs=0.005)
    fit = gumbel_moments(GREAT_FALLS)
    np.testing.assert_allclose(return_level(fit, [50.0, 1000.0]), [76.0, 91.0], atol=0.5)
    np.testing.assert_allclose(
        return_level_standard_error(fit, [50.0, 1000.0]), [3.7, 6.4], atol=0.05
    )


@pytest.mark.parametrize(
    ("method", "data", "location", "scale", "level", "rel"),
    [
        # EXT-1d: computed outside this project (scipy).
        (gumbel_moments, GREAT_FALLS, 56.2618, 4.9985, 75.766, 1e-4),
        (gumbel_l_moments, GREAT_FALLS, 56.0959, 5.2860, 76.722, 1e-4),
        (gumbel_maximum_likelihood, GREAT_FALLS, 56.0860, 5.4857, 77.491, 1e-4),
        # EXT-2, EXT-2b, EXT-2d, the 50-year level of EXT-2 by L-moments.
        (gumbel_moments, LISBON, 95.0756, 10.8412, 137.377, 1e-4),
        (gumbel_l_moments, LISBON, 94.7269, 11.4454, 139.386, 1e-4),
        (gumbel_maximum_likelihood, LISBON, 94.7098, 12.4928, 143.456, 1e-4),
        (gumbel_least_squares, LISBON, 94.8223, 12.1424, 142.201, 1e-4),
        # EXT-3, EXT-3b: Coles 2001.
        (gumbel_maximum_likelihood, HARTFORD, 49.9452, 5.0254, 69.554, 1e-3),
        (gumbel_maximum_likelihood, ALBANY, 44.8192, 4.5301, 62.496, 1e-3),
        # EXT-6c: Lieblein's weights on the first ten values.
        (gumbel_best_linear, LISBON[:10], 103.755, 11.0253, 146.775, 1e-4),
    ],
)
def test_gumbel_fits(method, data, location, scale, level, rel):
    fit = method(data)
    assert fit.location == pytest.approx(location, rel=rel)
    assert fit.scale == pytest.approx(scale, rel=rel)
    assert return_level(fit, 50.0) == pytest.approx(level, rel=rel)
    assert fit.shape == 0.0
    assert fit.count == data.size


def test_lisbon_levels_by_likelihood():
    # EXT-2b: 10, 50 and 100 years; negative log-likelihood by scipy's density.
    fit = gumbel_maximum_likelihood(LISBON)
    np.testing.assert_allclose(
        return_level(fit, [10.0, 50.0, 100.0]), [122.823, 143.456, 152.178], rtol=1e-4
    )
    nll = -stats.gumbel_r(fit.location, fit.scale).logpdf(LISBON).sum()
    assert nll == pytest.approx(121.660, abs=1e-3)


def test_lisbon_by_generalised_extreme_value():
    # EXT-2c: shape positive for a heavy tail; scipy's sign is the other one.
    fit = gev_maximum_likelihood(LISBON)
    assert fit.location == pytest.approx(96.0324, rel=1e-3)
    assert fit.scale == pytest.approx(12.8524, rel=2e-3)
    assert fit.shape == pytest.approx(-0.1988, abs=1e-3)
    assert return_level(fit, 50.0) == pytest.approx(130.919, rel=1e-3)
    nll = -stats.genextreme(-fit.shape, fit.location, fit.scale).logpdf(LISBON).sum()
    assert nll == pytest.approx(120.623, abs=1e-3)


def test_shapes_of_hartford_and_albany():
    # EXT-3, EXT-3b.
    assert gev_maximum_likelihood(HARTFORD).shape == pytest.approx(0.0039, abs=0.002)
    albany = gev_maximum_likelihood(ALBANY)
    assert albany.shape == pytest.approx(0.0983, abs=0.002)
    assert return_level(albany, 50.0) == pytest.approx(65.354, rel=2e-3)


def test_port_pirie_as_printed():
    # EXT-4: Coles 2001, section 3.4.1: 3.87, 0.198, -0.050 with standard errors 0.028, 0.020,
    # 0.098 (standard errors from memory), 10 and 100 years 4.30 and 4.69.
    assert PORT_PIRIE.size == 65
    fit = gev_maximum_likelihood(PORT_PIRIE)
    assert [fit.location, fit.scale, fit.shape] == pytest.approx([3.87, 0.198, -0.050], abs=0.006)
    np.testing.assert_allclose(return_level(fit, [10.0, 100.0]), [4.30, 4.69], atol=0.01)
    np.testing.assert_allclose(np.sqrt(np.diag(fit.covariance)), [0.028, 0.020, 0.098], atol=6e-4)
    gumbel = gumbel_maximum_likelihood(PORT_PIRIE)
    assert [gumbel.location, gumbel.scale] == pytest.approx([3.87, 0.195], abs=0.005)
    likelihood = stats.gumbel_r(gumbel.location, gumbel.scale).logpdf(PORT_PIRIE).sum()
    assert likelihood == pytest.approx(4.22, abs=0.005)


@pytest.mark.parametrize("data", [GREAT_FALLS, LISBON, PORT_PIRIE])
def test_likelihood_fits_as_scipy(data):
    # scipy.stats.gumbel_r.fit and genextreme.fit.
    location, scale = stats.gumbel_r.fit(data)
    fit = gumbel_maximum_likelihood(data)
    assert [fit.location, fit.scale] == pytest.approx([location, scale], rel=1e-4)
    gev = gev_maximum_likelihood(data)
    ours = stats.genextreme(-gev.shape, gev.location, gev.scale).logpdf(data).sum()
    c, location, scale = stats.genextreme.fit(data, 0.1, loc=data.mean(), scale=data.std())
    assert ours >= stats.genextreme(c, location, scale).logpdf(data).sum() - 1e-6


@pytest.mark.parametrize("method", GUMBEL_FITS)
def test_stated_standard_errors_hold_in_simulation(method):
    # 1500 samples of 30 from numpy's Gumbel generator: the spread of the 50-year level. The
    # stated error is for a scale of one; moment and likelihood forms are for large samples.
    rng = np.random.default_rng(6)
    levels = np.array([return_level(method(rng.gumbel(size=30)), 50.0) for _ in range(1500)])
    fit = method(rng.gumbel(size=30))
    stated = return_level_standard_error(fit, 50.0) / fit.scale
    scale = 1.09 if method is gumbel_least_squares else 1.0
    assert levels.std() == pytest.approx(stated * scale, rel=0.10)


def test_best_linear_estimate_is_unbiased_and_no_linear_one_is_surer():
    rng = np.random.default_rng(7)
    samples = rng.gumbel(40.0, 5.0, (1500, 15))
    levels = {m: [return_level(m(x), 50.0) for x in samples] for m in GUMBEL_FITS}
    truth = 40.0 + 5.0 * 3.901939
    assert np.mean(levels[gumbel_best_linear]) == pytest.approx(truth, abs=0.4)
    assert np.std(levels[gumbel_best_linear]) < np.std(levels[gumbel_l_moments]) * 1.01
    # Gumbel's plotting positions overstate, which is why the method is only for comparison.
    assert np.mean(levels[gumbel_least_squares]) > truth + 1.0


@pytest.mark.parametrize("method", [*GUMBEL_FITS, gev_maximum_likelihood])
def test_units_do_not_matter(method):
    here, there = method(LISBON), method(LISBON / 3.6)
    assert there.location == pytest.approx(here.location / 3.6, rel=1e-5)
    assert return_level(there, 50.0) == pytest.approx(return_level(here, 50.0) / 3.6, rel=1e-5)
    assert return_level_standard_error(there, 50.0) == pytest.approx(
        return_level_standard_error(here, 50.0) / 3.6, rel=1e-3
    )


@pytest.mark.parametrize("method", [*GUMBEL_FITS, gev_maximum_likelihood])
def test_bad_maxima_are_named(method):
    with pytest.raises(ValueError, match="at least 3 maxima"):
        method([30.0, 31.0])
    with pytest.raises(ValueError, match="maxima must all be known, got nan at position 2"):
        method([30.0, 31.0, np.nan, 33.0])
    with pytest.raises(ValueError, match="look for a stuck sensor"):
        method([30.0, 30.0, 30.0, 30.0])


def test_large_samples_go_to_likelihood():
    sample = np.random.default_rng(1).gumbel(size=500)
    with pytest.raises(ValueError, match="at most 400 maxima, got 500"):
        gumbel_best_linear(sample)
    assert gumbel_maximum_likelihood(sample).scale == pytest.approx(1.0, abs=0.1)
    assert gev_maximum_likelihood(sample).shape == pytest.approx(0.0, abs=0.1)
