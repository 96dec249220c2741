"""Design classes and wind models against the figures of the standards."""

import numpy as np
import pytest
from scipy import stats

from windkit.kernels.design_classes import (
    GUST_RATIO,
    MEAN_SPEED_RATIO,
    ONE_YEAR_RATIO,
    REFERENCE_SPEED,
    REFERENCE_TURBULENCE,
    SMALL_MEAN_SPEED,
    SMALL_REFERENCE_SPEED,
    SMALL_SWEPT_AREA,
    extreme_operating_gust,
    extreme_turbulence,
    extreme_wind_speed,
    mildest_class,
    normal_turbulence,
    small_turbine_turbulence,
    turbulence_weibull,
)
from windkit.kernels.stream import swept_area

SPEEDS = np.array([5.0, 10.0, 15.0, 20.0, 25.0])


def test_speed_classes():
    # IEC-1: IEC 61400-1: Vref, Vave = 0.2 Vref, Ve50 = 1.4 Vref; IEC-1b (memory): one-year
    # values 0.8 of the 50-year ones; IEC-1c (memory): tropical class of edition 4.
    reference = np.array([REFERENCE_SPEED[name] for name in ("I", "II", "III")])
    np.testing.assert_allclose(reference, [50.0, 42.5, 37.5])
    np.testing.assert_allclose(MEAN_SPEED_RATIO * reference, [10.0, 8.5, 7.5])
    np.testing.assert_allclose(GUST_RATIO * reference, [70.0, 59.5, 52.5])
    np.testing.assert_allclose(ONE_YEAR_RATIO * reference, [40.0, 34.0, 30.0])
    np.testing.assert_allclose(ONE_YEAR_RATIO * GUST_RATIO * reference, [56.0, 47.6, 42.0])
    assert GUST_RATIO * REFERENCE_SPEED["T"] == pytest.approx(79.8)


def test_turbulence_classes():
    # IEC-2: IEC 61400-1:2005 and 2019 (memory).
    assert dict(REFERENCE_TURBULENCE) == {"A+": 0.18, "A": 0.16, "B": 0.14, "C": 0.12}


@pytest.mark.parametrize(
    ("name", "sigma"),
    [
        # IEC-3, IEC-3b: sigma1 = Iref (0.75 V + 5.6), formula from memory of the standard.
        ("A", [1.496, 2.096, 2.696, 3.296, 3.896]),
        ("B", [1.309, 1.834, 2.359, 2.884, 3.409]),
        ("C", [1.122, 1.572, 2.022, 2.472, 2.922]),
    ],
)
def test_normal_turbulence(name, sigma):
    np.testing.assert_allclose(normal_turbulence(SPEEDS, REFERENCE_TURBULENCE[name]), sigma)


def test_normal_turbulence_is_the_90_percent_value_of_its_note():
    # IEC-4: IEC 61400-1:2005, note to the model: mean Iref (0.75 V + 3.8), spread 1.4 Iref.
    expected = 0.16 * (0.75 * SPEEDS + 3.8) + 1.28 * 1.4 * 0.16
    np.testing.assert_allclose(normal_turbulence(SPEEDS, 0.16), expected, rtol=2e-3)


def test_weibull_of_edition_four():
    # IEC-4b: 90 % quantile over the normal turbulence line (scipy's quantile).
    scale, shape = turbulence_weibull(SPEEDS, 0.16)
    ratio = stats.weibull_min(shape, scale=scale).ppf(0.9) / normal_turbulence(SPEEDS, 0.16)
    np.testing.assert_allclose(ratio, [1.0212, 1.0104, 1.0063, 1.0043, 1.0031], atol=2e-4)


def test_extreme_turbulence():
    # IEC-5: class I-A, c = 2 (formula from memory of the standard).
    np.testing.assert_allclose(
        extreme_turbulence(SPEEDS[1:], 0.16, 10.0), [3.38432, 3.84512, 4.30592, 4.76672], atol=1e-5
    )


def test_extreme_wind_by_height():
    # IEC-6: Vref 50, hub 100 m.
    np.testing.assert_allclose(
        extreme_wind_speed(50.0, [10.0, 50.0], 100.0), [38.8124, 46.3294], atol=1e-4
    )


def test_extreme_operating_gust():
    # IEC-10: class I-A, V 12, D 100, hub 100 m.
    assert extreme_operating_gust(12.0, 50.0, 0.16, 100.0, 100.0) == pytest.approx(
        6.22634, abs=1e-5
    )
    # Near the extreme wind the other limb rules: 1.35 (56 - 54).
    assert extreme_operating_gust(54.0, 50.0, 0.16, 100.0, 100.0) == pytest.approx(2.7)


def test_small_turbine_classes():
    # SWT-1: IEC 61400-2, scope: 200 m2 is a diameter of 15.96 m; SWT-2, SWT-2c (memory).
    assert swept_area(15.96) == pytest.approx(SMALL_SWEPT_AREA, rel=1e-3)
    assert list(SMALL_REFERENCE_SPEED.values()) == [50.0, 42.5, 37.5, 30.0]
    assert list(SMALL_MEAN_SPEED.values()) == [10.0, 8.5, 7.5, 6.0]


def test_small_turbine_turbulence():
    # SWT-2b: I15 = 0.18, a = 2 (memory).
    np.testing.assert_allclose(
        small_turbine_turbulence([5.0, 10.0, 15.0, 20.0]), [1.5, 2.1, 2.7, 3.3], rtol=1e-12
    )


def test_mildest_class_holds_everywhere():
    # By the lines themselves: a hair below B is B, a hair above in one bin is A.
    line = normal_turbulence(SPEEDS, 0.14) / SPEEDS
    assert mildest_class(SPEEDS, 0.999 * line) == "B"
    above = 0.999 * line
    above[3] *= 1.01
    assert mildest_class(SPEEDS, above) == "A"
    assert mildest_class(SPEEDS, 2.0 * line) is None
    assert mildest_class(SPEEDS, [np.nan, 0.05, 0.05, 0.05, np.nan]) == "C"


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: normal_turbulence(-1.0, 0.16), "wind_speed must not be negative"),
        (lambda: normal_turbulence(10.0, 0.0), "reference_turbulence must be positive"),
        (lambda: extreme_wind_speed(50.0, 0.0, 100.0), "height must be positive"),
        (lambda: mildest_class(SPEEDS, np.full(5, np.nan)), "known for some"),
    ],
)
def test_bad_input_is_named(call, message):
    with pytest.raises(ValueError, match=message):
        call()
