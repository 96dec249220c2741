"""Shear by class against a plain loop over classes, known exponents, and the clock."""

import time

import numpy as np
import pytest

from windkit.kernels.frequency import sector_index
from windkit.kernels.profile import fit_shear, power_law
from windkit.kernels.shear_classes import (
    FALL_BACK_LEVELS,
    leave_one_height_out,
    shear_by_class,
    shear_of_records,
)

HEIGHT = np.array([40.0, 60.0, 80.0, 100.0])


def _station(records, seed=3):
    """Hours of a year and on, with nights of strong shear and days of little."""
    rng = np.random.default_rng(seed)
    hour = np.arange(records) % 24
    month = (np.arange(records) // 730) % 12 + 1
    direction = rng.uniform(0.0, 360.0, records)
    direction[rng.random(records) < 0.02] = np.nan
    exponent = np.where((hour < 7) | (hour > 19), 0.30, 0.08) + 0.05 * (direction > 180.0)
    speed = (rng.weibull(2.0, records) * 8.0)[:, None] * (HEIGHT / 100.0) ** exponent[:, None]
    return speed, direction, hour, month, exponent


def test_classes_are_those_of_a_plain_loop():
    # The same arithmetic written as loops over masks, with numpy means and numpy.polyfit.
    speed, direction, hour, month, _ = _station(40_000)
    speed *= np.random.default_rng(5).lognormal(0.0, 0.03, speed.shape)
    sector = sector_index(direction, 4)
    classes = shear_by_class(speed, HEIGHT, sector, hour, month, sector_count=4, min_count=35)
    values = {"sector": sector, "hour": hour, "month": month - 1}
    checked = set()
    for cell in [(0, 3, 5), (3, 12, 0), (1, 23, 11), (2, 7, 2), (4, 5, 7), (4, 14, 1)]:
        for number, names in enumerate(FALL_BACK_LEVELS):
            mask = np.ones(speed.shape[0], dtype=bool)
            for name, wanted in zip(("sector", "hour", "month"), cell, strict=True):
                if name in names:
                    mask &= values[name] == wanted
            expected_level = number
            if mask.sum() >= 35:
                break
        means = speed[mask].mean(axis=0)
        expected = np.polyfit(np.log(HEIGHT), np.log(means), 1)[0]
        assert classes.shear_exponent[cell] == pytest.approx(expected, abs=1e-9)
        assert classes.level[cell] == expected_level
        checked.add(expected_level)
    assert len(checked) >= 2


def test_counts_reconcile_with_the_records():
    speed, direction, hour, month, _ = _station(9000)
    speed[::10, 2] = np.nan
    sector = sector_index(direction, 12)
    classes = shear_by_class(speed, HEIGHT, sector, hour, month)
    assert classes.count.sum() == 8100
    known = ~np.isnan(speed).any(axis=1)
    assert classes.count[-1].sum() == np.count_nonzero(known & (sector < 0))
    assert classes.count[3, 5, 2] == np.count_nonzero(
        known & (sector == 3) & (hour == 5) & (month == 3)
    )


def test_records_get_their_own_exponent_back():
    # Made without scatter, so a class whose members share an exponent must return it.
    speed, direction, hour, month, exponent = _station(120_000)
    sector = sector_index(direction, 12)
    classes = shear_by_class(speed, HEIGHT, sector, hour, month, min_count=20)
    found = shear_of_records(classes, sector, hour, month)
    clear = ~np.isin(sector, [-1, 0, 6])  # sectors that lie wholly on one side
    np.testing.assert_allclose(found[clear], exponent[clear], atol=1e-9)
    hub = power_law(speed[:, 3], 100.0, 150.0, found)
    assert hub.mean() == pytest.approx(np.mean(speed[:, 3] * 1.5**exponent), rel=5e-3)


def test_thin_classes_borrow_in_the_stated_order():
    speed, direction, hour, month, _ = _station(8760)
    sector = sector_index(direction, 12)
    for min_count, least_level in ((1, 0), (20, 1), (200, 3), (5000, 4)):
        classes = shear_by_class(speed, HEIGHT, sector, hour, month, min_count=min_count)
        assert classes.level[:-1].min() >= least_level
        # Without a direction there is no sector to stand for itself.
        assert classes.level[-1].min() >= 2
    overall = fit_shear(speed.mean(axis=0), HEIGHT)
    np.testing.assert_allclose(classes.shear_exponent, overall)


def test_negative_shear_is_kept():
    speed = np.tile([9.0, 8.5, 8.0, 7.5], (500, 1))
    hour, month = np.arange(500) % 24, np.full(500, 6)
    classes = shear_by_class(speed, HEIGHT, np.zeros(500, dtype=int), hour, month)
    assert (classes.shear_exponent < 0.0).all()


def test_one_hundred_thousand_records_well_within_half_a_second():
    speed, direction, hour, month, _ = _station(100_000)
    sector = sector_index(direction, 12)
    start = time.perf_counter()
    classes = shear_by_class(speed, HEIGHT, sector, hour, month)
    shear_of_records(classes, sector, hour, month)
    assert time.perf_counter() - start < 0.5


def test_leaving_a_height_out_finds_the_sensor_that_reads_low():
    speed, *_ = _station(3000)
    np.testing.assert_allclose(leave_one_height_out(speed, HEIGHT), 0.0, atol=1e-12)
    speed[:, 3] *= 0.97
    error = leave_one_height_out(speed, HEIGHT)
    assert error[3] == pytest.approx(1 / 0.97 - 1, abs=1e-9)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"hour": np.full(300, 24)}, "hour must be from 0 to 23, got 24 at position 0"),
        ({"month": np.zeros(300, dtype=int)}, "month must be from 1 to 12, got 0"),
        ({"sector": np.full(300, 12)}, "sector must be from -1 to 11, got 12"),
        ({"sector": np.zeros(299, dtype=int)}, "one value for each of the 300 records"),
        ({"hour": np.full(300, 1.5)}, "hour must hold whole numbers"),
        ({"wind_speed": np.ones((300, 3))}, "with 4 heights, got shape"),
        ({"min_count": 1000}, r"no level with min_count = 1000 records among 300 complete"),
        ({"levels": [("season",)]}, "levels must name any of sector, hour, month"),
    ],
)
def test_bad_input_is_named(change, message):
    arguments = {
        "wind_speed": np.ones((300, 4)),
        "height": HEIGHT,
        "sector": np.zeros(300, dtype=int),
        "hour": np.arange(300) % 24,
        "month": np.full(300, 1),
    } | change
    with pytest.raises(ValueError, match=message):
        shear_by_class(**arguments)


def test_two_heights_cannot_test_each_other():
    with pytest.raises(ValueError, match="at least three"):
        leave_one_height_out([[5.0, 6.0]], [40.0, 80.0])
