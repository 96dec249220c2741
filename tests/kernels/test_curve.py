"""Tests of windkit.kernels.curve, on open reference turbines and against quadrature."""

from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from scipy import integrate, stats

from windkit.kernels.curve import (
    PowerCurve,
    annual_energy_iec,
    betz_check,
    density_normalised_speed,
    mean_power_table,
    mean_power_weibull,
    power_at,
)
from windkit.kernels.energy import annual_energy, speed_to_energy_sensitivity

DATA = Path(__file__).parents[1] / "data"


def rayleigh_scale(mean_speed):
    """A of a Rayleigh distribution: mean = A sqrt(pi)/2."""
    return np.asarray(mean_speed) * 2 / np.sqrt(np.pi)


@pytest.fixture(scope="module")
def iea15():
    table = np.loadtxt(DATA / "iea15mw_v1_0_rotor.csv", delimiter=",", skiprows=1)
    return PowerCurve(table[:, 0], table[:, 1] * 1e6)


@pytest.fixture(scope="module")
def iea34():
    # TUR-3: Bortolotti et al. 2019, annual energy counted from 4 m/s.
    table = np.loadtxt(DATA / "iea34mw_static_aero_power.csv", delimiter=",", skiprows=1)
    return PowerCurve(table[:, 0], table[:, 1] * 1e6, cut_in=4.0)


@pytest.fixture(scope="module")
def cubic():
    """The generic machine of the calculations of needs G7, G21 and J9: cubic from 3 to 12 m/s."""
    speed = np.concatenate([np.linspace(3, 12, 901), [25.0]])
    return PowerCurve(speed, 1e6 * np.minimum((speed**3 - 27) / (1728 - 27), 1.0))


# --- open reference turbines -------------------------------------------------------------------


def test_reference_turbine_of_15_mw_as_published(iea15):
    # TUR-1, TUR-1b: Gaertner et al. 2020, NREL/TP-5000-75698, and its v1.0 table: 15 MW, 240 m,
    # 3 to 25 m/s, greatest power coefficient 0.489, 6.4811 MW at 8 and 12.661 MW at 10 m/s.
    assert iea15.rated_power == pytest.approx(15e6, rel=1e-3)
    assert (iea15.cut_in, iea15.cut_out) == (3.0, 25.0)
    np.testing.assert_allclose(power_at(iea15, [8.0, 10.0]), [6.4811e6, 12.661e6], rtol=1e-3)
    # The power column is electrical: the coefficient it makes keeps one ratio, the efficiency of
    # the drive train, to the rotor's own (greatest value 0.489 in the table).
    peak = betz_check(iea15, 240.0)
    assert 0.9 < peak.power_coefficient / 0.489 < 0.97
    speed, rotor_coefficient = np.array([8.0, 10.0]), np.array([0.489263, 0.489319])
    stream = 0.5 * 1.225 * np.pi * 120.0**2 * speed**3
    efficiency = power_at(iea15, speed) / stream / rotor_coefficient
    np.testing.assert_allclose(efficiency, peak.power_coefficient / 0.489383, rtol=1e-3)
    # 331.57 W/m2 is the specific power of that table.
    assert 15e6 / (np.pi * 120**2) == pytest.approx(331.57, abs=5e-3)


def test_annual_energy_of_the_15_mw_turbine(iea15):
    # TUR-2: straight lines between the published points, Rayleigh means 5 to 11 m/s, 8760 h [GWh];
    # worked by an independent program.
    mean = np.array([5, 6, 7, 7.5, 8, 8.5, 9, 10, 11])
    expected = [23.641, 36.729, 49.551, 55.493, 61.019, 66.088, 70.671, 78.330, 83.964]
    energy = annual_energy(mean_power_weibull(iea15, rayleigh_scale(mean), 2.0)) / 1e9
    np.testing.assert_allclose(energy, expected, rtol=2e-4)


def test_annual_energy_of_the_15_mw_turbine_by_the_bin_formula(iea15):
    # TUR-2b: IEC 61400-12-1 annual energy clause on the same table, means 4 to 11 m/s [GWh];
    # worked by an independent program.
    expected = [12.306, 23.706, 36.776, 49.582, 61.038, 70.681, 78.334, 83.965]
    energy = annual_energy_iec(iea15, np.arange(4.0, 12.0)) / 1e9
    np.testing.assert_allclose(energy, expected, rtol=1e-4)


def test_annual_energy_of_the_3_4_mw_turbine_against_its_own_workbook(iea34):
    # TUR-4: Bortolotti et al. 2019, definition workbook: 14 985.3 MWh aerodynamic at k = 2, mean
    # 7.5 m/s, 1.225 kg/m3, 4 to 25 m/s. The workbook's own integration step is not stated.
    energy = annual_energy(mean_power_weibull(iea34, rayleigh_scale(7.5), 2.0)) / 1e6
    assert energy == pytest.approx(14985.3, rel=3e-3)
    # TUR-4b: 13 936.35 MWh electrical, at the workbook's efficiency of 0.93.
    assert 0.93 * energy == pytest.approx(13936.35, rel=3e-3)


def test_sensitivity_of_energy_to_speed(iea15, iea34):
    # TUR-7: central difference of half a percent on the tables above, 3 to 25 m/s for both,
    # worked by an independent program.
    whole34 = PowerCurve(iea34.wind_speed, iea34.power)
    for curve, means, expected in (
        (iea15, [7, 8.5, 10], [1.7320, 1.2423, 0.8478]),
        (whole34, [5, 6, 7.5, 8.5], [2.3812, 1.8960, 1.3449, 1.0690]),
    ):
        scale = rayleigh_scale(means)
        measured = speed_to_energy_sensitivity(
            lambda s, curve=curve, scale=scale: mean_power_weibull(curve, s * scale, 2.0)
        )
        np.testing.assert_allclose(measured, expected, atol=2e-3)


def test_energy_of_the_mean_speed_is_not_the_mean_energy(cubic):
    # Needs G7, a calculation: power at the mean speed is 0.47, 0.63 and 0.91 of the mean power at
    # means of 5, 7 and 9 m/s (Rayleigh). Jensen's inequality.
    mean = np.array([5.0, 7.0, 9.0])
    ratio = power_at(cubic, mean) / mean_power_weibull(cubic, rayleigh_scale(mean), 2.0)
    np.testing.assert_allclose(ratio, [0.47, 0.63, 0.91], atol=5e-3)


def test_sensitivity_of_a_generic_machine(cubic):
    # Needs G21 and J9, calculations: 3.3 at 4.5 m/s, 3.0 at 5, 2.1 at 7, 1.4 at 9.
    scale = rayleigh_scale([4.5, 5.0, 7.0, 9.0])
    measured = speed_to_energy_sensitivity(lambda s: mean_power_weibull(cubic, s * scale, 2.0))
    np.testing.assert_allclose(measured, [3.3, 3.0, 2.1, 1.4], atol=0.051)


# --- exact integrals ---------------------------------------------------------------------------


@pytest.mark.parametrize("air_density", [None, 1.0, 1.225, 1.35])
@pytest.mark.parametrize(("scale", "shape"), [(5.0, 1.4), (8.0, 2.0), (12.0, 3.2)])
def test_weibull_mean_against_quadrature(iea15, scale, shape, air_density):
    # Outside reference: adaptive quadrature of power times density (QUADPACK through scipy).
    climate = stats.weibull_min(shape, scale=scale)

    def integrand(v):
        return power_at(iea15, v, air_density) * climate.pdf(v)

    stretch = 1.0 if air_density is None else (air_density / 1.225) ** (-1 / 3)
    bends = np.unique(np.clip(np.append(iea15.wind_speed * stretch, 25.0), 0, 25.0))
    pieces = [integrate.quad(integrand, a, b, epsrel=1e-11)[0] for a, b in pairwise(bends)]
    exact = mean_power_weibull(iea15, scale, shape, air_density=air_density)
    assert exact == pytest.approx(sum(pieces), rel=1e-9)


def test_weibull_mean_of_one_straight_line_in_closed_form():
    # Closed form, exponential speeds (k = 1): from 0 to v_n the mean of v is
    # A - (A + v_n) exp(-v_n/A).
    curve = PowerCurve([0.0, 10.0, 20.0], [0.0, 1000.0, 2000.0])
    scale = np.array([2.0, 6.0, 15.0])
    expected = 100 * (scale - (scale + 20) * np.exp(-20 / scale))
    np.testing.assert_allclose(mean_power_weibull(curve, scale, 1.0), expected, rtol=1e-12)


def test_weibull_mean_of_a_flat_curve_is_the_share_of_running_hours():
    # WEI-6: A = 6, k = 1.8: 25.37 h a year above 16 m/s (Manwell et al., chapter 2 problem).
    curve = PowerCurve([16.0, 30.0, 60.0], [1.0, 1.0, 1.0])
    assert annual_energy(mean_power_weibull(curve, 6.0, 1.8)) == pytest.approx(25.37, rel=1e-3)


def test_weibull_mean_broadcasts(iea15):
    scale = np.linspace(5, 11, 4)[:, np.newaxis]
    shape = np.array([1.6, 2.0, 2.4])
    together = mean_power_weibull(iea15, scale, shape, air_density=1.15)
    alone = [
        [mean_power_weibull(iea15, a, k, air_density=1.15) for k in shape] for a in scale[:, 0]
    ]
    np.testing.assert_allclose(together, alone, rtol=1e-13)
    densities = mean_power_weibull(iea15, 8.0, 2.0, air_density=[1.0, 1.1, np.nan])
    assert densities[0] < densities[1]
    assert np.isnan(densities[2])
    assert np.isnan(mean_power_weibull(iea15, np.nan, 2.0))


@pytest.mark.parametrize("air_density", [None, 1.05, 1.3])
def test_table_mean_against_fine_sampling(iea15, air_density):
    # Outside reference: the midpoint rule on 20 000 speeds a bin.
    edges = np.array([0.0, 0.5, *np.arange(1.5, 31.0)])
    share = stats.weibull_min(2.1, scale=8.5).cdf(edges)
    share = np.append(np.diff(share)[:-1], 1 - share[-2])
    inside = (np.arange(20_000) + 0.5) / 20_000
    speeds = edges[:-1, np.newaxis] + np.diff(edges)[:, np.newaxis] * inside
    expected = (power_at(iea15, speeds, air_density).mean(axis=1) * share).sum()
    measured = mean_power_table(iea15, edges, share, air_density=air_density)
    assert measured == pytest.approx(expected, rel=1e-6)


def test_table_of_narrow_bins_meets_the_weibull_integral(iea34):
    edges = np.linspace(0, 60, 6001)
    share = np.diff(stats.weibull_min(2.0, scale=8.463).cdf(edges))
    exact = mean_power_weibull(iea34, 8.463, 2.0)
    assert mean_power_table(iea34, edges, share) == pytest.approx(exact, rel=1e-6)


def test_sectors_of_a_table_add_up(iea15):
    edges = np.arange(0.0, 31.0)
    share = np.random.default_rng(2).dirichlet(np.ones(12 * 30)).reshape(12, 30)
    by_sector = mean_power_table(iea15, edges, share)
    assert by_sector.shape == (12,)
    whole = mean_power_table(iea15, edges, share.sum(axis=0))
    assert by_sector.sum() == pytest.approx(whole, rel=1e-12)


# --- density and switching ---------------------------------------------------------------------


def test_density_acts_on_the_speed():
    # AIR-6: IEC 61400-12-1, (rho/1.225)^(1/3) at 1.10 and 1.18 kg/m3.
    factor = density_normalised_speed(1.0, [1.10, 1.18])
    np.testing.assert_allclose(factor, [0.964759, 0.987602], atol=1e-6)


def test_thin_air_leaves_rated_power_alone_and_scales_below_it(cubic):
    # On a cubic part of the curve, power less its offset goes with the density.
    thin = power_at(cubic, 9.0, 1.0)
    assert thin == pytest.approx(1e6 * (9**3 * 1.0 / 1.225 - 27) / 1701, rel=1e-4)
    assert power_at(cubic, 20.0, 1.0) == cubic.rated_power
    assert power_at(cubic, 20.0, 1.4) == cubic.rated_power


def test_cut_in_and_cut_out_are_exact():
    curve = PowerCurve([3.0, 12.0, 25.0], [50e3, 3e6, 3e6])
    speed = np.array([2.999999, 3.0, 25.0, 25.000001, np.nan])
    np.testing.assert_array_equal(power_at(curve, speed), [0.0, 50e3, 3e6, 0.0, np.nan])


def test_cut_out_is_judged_on_the_speed_as_it_blows():
    curve = PowerCurve([3.0, 12.0, 25.0], [0.0, 3e6, 3e6])
    # Dense air: normalised 25.9 m/s, yet the anemometer reads 24.9: running at rated power.
    assert power_at(curve, 24.9, 1.38) == 3e6
    # Thin air: normalised 23.4 m/s, yet the anemometer reads 25.1: stopped.
    assert power_at(curve, 25.1, 1.0) == 0.0
    # Cut-in waits for the power in the stream: 3.1 m/s in thin air is 2.9 m/s.
    assert power_at(curve, 3.1, 1.0) == 0.0
    assert power_at(curve, 2.95, 1.38) > 0.0


def test_switching_speeds_narrower_than_the_table():
    curve = PowerCurve([0.0, 10.0, 30.0], [0.0, 100.0, 300.0], cut_in=4.0, cut_out=25.0)
    power = power_at(curve, [3.99, 4.0, 25.0, 25.01])
    np.testing.assert_allclose(power, [0.0, 40.0, 250.0, 0.0])
    edges = np.array([0.0, 4.0, 25.0, 40.0])
    assert mean_power_table(curve, edges, [0.0, 1.0, 0.0]) == pytest.approx(145.0)
    assert mean_power_table(curve, edges, [0.5, 0.0, 0.5]) == 0.0


def test_mean_power_grows_with_density(iea15):
    power = mean_power_weibull(iea15, 8.0, 2.0, air_density=np.linspace(0.9, 1.4, 20))
    assert np.all(np.diff(power) > 0)


# --- the Betz limit and refusals ---------------------------------------------------------------


def test_a_curve_at_the_betz_limit_passes_and_one_above_is_named():
    # PWR-1: Betz 1920, no rotor takes more than 16/27 of the stream.
    speed = np.array([4.0, 6.0, 8.0, 10.0])
    limit = 16 / 27 * 0.5 * 1.225 * np.pi * 50**2 * speed**3
    peak = betz_check(PowerCurve(speed, 0.999 * limit), 100.0)
    assert peak.betz_share == pytest.approx(0.999)
    boosted = limit.copy()
    boosted[2] *= 1.05
    with pytest.raises(ValueError, match=r"at 8 m/s, a power coefficient of 0\.622"):
        betz_check(PowerCurve(speed, boosted), 100.0)


def test_betz_check_ignores_a_point_at_rest():
    curve = PowerCurve([0.0, 5.0, 10.0], [0.0, 0.0, 1e6])
    assert betz_check(curve, 100.0).wind_speed == 10.0


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (([3, 4], [0, 1]), "at least 3 points"),
        (([3, 4, 5], [0, 1]), "two rows of equal length"),
        (([3, 5, 4], [0, 1, 2]), "5 is followed by 4 m/s; sort the points"),
        (([3, 4, 4], [0, 1, 2]), "keep each speed once"),
        (([3, 4, 5], [0, -1, 2]), "must not be negative, got -1 W at 4 m/s"),
        (([3, 4, 5], [0, np.nan, 2]), "point 2 of the power curve is not a number"),
        (([10, 40, 90], [0, 1, 2]), "convert it to m/s"),
        (([3, 4, 5], [0, 1, 2], 1225.0), "air_density of a power curve"),
        (([3, 4, 5], [0, 1, 2], 1.225, None, 25.0), "which runs from 3 to 5 m/s"),
        (([3, 4, 5], [0, 1, 2], 1.225, 5.0, 4.0), "in this order"),
    ],
)
def test_a_bad_curve_is_refused_with_a_remedy(arguments, words):
    with pytest.raises(ValueError, match=words):
        PowerCurve(*arguments)


def test_a_curve_cannot_be_changed_after_the_fact():
    points = np.array([3.0, 4.0, 5.0])
    curve = PowerCurve(points, [0.0, 1.0, 2.0])
    points[0] = 9.0
    assert curve.wind_speed[0] == 3.0
    with pytest.raises(ValueError, match="read-only"):
        curve.power[0] = 5.0


@pytest.mark.parametrize(
    ("call", "words"),
    [
        (lambda c: power_at(c, -999.0), "mask codes for missing values"),
        (lambda c: power_at(c, 8.0, 0.0), "air_density must be positive"),
        (lambda c: mean_power_weibull(c, -8.0, 2.0), "weibull_scale must be positive"),
        (lambda c: mean_power_weibull(c, 8.0, 0.0), "weibull_shape must be positive"),
        (lambda c: mean_power_table(c, [0, 2, 1], [0.5, 0.5]), "increasing speeds"),
        (lambda c: mean_power_table(c, [0, 1, 2], [1.0]), "3 edges bound 2 bins"),
        (lambda c: mean_power_table(c, [0, 1, 2], [5, 7]), "divide counts"),
        (lambda c: annual_energy_iec(c, 0.0), "mean_speed must be positive"),
    ],
)
def test_messages(iea15, call, words):
    with pytest.raises(ValueError, match=words):
        call(iea15)
