"""Power in the stream against closed forms, class tables and trade arithmetic."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from windkit.kernels.constants import STANDARD_AIR_DENSITY
from windkit.kernels.stream import (
    BETZ_LIMIT,
    claim_against_betz,
    induction_factor,
    mean_power_density,
    overall_efficiency,
    power_coefficient,
    stream_power,
    swept_area,
    thrust_coefficient,
    wind_power_density,
)

INCH = 0.0254  # [m], exact
MILE_PER_HOUR = 5280 / 3600 * 0.3048  # [m/s], common practice


def test_betz_limit():
    # PWR-1: Betz 1920: a = 1/3 gives 16/27 of the power at a thrust coefficient of 8/9.
    assert pytest.approx(0.592593, abs=5e-7) == BETZ_LIMIT
    assert power_coefficient(1 / 3) == pytest.approx(16 / 27, abs=1e-12)
    assert thrust_coefficient(1 / 3) == pytest.approx(8 / 9, abs=1e-12)
    a = np.linspace(0.0, 0.5, 5001)
    assert a[np.argmax(power_coefficient(a))] == pytest.approx(1 / 3, abs=1e-4)


def test_induction_from_thrust():
    # PWR-2: momentum theory, computed outside this project.
    np.testing.assert_allclose(
        induction_factor([0.2, 0.5, 0.8]), [0.0527864, 0.1464466, 0.2763932], atol=1e-7
    )


def test_power_density_by_definition():
    # PWR-3: 1/2 x 1.225 x v^3.
    np.testing.assert_allclose(
        wind_power_density([5.0, 10.0, 12.0], 1.225), [76.5625, 612.5, 1058.4], rtol=1e-12
    )


def test_mean_of_cubes_of_a_rayleigh_series():
    # PWR-4: mean(v^3) = 6/pi mean(v)^3 for a Rayleigh distribution.
    v = stats.rayleigh(scale=8.0 / np.sqrt(np.pi / 2)).ppf((np.arange(200_000) + 0.5) / 200_000)
    expected = 0.5 * 1.225 * (6 / np.pi) * 8.0**3
    assert mean_power_density(v, 1.225) == pytest.approx(expected, rel=1e-4)


def test_mean_power_density_skips_missing_and_pairs_density_with_speed():
    # By hand: (0.5 x 1.0 x 8 + 0.5 x 1.2 x 64) / 2 = (4 + 38.4) / 2.
    speed = [2.0, np.nan, 4.0, 3.0]
    density = [1.0, 1.0, 1.2, np.nan]
    assert mean_power_density(speed, density) == pytest.approx(21.2)
    assert np.isnan(mean_power_density([np.nan], 1.225))


def test_doubling_the_wind_gives_eight_times_the_power():
    # Common practice.
    assert stream_power(10.0, 1.1, 3.0) == pytest.approx(8 * stream_power(5.0, 1.1, 3.0))


def test_small_rotor_by_trade_arithmetic():
    # Common practice: a 64 inch rotor sweeps about 22.3 ft2 or 2.1 m2; at 11 mph about 150 W
    # cross it; 16/27 of that is the ceiling; with 75 % of system efficiency on top, 44 %
    # overall, about 67 W remain.
    D, v = 64 * INCH, 11 * MILE_PER_HOUR
    assert swept_area(D) / 0.3048**2 == pytest.approx(22.3, abs=0.05)
    assert swept_area(D) == pytest.approx(2.1, abs=0.05)
    crossing = stream_power(v, STANDARD_AIR_DENSITY, D)
    assert crossing == pytest.approx(150.0, abs=2.0)
    remaining = 0.75 * BETZ_LIMIT * crossing
    assert remaining == pytest.approx(67.0, abs=0.5)
    assert overall_efficiency(remaining, v, STANDARD_AIR_DENSITY, D) == pytest.approx(
        0.44, abs=0.005
    )
    assert claim_against_betz(remaining, v, STANDARD_AIR_DENSITY, D) == pytest.approx(0.75)


def test_claim_above_betz_is_refused_with_the_rotor_it_would_need():
    # By hand: 2 m rotor, 10 m/s, 1.225: 612.5 x pi = 1924 W cross it, 1140 W is the ceiling;
    # 2000 W is 1.75 times that and would need 2 x sqrt(1.754) = 2.65 m.
    with pytest.raises(ValueError, match=r"2000 W at 10 m/s.*1\.75 times the 1140 W.*2\.65 m"):
        claim_against_betz(2000.0, 10.0, 1.225, 2.0)
    ratio = claim_against_betz(2000.0, 10.0, 1.225, 2.0, refuse_impossible=False)
    assert ratio == pytest.approx(2000 / 1140.32, rel=1e-4)


def test_the_worst_claim_of_many_is_named():
    with pytest.raises(ValueError, match="3000 W at 12 m/s"):
        claim_against_betz([100.0, 3000.0], [5.0, 12.0], 1.225, 2.0)


def test_the_limit_itself_is_allowed():
    ceiling = BETZ_LIMIT * stream_power(9.0, 1.2, 4.0)
    assert claim_against_betz(ceiling, 9.0, 1.2, 4.0) == pytest.approx(1.0)


@given(st.floats(0.0, 0.5))
def test_power_is_thrust_times_slowed_speed(a):
    # Momentum theory: Cp = Ct (1 - a), and no rotor beats the limit.
    assert power_coefficient(a) == pytest.approx(thrust_coefficient(a) * (1 - a), abs=1e-14)
    assert power_coefficient(a) <= BETZ_LIMIT + 1e-15


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: wind_power_density(-1.0, 1.2), "wind_speed must not be negative .m/s., got -1"),
        (lambda: wind_power_density([3.0, -9.0], 1.2), "got -9 at position 1 .1 of 2 values."),
        (lambda: wind_power_density(5.0, 0.0), "air_density must be positive"),
        (lambda: swept_area(0.0), "rotor_diameter must be positive"),
        (lambda: induction_factor(1.1), "thrust_coefficient must be between 0 and 1"),
        (lambda: power_coefficient(0.7), "induction_factor must be between 0 and 0.5"),
        (lambda: overall_efficiency(10.0, 0.0, 1.2, 2.0), "wind_speed must be positive"),
        (lambda: overall_efficiency(-5.0, 6.0, 1.2, 2.0), "power must not be negative"),
    ],
)
def test_bad_input_is_named(call, message):
    with pytest.raises(ValueError, match=message):
        call()
