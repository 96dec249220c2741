"""Tests of windkit.kernels.energy. Checks on whole turbines stand in test_curve.py."""

import numpy as np
import pytest

from windkit.kernels.energy import (
    HOURS_PER_MEAN_YEAR,
    HOURS_PER_YEAR,
    annual_energy,
    capacity_factor,
    speed_to_energy_sensitivity,
)


def test_hours_of_a_common_and_of_a_mean_year():
    # The calendar: 365 days, and 365.25 days over a cycle of four years.
    assert HOURS_PER_YEAR == 365 * 24
    assert 4 * HOURS_PER_MEAN_YEAR == (3 * 365 + 366) * 24


def test_annual_energy_of_a_megawatt():
    # Arithmetic: 1 MW all year is 8760 MWh.
    assert annual_energy(1e6) == pytest.approx(8760e6)
    assert annual_energy([1e6, np.nan], hours_per_year=8766)[0] == pytest.approx(8766e6)
    assert np.isnan(annual_energy([1e6, np.nan])[1])


def test_capacity_factor_of_a_claimed_yield():
    # Arithmetic: 3 MW that give 9198 MWh a year ran at 35 %.
    assert capacity_factor(9198e6 / 8760, 3e6) == pytest.approx(0.35)


@pytest.mark.parametrize("mean_power", [3.1e6, -1.0])
def test_capacity_factor_outside_zero_to_one_is_refused(mean_power):
    with pytest.raises(ValueError, match="must lie between 0 and rated_power"):
        capacity_factor(mean_power, 3e6)


def test_rated_power_must_be_positive():
    with pytest.raises(ValueError, match="rated_power must be positive"):
        capacity_factor(1.0, 0.0)


@pytest.mark.parametrize("exponent", [0.0, 1.0, 2.0, 3.0])
def test_sensitivity_of_a_pure_power_law_is_its_exponent(exponent):
    # Calculus: d(ln v^n)/d(ln v) = n; the central difference errs by n(n-1)(n-2)/6 step^2.
    measured = speed_to_energy_sensitivity(lambda scale: 5.0 * scale**exponent)
    assert measured == pytest.approx(exponent, abs=3e-5)


def test_sensitivity_keeps_the_shape_of_the_callable():
    shape = speed_to_energy_sensitivity(lambda scale: scale ** np.array([1.0, 2.0])).shape
    assert shape == (2,)


def test_sensitivity_refuses_a_wind_below_cut_in():
    with pytest.raises(ValueError, match="reaches cut-in"):
        speed_to_energy_sensitivity(lambda scale: 0.0 * scale)


@pytest.mark.parametrize("step", [0.0, -0.01, 0.5])
def test_sensitivity_refuses_a_wild_step(step):
    with pytest.raises(ValueError, match="half a percent"):
        speed_to_energy_sensitivity(lambda scale: scale, step=step)
