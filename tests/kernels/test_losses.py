"""Tests of windkit.kernels.losses."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from windkit.kernels.losses import LOSS_GROUPS, combine_losses, combine_losses_by_group

SHARES = st.lists(st.floats(0.0, 0.9), min_size=0, max_size=12)


def test_five_losses_multiply():
    # LOS-1: product rule, 8, 3, 2, 1 and 1 % make 14.2852 %, where their sum is 15 %.
    total = combine_losses([0.08, 0.03, 0.02, 0.01, 0.01])
    assert total.loss == pytest.approx(0.142852, abs=5e-7)
    assert total.efficiency == pytest.approx(0.857148, abs=5e-7)


def test_no_loss_at_all():
    assert combine_losses([]) == (0.0, 1.0)


@given(SHARES, st.floats(0.0, 0.9))
def test_one_more_loss_never_raises_the_net(shares, extra):
    assert combine_losses([*shares, extra]).efficiency <= combine_losses(shares).efficiency


@given(SHARES)
def test_order_does_not_matter_and_the_total_is_below_the_sum(shares):
    total = combine_losses(shares)
    assert combine_losses(shares[::-1]).loss == pytest.approx(total.loss, abs=1e-12)
    assert total.loss <= sum(shares) + 1e-12
    assert total.loss + total.efficiency == pytest.approx(1.0)


def test_sites_along_the_leading_axis():
    total = combine_losses([[0.1, 0.1], [0.0, 0.5], [0.2, np.nan]])
    np.testing.assert_allclose(total.efficiency, [0.81, 0.5, np.nan])


@pytest.mark.parametrize("loss", [-0.01, 1.0, 3.0])
def test_a_loss_in_percent_or_a_gain_is_refused(loss):
    with pytest.raises(ValueError, match=r"write 0\.03 for 3 %"):
        combine_losses([0.02, loss])


def test_groups_are_the_seven_of_the_draft():
    # LOS-2: the seven groups named in the open exchange-record draft of IEC 61400-15-2.
    assert len(LOSS_GROUPS) == len(set(LOSS_GROUPS)) == 7
    assert LOSS_GROUPS[0] == "turbine_interaction"


def test_groups_multiply_back_to_the_total():
    groups = ["availability", "electrical", "availability", "environmental"]
    losses = [0.03, 0.02, 0.01, 0.015]
    by_group = combine_losses_by_group(groups, losses)
    assert tuple(by_group) == LOSS_GROUPS
    assert by_group["availability"].loss == pytest.approx(1 - 0.97 * 0.99)
    assert by_group["curtailment"].loss == 0.0
    product = np.prod([part.efficiency for part in by_group.values()])
    assert product == pytest.approx(combine_losses(losses).efficiency)


def test_unknown_group_is_named():
    with pytest.raises(ValueError, match="'wakes'; choose one of turbine_interaction"):
        combine_losses_by_group(["wakes"], [0.05])


def test_groups_and_losses_of_different_length():
    with pytest.raises(ValueError, match="1 groups for 2 losses"):
        combine_losses_by_group(["other"], [0.05, 0.02])
