"""Checks of breaks and homogeneity: printed values, other packages, seeded breaks."""

import numpy as np
import pytest
from scipy import signal, stats
from statsmodels.regression.linear_model import OLS
from statsmodels.stats.diagnostic import breaks_cusumolsresid

from windkit.kernels.breaks import (
    critical_value,
    cusum,
    find_breaks,
    lag_one_autocorrelation,
    mann_kendall,
    pettitt,
    snht,
)
from windkit.kernels.homogeneity import compare_references


def red_noise(rng, count, phi, spread):
    """AR(1) with the given autocorrelation and standard deviation."""
    noise = rng.normal(size=count + 100)
    return spread * np.sqrt(1 - phi**2) * signal.lfilter([1], [1, -phi], noise)[100:]


def test_snht_is_the_largest_two_sample_contrast():
    # Alexandersson 1986: T(k) = k z1^2 + (n - k) z2^2, worked out here term by term.
    x = np.array([1.0, 1.2, 0.9, 1.1, 1.6, 1.5, 1.7, 1.4])
    z = (x - x.mean()) / x.std(ddof=1)
    t = [k * z[:k].mean() ** 2 + (8 - k) * z[k:].mean() ** 2 for k in range(1, 8)]
    found = snht(x)
    assert found.statistic == pytest.approx(max(t))
    assert found.position == 4
    assert found.size == pytest.approx(1.55 - 1.05)


@pytest.mark.parametrize(("count", "printed"), [(30, 7.65), (50, 8.45), (100, 9.15)])
def test_critical_values_of_snht_for_independent_values(count, printed):
    # Alexandersson and Moberg 1997, Int. J. Climatol. 17:25, 95 % level: values from memory.
    assert critical_value("snht", count, 0.0) == pytest.approx(printed, rel=0.03)


def test_critical_value_of_cusum_tends_to_the_brownian_bridge():
    # Kolmogorov: the supremum of a Brownian bridge has its 95 % point at 1.358 (scipy.kstwobign).
    limit = stats.kstwobign.ppf(0.95)
    assert limit == pytest.approx(1.358, abs=1e-3)
    assert critical_value("cusum", 600, 0.0) == pytest.approx(limit, rel=0.04)


def test_critical_value_of_mann_kendall_is_normal_and_of_pettitt_as_published():
    # Kendall 1975: z is standard normal. Pettitt 1979: p = 2 exp(-6 K^2 / (n^3 + n^2)), which is
    # known to be conservative for short series, hence the room.
    assert critical_value("mann_kendall", 100, 0.0) == pytest.approx(1.96, rel=0.08)
    n = 200
    expected = np.sqrt(-np.log(0.05 / 2) * (n**3 + n**2) / 6)
    assert critical_value("pettitt", n, 0.0) == pytest.approx(expected, rel=0.06)


def test_memory_raises_every_critical_value():
    for name in ("snht", "pettitt", "cusum", "mann_kendall"):
        values = [critical_value(name, 100, phi) for phi in (0.0, 0.3, 0.6)]
        assert values[0] < values[1] < values[2]


def test_cusum_against_statsmodels():
    x = np.random.default_rng(2).normal(size=80)
    residuals = OLS(x, np.ones_like(x)).fit().resid
    theirs = breaks_cusumolsresid(residuals, ddof=0)[0]
    assert cusum(x).statistic == pytest.approx(theirs, rel=1e-9)


def test_mann_kendall_against_scipy():
    # Kendall's tau of the values with time, and Sen's slope, from scipy; ties included.
    rng = np.random.default_rng(5)
    x = np.round(np.arange(40) * 0.05 + rng.normal(size=40), 1)
    found = mann_kendall(x)
    tau = stats.kendalltau(np.arange(40), x, variant="c").statistic  # 2 S / n^2 * m / (m - 1)
    m = min(40, np.unique(x).size)
    assert found.statistic == pytest.approx(tau * 40**2 * (m - 1) / m / 2, abs=1e-6)
    assert found.slope == pytest.approx(stats.theilslopes(x).slope)
    untied = x + 1e-6 * np.arange(40)
    p = stats.kendalltau(np.arange(40), untied, method="asymptotic").pvalue
    assert mann_kendall(untied).p_value == pytest.approx(p, rel=0.1)


def test_pettitt_is_the_largest_rank_sum_contrast():
    # Pettitt 1979: U(k) = sum of sign(x_i - x_j) over i <= k < j, taken from its definition.
    x = np.random.default_rng(8).normal(size=25) + np.r_[np.zeros(11), np.ones(14)]
    u = [np.sum(np.sign(x[:k, None] - x[None, k:])) for k in range(1, 25)]
    found = pettitt(x)
    assert found.statistic == pytest.approx(np.max(np.abs(u)))
    assert found.position == np.argmax(np.abs(u)) + 1


def test_autocorrelation_is_found_beside_a_step():
    rng = np.random.default_rng(0)
    found = []
    for _ in range(50):
        x = red_noise(rng, 240, 0.4, 1.0)
        x[120:] += 3
        found.append(lag_one_autocorrelation(x, [120]))
    assert np.mean(found) == pytest.approx(0.4, abs=0.03)


def test_seeded_breaks_are_found_and_false_alarms_are_rare():
    # The project's marks: breaks of 4 % or more found in 90 % of cases within six months, false
    # alarms under 10 %; 18 years of monthly log ratios with a scatter of 3 % and some memory.
    rng = np.random.default_rng(1)
    found, alarms, trials = 0, 0, 120
    for _ in range(trials):
        x = red_noise(rng, 216, 0.2, 0.03)
        alarms += len(find_breaks(x)) > 0
        at = int(rng.integers(24, 192))
        x[at:] += rng.choice([-1, 1]) * rng.uniform(0.04, 0.10)
        found += any(abs(b.position - at) <= 6 for b in find_breaks(x))
    print(f"found {found / trials:.0%}, false alarms {alarms / trials:.0%}")
    assert found / trials >= 0.90
    assert alarms / trials < 0.10


def test_red_noise_at_white_critical_values_cries_wolf():
    # Needs table G11: without the series' own memory, false alarms are many.
    rng = np.random.default_rng(4)
    white, own = 0, 0
    for _ in range(60):
        x = red_noise(rng, 200, 0.6, 1.0)
        white += len(find_breaks(x, autocorrelation=0.0)) > 0
        own += len(find_breaks(x)) > 0
    assert white > 30
    assert own < 12


def test_a_break_is_laid_to_the_station_that_has_it():
    rng = np.random.default_rng(6)
    month = np.arange(216)
    weather = 6 * np.exp(0.15 * np.cos(month * np.pi / 6) + 0.08 * rng.normal(size=216))
    monthly = weather[:, None] * np.exp(0.03 * rng.normal(size=(216, 5)))
    monthly[100:, 2] *= 1.12
    found = compare_references(monthly, level=0.01)
    assert [b.reference for b in found.breaks] == [2]
    assert abs(found.breaks[0].month - 100) <= 2
    assert found.breaks[0].earliest <= 100 <= found.breaks[0].latest
    assert found.breaks[0].size == pytest.approx(0.12, abs=0.02)
    # Taken out, the earlier stretch stands at the level of the later one.
    np.testing.assert_allclose(found.factors[:90, 2], 1.12, atol=0.02)
    np.testing.assert_allclose(found.factors[110:], 1.0)


def test_two_references_cannot_say_whose_the_break_is():
    rng = np.random.default_rng(7)
    monthly = 6 * np.exp(0.03 * rng.normal(size=(200, 2)))
    monthly[80:, 0] *= 0.9
    found = compare_references(monthly)
    assert not found.attributed
    assert len(found.breaks) == 1
    np.testing.assert_array_equal(found.factors, 1.0)


def test_bad_series_are_refused():
    with pytest.raises(ValueError, match="leave out months without data"):
        snht([1.0, np.nan, 2.0, 3.0, 4.0])
    with pytest.raises(ValueError, match="statistic must be one of"):
        critical_value("wald", 50, 0.0)
    assert find_breaks(np.full(100, 3.0)) == []
