"""Extreme winds of a long series against published worked examples and simulated storms.

Yearly maxima are laid into a series of hours, so that the series has the extremes of the example.
Data as published: yearly highest wind at Lisbon (Tiago de Oliveira 1997) and fastest mile at Great
Falls 1944-1977 (Simiu and Scanlan, Wind Effects on Structures); units do not matter here.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from windkit.study.extreme_winds import ONE_YEAR, extreme_winds
from windkit.study.hub_settings import ConditionsSettings

LISBON = [129, 117, 100, 100, 132, 94, 108, 113, 96, 113, 96, 72, 98, 85, 124, 108, 102, 102, 112,
          107, 86, 91, 96, 89, 90, 89, 89, 84, 107, 111]  # fmt: skip
GREAT_FALLS = [57, 65, 62, 58, 64, 65, 59, 65, 59, 60, 64, 65, 73, 60, 67, 50, 74, 60, 66, 55, 51,
               60, 55, 60, 51, 51, 62, 51, 54, 52, 59, 56, 52, 49]  # fmt: skip
#: WMO/TD-No. 1555, table 1.1, in-land: highest ten minutes within an hour over the hour.
TEN_MINUTES_OVER_HOUR = 1.08


def years_with(maxima: list[int], first: int = 1981) -> pd.Series:
    """Hours of 8 m/s with one gale a year that has the speed asked for."""
    index = pd.date_range(f"{first}", f"{first + len(maxima)}", freq="h", tz="UTC")[:-1]
    series = pd.Series(8.0, index=index)
    for year, value in enumerate(maxima, first):
        series[pd.Timestamp(f"{year}-11-{1 + year % 27:02d} 06:00", tz="UTC")] = float(value)
    return series


def assess(series, *, shape=2.0, turbulence=None, **choice):
    return extreme_winds(
        series, ConditionsSettings(**choice), weibull_shape=shape, turbulence=turbulence
    )


@pytest.mark.parametrize(
    ("fit", "fifty_year", "rel"),
    # id EXT-2, EXT-2b: moments 137.377, L-moments 139.386, maximum likelihood 143.456.
    [
        ("moments", 137.377, 1e-4),
        ("l_moments", 139.386, 1e-4),
        ("maximum_likelihood", 143.456, 1e-3),
    ],
)
def test_lisbon(fit, fifty_year, rel):
    found = assess(years_with(LISBON), fit=fit, maxima="years")
    assert found.v50 == pytest.approx(TEN_MINUTES_OVER_HOUR * fifty_year, rel=rel)
    assert found.averaging_factor == pytest.approx(TEN_MINUTES_OVER_HOUR)
    assert "30 yearly maxima" in found.basis


def test_great_falls_with_its_standard_error():
    # id EXT-1b, EXT-1c: 76 and a standard error of 3.7, as the textbook prints them.
    found = assess(years_with(GREAT_FALLS), fit="moments", maxima="years")
    assert found.v50 / TEN_MINUTES_OVER_HOUR == pytest.approx(76, abs=0.5)
    assert found.v50_standard_error / TEN_MINUTES_OVER_HOUR == pytest.approx(3.7, abs=0.05)
    # The fits of the same data in scipy (id EXT-1d): maximum likelihood 77.491.
    location, scale = stats.gumbel_r.fit(np.array(GREAT_FALLS, dtype=float))
    by_likelihood = found.fits.set_index("fit").loc["Gumbel, maximum likelihood", "fifty_year_m_s"]
    scipys = stats.gumbel_r.ppf(0.98, location, scale)
    assert by_likelihood / TEN_MINUTES_OVER_HOUR == pytest.approx(scipys, rel=1e-4)


def test_the_one_year_wind_is_passed_once_a_year_on_average():
    # A Poisson count of one a year leaves exp(-1) of years without any; the Gumbel variate is 0.
    found = assess(years_with(LISBON), fit="moments", maxima="years")
    assert pytest.approx(np.exp(-1)) == 1 - 1 / ONE_YEAR
    assert found.v1 == pytest.approx(TEN_MINUTES_OVER_HOUR * 95.0756, rel=1e-4)  # u of EXT-2


@pytest.mark.parametrize(("exposure", "factor"), [("off-sea", 1.05), ("at-sea", 1.03)])
def test_the_step_to_ten_minutes_is_that_of_the_exposure(exposure, factor):
    # id of the table: WMO/TD-No. 1555, table 1.1.
    found = assess(years_with(LISBON), exposure=exposure, fit="moments")
    assert found.v50 == pytest.approx(factor * 137.377, rel=1e-4)


def test_a_gust_by_the_turbulence_measured_and_by_the_standard_without():
    # id SHR-8: 1 + 0.42 I ln(3600/3) = 1.44667 at 15 %, and over ten minutes 1 + 0.42 I ln 6.
    found = assess(years_with(LISBON), turbulence=0.15)
    ratio = 1.44667 / (1 + 0.42 * 0.15 * np.log(6.0))
    assert found.gust_50 / found.v50 == pytest.approx(ratio, rel=1e-5)
    plain = assess(years_with(LISBON))
    assert plain.gust_50 == pytest.approx(1.4 * plain.v50)  # id IEC-1
    assert "turbulence is not measured" in plain.gust_basis


def test_the_weibull_tail_is_five_times_the_mean_at_the_standards_shape():
    # id EXT-7: k = 1.75 gives V50/Vave = 5.0617, the 5 of IEC 61400-1.
    series = years_with(LISBON)
    found = assess(series, shape=1.75)
    assert found.from_weibull == pytest.approx(5.0617 * series.mean(), rel=1e-4)


def gumbel_storms(seed: int, years: int = 20, a_year: int = 40) -> pd.Series:
    """Storms of Gumbel peaks, 9 days apart, calm between: yearly maxima have a known law."""
    rng = np.random.default_rng(seed)
    index = pd.date_range("2001", periods=years * 8766, freq="h", tz="UTC")
    series = pd.Series(5.0, index=index)
    at = (np.arange(years * a_year) * 8766 / a_year).astype(int) + 3
    series.iloc[at] = stats.gumbel_r(14.0, 2.0).rvs(at.size, random_state=rng)
    return series


def test_years_and_storms_agree_on_storms_whose_law_is_known():
    # The highest of 40 Gumbel(14, 2) a year is Gumbel(14 + 2 ln 40, 2): its fifty-year value is
    # 14 + 2 (ln 40 + 3.901939) = 29.182 (id EXT-5 for the variate), times the averaging factor.
    truth = TEN_MINUTES_OVER_HOUR * (14 + 2 * (np.log(40) + 3.901939))
    by_year = [assess(gumbel_storms(seed), maxima="years").v50 for seed in range(12)]
    assert np.mean(by_year) == pytest.approx(truth, rel=0.015)
    by_storm = [
        assess(gumbel_storms(seed), maxima="storms", storms_per_year=40.0, fit="maximum_likelihood")
        for seed in range(12)
    ]
    assert np.mean([found.v50 for found in by_storm]) == pytest.approx(truth, rel=0.02)
    assert by_storm[0].events_per_year == pytest.approx(40, rel=0.03)


def test_few_years_take_storms_and_many_take_years():
    assert "storms" in assess(gumbel_storms(1, years=4)).basis
    assert "yearly maxima" in assess(gumbel_storms(1, years=12)).basis
    short = assess(gumbel_storms(1, years=4))
    assert any("rests on 4.0 years" in warning for warning in short.warnings)


def test_a_year_cut_off_or_full_of_gaps_has_no_maximum():
    series = years_with(LISBON)
    series = series.iloc[3000:].copy()  # the first year is cut off
    series[series.index.year == 1990] = np.nan
    found = assess(series, maxima="years")
    assert len(found.maxima) == 28
    assert "1981" not in found.maxima["when"].tolist()
    assert "1990" not in found.maxima["when"].tolist()


def test_too_little_is_said_and_not_fitted():
    told = assess(pd.Series(8.0, index=pd.date_range("2020", periods=100, freq="h", tz="UTC")))
    assert isinstance(told, str)
    assert "at least 5 are needed" in told


def test_the_band_widens_with_the_return_period():
    levels = assess(years_with(LISBON)).levels
    width = (levels["high_m_s"] - levels["low_m_s"]).to_numpy()
    late = levels["return_period_years"].to_numpy() >= 2
    assert (np.diff(width[late]) > 0).all()
    assert (levels["level_m_s"].diff().dropna() > 0).all()
