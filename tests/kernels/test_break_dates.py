"""Checks of windkit.kernels.break_dates: a printed limit, statsmodels, seeded breaks."""

import numpy as np
import pytest
from statsmodels.regression.linear_model import OLS

from tests.kernels.test_breaks import red_noise
from windkit.kernels.break_dates import break_range
from windkit.kernels.breaks import lag_one_autocorrelation, snht


def test_range_of_a_break_is_the_likelihood_ratio_set_of_least_squares():
    # Hansen 2000, table I: 5.94 at 90 % (from memory). The squares are those of statsmodels' fits.
    x = red_noise(np.random.default_rng(11), 60, 0.0, 1.0) + np.repeat([0.0, 1.2], 30)
    places = np.arange(6, 55)
    squares = np.array(
        [OLS(x, np.column_stack([np.ones(60), np.arange(60) >= k])).fit().ssr for k in places]
    )
    inside = places[60 * np.log(squares / squares.min()) <= 5.94]
    assert break_range(x, 0.0) == (inside[0], inside[-1])
    assert inside[-1] > inside[0]
    wider = break_range(x, 0.4)
    assert wider[0] <= inside[0]
    assert wider[1] > inside[-1]


@pytest.mark.parametrize(("phi", "spread", "size"), [(0.1, 0.06, 0.06), (0.5, 0.045, 0.08)])
def test_range_holds_the_date_of_seeded_breaks(phi, spread, size):
    rng = np.random.default_rng(2)
    held, months = [], []
    for _ in range(150):
        x = red_noise(rng, 216, phi, spread)
        at = int(rng.integers(24, 192))
        x[at:] += size
        first, last = break_range(x, lag_one_autocorrelation(x, [snht(x).position]))
        held.append(first <= at <= last)
        months.append(last - first)
    assert np.mean(held) >= 0.88
    assert np.median(months) < 40


def test_a_stretch_too_short_or_with_holes_is_refused():
    with pytest.raises(ValueError, match="more than 12 finite values"):
        break_range(np.arange(12.0), 0.0)
    with pytest.raises(ValueError, match="of which 29 are finite"):
        break_range(np.r_[np.arange(29.0), np.nan], 0.0)
