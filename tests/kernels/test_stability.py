"""Stability functions against published forms, their defining integrals, and neutral air."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import integrate

from windkit.kernels.profile import friction_velocity, log_law
from windkit.kernels.stability import (
    bulk_richardson_number,
    diabatic_friction_velocity,
    diabatic_log_law,
    gradient_richardson_number,
    psi_heat,
    psi_momentum,
    stability_from_bulk_richardson,
    stability_from_gradient_richardson,
)


def test_psi_of_momentum():
    # SHR-7: Paulson 1970 and Dyer 1974 (formula from memory), gamma 16, beta 5.
    np.testing.assert_allclose(
        psi_momentum([-1.0, -0.5, -0.1, 0.1, 0.5]),
        [1.11623, 0.793359, 0.283614, -0.5, -2.5],
        atol=1e-5,
    )


@pytest.mark.parametrize("zeta", [-2.0, -0.5, -0.05, 0.3])
def test_psi_is_the_integral_of_the_gradient_functions(zeta):
    # Paulson 1970: psi = integral of (1 - phi)/z; Dyer 1974: phi_m = (1 - 16 z)^-1/4,
    # phi_h = (1 - 16 z)^-1/2 in unstable air, both 1 + 5 z in stable air.
    def phi(z, power):
        return 1 + 5 * z if z > 0 else (1 - 16 * z) ** -power

    for psi, power in ((psi_momentum, 0.25), (psi_heat, 0.5)):
        value, _ = integrate.quad(lambda z, p=power: (1 - phi(z, p)) / z, 0, zeta)
        assert psi(zeta) == pytest.approx(value, abs=1e-8)


def test_neutral_air_is_the_log_law():
    heights = [40.0, 80.0, 120.0]
    np.testing.assert_allclose(
        diabatic_log_law(6.0, 10.0, heights, 0.05, 0.0), log_law(6.0, 10.0, heights, 0.05)
    )
    assert diabatic_friction_velocity(6.0, 10.0, 0.05, 0.0) == pytest.approx(
        friction_velocity(6.0, 10.0, 0.05)
    )
    lifted = diabatic_log_law(6.0, 30.0, 60.0, 0.5, 0.0, displacement_height=10.0)
    assert lifted == pytest.approx(log_law(6.0, 30.0, 60.0, 0.5, displacement_height=10.0))


def test_stable_profile_is_log_plus_linear():
    # Dyer 1974: u = (u*/kappa)(ln(z/z0) + 5 (z - z0)/L), worked by hand for L = 200 m:
    # at 10 m 4.605170 + 0.2475, at 80 m 6.684612 + 1.9975.
    expected = 5.0 * (6.684612 + 1.9975) / (4.605170 + 0.2475)
    assert diabatic_log_law(5.0, 10.0, 80.0, 0.1, 1 / 200) == pytest.approx(expected, rel=1e-6)


@given(st.floats(-0.05, 0.01), st.floats(0.001, 0.01))
def test_more_stable_air_has_more_shear(inverse_length, step):
    speeds = diabatic_log_law(5.0, 10.0, 80.0, 0.05, [inverse_length, inverse_length + step])
    assert speeds[1] > speeds[0]


def test_gradient_richardson_by_hand():
    # Arya 2001: Ri = (g/T) dTheta zm ln(z2/z1) / du^2; 285 K at 10 m, 285.2 K at 40 m:
    # dTheta = 0.2 + 30 x 0.0097607 = 0.492821, zm = 20, ln 4 = 1.386294, du = 3.
    expected = 9.80665 / 285.1 * 0.492821 * 20 * 1.386294 / 9
    found = gradient_richardson_number(285.0, 285.2, 4.0, 7.0, 10.0, 40.0)
    assert found == pytest.approx(expected, rel=1e-4)


def test_dry_adiabatic_air_is_neutral():
    # Textbook: air that cools by 9.8 K a kilometre is neutral.
    assert bulk_richardson_number(288.0 - 0.0098 * 50, 288.0, 8.0, 50.0) == pytest.approx(
        0.0, abs=1e-4
    )


def test_bulk_richardson_by_hand():
    # Stull 1988: (g/Ts) dTheta z / u^2 with water 2 K warmer than the air at 10 m.
    expected = 9.80665 / 285.0 * (-2 + 0.097607) * 10 / 36
    assert bulk_richardson_number(283.0, 285.0, 6.0, 10.0) == pytest.approx(expected, rel=1e-4)


def test_stability_from_gradient_number():
    # Dyer 1974: z/L = Ri in unstable air, Ri/(1 - 5 Ri) in stable air, none from 0.2 on.
    np.testing.assert_allclose(
        stability_from_gradient_richardson([-0.5, 0.0, 0.1, 0.2, 1.0]),
        [-0.5, 0.0, 0.2, np.nan, np.nan],
    )


@pytest.mark.parametrize("zeta", [-10.0, -1.0, -0.1, -0.001, 0.05, 0.5, 2.0])
def test_bulk_number_of_a_profile_gives_its_stability_back(zeta):
    # The profile is built by numerical integration of phi, not with the functions under test.
    height, roughness = 10.0, 0.01

    def phi(z, power):
        return 1 + 5 * z if z > 0 else (1 - 16 * z) ** -power

    def difference(power):
        # ln(z/z0) - psi(z/L), psi as its integral.
        psi, _ = integrate.quad(lambda z: (1 - phi(z, power)) / z, 0, zeta)
        return np.log(height / roughness) - psi

    bulk = zeta * difference(0.5) / difference(0.25) ** 2
    assert stability_from_bulk_richardson(bulk, height, roughness) == pytest.approx(zeta, rel=1e-6)


def test_no_answer_beyond_the_critical_number_and_in_calms():
    assert np.isnan(stability_from_bulk_richardson([0.2, 0.5, np.nan, -50.0], 10.0, 0.01)).all()
    assert np.isnan(bulk_richardson_number(285.0, 284.0, 0.0, 10.0))
    assert np.isnan(gradient_richardson_number(285.0, 285.0, 5.0, 5.0, 10.0, 40.0))


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: bulk_richardson_number(15.0, 288.0, 5.0, 10.0), "temperature must be in kelvin"),
        (lambda: bulk_richardson_number(288.0, 15.0, 5.0, 10.0), "surface_temperature must be"),
        (lambda: diabatic_log_law(5.0, 0.01, 80.0, 0.05, 0.0), "height must be above displ"),
        (
            lambda: gradient_richardson_number(285.0, 285.0, 5.0, 6.0, 40.0, 10.0),
            "height_upper must be above",
        ),
    ],
)
def test_bad_input_is_named(call, message):
    with pytest.raises(ValueError, match=message):
        call()
