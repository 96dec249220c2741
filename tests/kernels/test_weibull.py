"""Weibull figures and fits against printed tables, closed forms and scipy."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import integrate, stats

from windkit.kernels.weibull import (
    fit_weibull,
    fit_weibull_energy,
    fit_weibull_moments,
    fit_weibull_table,
    rayleigh_scale,
    weibull_cdf,
    weibull_energy_pattern_factor,
    weibull_mean,
    weibull_mean_cube,
    weibull_median,
    weibull_mode,
    weibull_most_energetic_speed,
    weibull_pdf,
    weibull_power_density,
    weibull_quantile,
    weibull_skewness,
    weibull_standard_deviation,
)

# WEI-5: hours at each whole speed 0 to 25 m/s, after the example on average power in Masters
# 2004, Renewable and Efficient Electric Power Systems, ch. 6 (hours from memory, sum 8757).
HOURS_TEXT = (
    "24 276 527 729 869 941 946 896 805 690 565 444 335 243 170 114 74 46 28 16 9 5 3 1 1 0"
)
HOURS = np.array(HOURS_TEXT.split(), dtype=float)
SPEEDS = np.arange(26.0)


@pytest.mark.parametrize(
    ("k", "mean", "sd", "cv", "median", "mode", "energetic", "pattern", "skewness"),
    [
        # WEI-1a..d: closed forms, computed outside this project, scale 1.
        (1.5, 0.902745, 0.612936, 0.678969, 0.783220, 0.480750, 1.759210, 2.718530, 1.071990),
        (2.0, 0.886227, 0.463251, 0.522723, 0.832555, 0.707107, 1.414214, 1.909859, 0.631111),
        (2.5, 0.887264, 0.379667, 0.427907, 0.863635, 0.815193, 1.265050, 1.577410, 0.358632),
        (3.0, 0.892980, 0.324550, 0.363447, 0.884997, 0.873580, 1.185630, 1.404350, 0.168103),
    ],
)
def test_figures(k, mean, sd, cv, median, mode, energetic, pattern, skewness):
    assert weibull_mean(1.0, k) == pytest.approx(mean, abs=1e-5)
    assert weibull_standard_deviation(1.0, k) == pytest.approx(sd, abs=1e-5)
    assert weibull_standard_deviation(3.0, k) / weibull_mean(3.0, k) == pytest.approx(cv, abs=1e-5)
    assert weibull_median(1.0, k) == pytest.approx(median, abs=1e-5)
    assert weibull_mode(1.0, k) == pytest.approx(mode, abs=1e-5)
    assert weibull_most_energetic_speed(1.0, k) == pytest.approx(energetic, abs=1e-5)
    assert weibull_energy_pattern_factor(7.0, k) == pytest.approx(pattern, abs=1e-5)
    assert weibull_skewness(7.0, k) == pytest.approx(skewness, abs=1e-5)


@pytest.mark.parametrize(
    ("scale", "means", "modes"),
    [
        # WEI-2, WEI-2b: Jain 2011, Wind Energy Engineering, table 3-1, k = 1, 1.5, 2, 2.5, 3.
        (8.0, [8.000, 7.222, 7.090, 7.098, 7.144], [0.0, 3.846, 5.657, 6.522, 6.989]),
        (10.0, [10.000, 9.027, 8.862, 8.873, 8.930], [0.0, 4.807, 7.071, 8.152, 8.736]),
    ],
)
def test_mean_and_mode_as_printed(scale, means, modes):
    k = [1.0, 1.5, 2.0, 2.5, 3.0]
    np.testing.assert_allclose(weibull_mean(scale, k), means, atol=6e-4)
    np.testing.assert_allclose(weibull_mode(scale, k), modes, atol=6e-4)


@pytest.mark.parametrize(
    ("k", "power_density"),
    [
        # WEI-3, b, c: Jain 2011, table 3-3, 1.225 kg/m3, mean speeds 5 to 7.5 by halves.
        (1.9, [154, 206, 267, 339, 424, 521]),
        (2.0, [146, 195, 253, 321, 401, 494]),
        (2.1, [140, 186, 241, 307, 383, 471]),
    ],
)
def test_power_density_as_printed(k, power_density):
    mean = np.array([5.0, 5.5, 6.0, 6.5, 7.0, 7.5])
    scale = mean / weibull_mean(1.0, k)
    np.testing.assert_allclose(weibull_power_density(scale, k, 1.225), power_density, atol=1.0)


def test_mean_of_a_printed_case():
    # WEI-4: Jain 2011, p. 32: A = 8.85, k = 3 has a mean of 7.9.
    assert weibull_mean(8.85, 3.0) == pytest.approx(7.9, abs=0.01)


@pytest.mark.parametrize(
    ("power_density", "speed"),
    [
        # PWR-5: Elliott et al. 1986, Wind Energy Resource Atlas of the United States
        # (DOE/CH 10093-4), class limits at 10 m; PWR-6: at 50 m. Rayleigh, 1.225 kg/m3.
        (100, 4.4),
        (150, 5.1),
        (200, 5.6),
        (250, 6.0),
        (300, 6.4),
        (400, 7.0),
        (1000, 9.4),
        (500, 7.5),
        (600, 8.0),
        (800, 8.8),
        (2000, 11.9),
    ],
)
def test_power_class_limits(power_density, speed):
    scale = rayleigh_scale([speed - 0.1, speed + 0.1])
    below, above = weibull_power_density(scale, 2.0, 1.225)
    assert below < power_density < above


def test_power_from_10_to_50_m_with_the_seventh_root():
    # PWR-7: same atlas: speeds by the 1/7 law, so power by 5^(3/7) = 1.9932; it prints 2.
    ratio = weibull_mean_cube(5 ** (1 / 7), 2.0) / weibull_mean_cube(1.0, 2.0)
    assert ratio == pytest.approx(1.9932, abs=1e-4)
    assert ratio == pytest.approx(2.0, abs=0.01)


def test_histogram_of_hours():
    # WEI-5: mean 7.0 m/s, mean cube 653.24 over 8760 h, 400 W/m2.
    assert (HOURS @ SPEEDS) / HOURS.sum() == pytest.approx(7.0, abs=0.01)
    cube = (HOURS @ SPEEDS**3) / 8760
    assert cube == pytest.approx(653.24, abs=0.1)
    fit = fit_weibull_energy(7.0, cube)
    assert weibull_power_density(fit.weibull_scale, fit.weibull_shape, 1.225) == pytest.approx(
        400.0, abs=0.5
    )


def test_moment_and_energy_fits_of_the_histogram():
    # WEI-5b: computed outside this project from the same hours.
    mean = (HOURS @ SPEEDS) / HOURS.sum()
    sd = np.sqrt(HOURS @ (SPEEDS - mean) ** 2 / HOURS.sum())
    assert sd == pytest.approx(3.6551, abs=1e-3)
    fit = fit_weibull_moments(mean, sd)
    assert fit.weibull_shape == pytest.approx(2.0014, abs=1e-3)
    assert fit.weibull_scale == pytest.approx(7.8952, abs=1e-3)
    cube = (HOURS @ SPEEDS**3) / HOURS.sum()
    assert fit_weibull_energy(mean, cube).weibull_shape == pytest.approx(2.0021, abs=1e-3)


def test_likelihood_fit_of_the_histogram_finds_its_rayleigh():
    # WEI-5: the example's histogram is a Rayleigh distribution of mean 7 m/s (same source), so
    # with whole speeds as bin centres A = 7.899 and k = 2 within the rounding of the hours.
    edges = np.concatenate([[0.0], SPEEDS + 0.5])
    fit = fit_weibull_table(edges, HOURS)
    assert fit.weibull_shape == pytest.approx(2.0, abs=0.02)
    assert fit.weibull_scale == pytest.approx(2 * 7.0 / np.sqrt(np.pi), abs=0.03)


def test_hours_of_a_textbook_problem():
    # WEI-6: Manwell et al., Wind Energy Explained, ch. 2 problem (inputs from memory).
    assert weibull_mean(6.0, 1.8) == pytest.approx(5.3357, rel=1e-3)
    within = weibull_cdf(7.5, 6.0, 1.8) - weibull_cdf(6.5, 6.0, 1.8)
    assert 8760 * within == pytest.approx(794.19, rel=1e-3)
    assert 8760 * (1 - weibull_cdf(16.0, 6.0, 1.8)) == pytest.approx(25.37, rel=1e-3)


@pytest.mark.parametrize(
    ("k", "justus", "akdag"),
    [(1.5, 1.5227, 1.4993), (2.0, 2.0228, 2.0116), (2.5, 2.5139, 2.4830), (3.0, 3.0017, 2.8710)],
)
def test_published_approximations_start_from_our_figures(k, justus, akdag):
    # WEI-7: Justus et al. 1978, k = (sd/mean)^-1.086; WEI-8: Akdag and Dinler 2009,
    # k = 1 + 3.69 / EPF^2 (formulas from memory). The exact fits find k itself.
    mean, sd = weibull_mean(8.0, k), weibull_standard_deviation(8.0, k)
    assert (sd / mean) ** -1.086 == pytest.approx(justus, abs=1e-4)
    pattern = weibull_energy_pattern_factor(8.0, k)
    assert 1 + 3.69 / pattern**2 == pytest.approx(akdag, abs=1e-4)
    assert fit_weibull_moments(mean, sd).weibull_shape == pytest.approx(k, rel=1e-9)
    assert fit_weibull_energy(mean, pattern * mean**3).weibull_shape == pytest.approx(k, rel=1e-9)


@pytest.fixture(scope="module")
def sample():
    # WEI-9: the sample the check is stated for.
    return np.random.default_rng(12345).weibull(2.1, 8760) * 7.9


def test_likelihood_fit_as_scipy(sample):
    # WEI-9: scipy.stats.weibull_min.fit with location 0; sample mean and sd.
    fit = fit_weibull(sample)
    assert fit.weibull_shape == pytest.approx(2.10745, abs=1e-4)
    assert fit.weibull_scale == pytest.approx(7.88639, abs=1e-4)
    assert sample.mean() == pytest.approx(6.98457, abs=1e-4)
    assert sample.std(ddof=1) == pytest.approx(3.48350, abs=1e-4)
    assert fit.count == 8760
    assert fit.calm_share == 0.0
    shape, _, scale = stats.weibull_min.fit(sample, floc=0)
    assert fit.weibull_shape == pytest.approx(shape, rel=1e-4)
    assert fit.weibull_scale == pytest.approx(scale, rel=1e-4)


def test_table_fit_comes_close_to_the_series_fit(sample):
    # The same sample, binned: with bins of 0.1 m/s both likelihoods nearly agree.
    edges = np.concatenate([[0.0], np.arange(0.05, sample.max() + 0.1, 0.1)])
    counts, _ = np.histogram(sample, edges)
    fit = fit_weibull_table(edges, counts)
    assert fit.weibull_shape == pytest.approx(2.10745, abs=1e-3)
    assert fit.weibull_scale == pytest.approx(7.88639, abs=2e-3)


def test_table_fit_of_exact_shares_finds_the_parameters_even_with_wide_bins():
    # Shares from scipy's distribution function.
    edges = np.array([0.0, 3.0, 6.0, 9.0, 12.0, 15.0, 90.0])
    share = np.diff(stats.weibull_min(1.7, scale=8.2).cdf(edges))
    fit = fit_weibull_table(edges, share)
    assert fit.weibull_shape == pytest.approx(1.7, rel=1e-5)
    assert fit.weibull_scale == pytest.approx(8.2, rel=1e-5)


def test_calms_are_a_point_mass(sample):
    fit = fit_weibull(sample)
    with_calms = np.concatenate([sample, np.zeros(2920), [np.nan] * 50])
    calmer = fit_weibull(with_calms)
    assert calmer.calm_share == pytest.approx(0.25)
    assert calmer.count == 11_680
    assert calmer.weibull_shape == pytest.approx(fit.weibull_shape, rel=1e-9)
    # The mean of all records is kept: (1 - calm share) x mean of the moving air.
    whole = (1 - calmer.calm_share) * weibull_mean(calmer.weibull_scale, calmer.weibull_shape)
    assert whole == pytest.approx(np.nanmean(with_calms), rel=2e-3)


@given(k=st.floats(1.0, 5.0), scale=st.floats(2.0, 15.0))
def test_curves_as_scipy(k, scale):
    # scipy.stats.weibull_min.
    v = np.array([0.3, 2.0, 7.5, 18.0])
    reference = stats.weibull_min(k, scale=scale)
    np.testing.assert_allclose(weibull_pdf(v, scale, k), reference.pdf(v), rtol=1e-9, atol=1e-300)
    np.testing.assert_allclose(weibull_cdf(v, scale, k), reference.cdf(v), rtol=1e-9, atol=1e-300)
    q = np.array([0.02, 0.5, 0.98])
    np.testing.assert_allclose(weibull_quantile(q, scale, k), reference.ppf(q), rtol=1e-9)
    assert weibull_skewness(scale, k) == pytest.approx(float(reference.stats("s")), abs=1e-6)


def test_mean_cube_is_the_integral():
    value, _ = integrate.quad(lambda v: v**3 * float(weibull_pdf(v, 7.0, 1.9)), 0, 80)
    assert weibull_mean_cube(7.0, 1.9) == pytest.approx(value, rel=1e-7)


def test_parameters_broadcast_and_missing_stays_missing():
    means = weibull_mean([[6.0], [np.nan]], [1.5, 2.0, 2.5])
    assert means.shape == (2, 3)
    assert np.isnan(means[1]).all()
    assert weibull_energy_pattern_factor([6.0, 7.0], 2.0).shape == (2,)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: weibull_mean(0.0, 2.0), "weibull_scale must be positive"),
        (lambda: weibull_mean(7.0, -2.0), "weibull_shape must be positive"),
        (lambda: weibull_pdf(-1.0, 7.0, 2.0), "wind_speed must not be negative"),
        (lambda: weibull_quantile(1.5, 7.0, 2.0), "probability must be between 0 and 1"),
        (lambda: fit_weibull([0.0, 0.0, 5.0]), "at least two different wind speeds.*got 1 in 3"),
        (lambda: fit_weibull([5.0, 5.0, 5.0]), "at least two different"),
        (lambda: fit_weibull([5.0, 5.0, 5.000001]), "stuck sensor"),
        (lambda: fit_weibull([5.0, -1.0]), "got -1 at position 1"),
        (lambda: fit_weibull_table([0.0, 1.0], [1.0, 2.0]), "one value more than share"),
        (lambda: fit_weibull_table([0.0, 2.0, 1.0], [1.0, 2.0]), "must increase"),
        (lambda: fit_weibull_table([0.0, 1.0, 2.0], [1.0, 0.0]), "two bins"),
        (lambda: fit_weibull_moments(7.0, 0.0), "speed_standard_deviation must be positive"),
        (lambda: fit_weibull_moments(7.0, 700.0), "no Weibull shape"),
        (lambda: fit_weibull_energy(7.0, 300.0), "no Weibull shape"),
        (lambda: fit_weibull_moments(7.0, np.nan), "must be known"),
    ],
)
def test_bad_input_is_named(call, message):
    with pytest.raises(ValueError, match=message):
        call()
