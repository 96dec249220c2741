"""Losses between the gross and the net energy: the groups they are kept in, and their product.

Here: the agreed groups and the product rule. Not here: wake models that compute a loss, what a
loss is worth in energy, and the uncertainty of a loss (`exceedance`).
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = ["LOSS_GROUPS", "LossTotal", "combine_losses", "combine_losses_by_group"]

#: Groups of losses in the order a report lists them; the seven of the open exchange-record draft
#: of IEC 61400-15-2 (a draft: its published text may differ).
LOSS_GROUPS = (
    "turbine_interaction",
    "availability",
    "electrical",
    "turbine_performance",
    "environmental",
    "curtailment",
    "other",
)


class LossTotal(NamedTuple):
    """What a set of losses leaves.

    Attributes
    ----------
    loss : float or ndarray
        Share of the gross energy that is lost [1].
    efficiency : float or ndarray
        Share that is left [1]; loss and efficiency sum to one.
    """

    loss: NDArray[np.float64]
    efficiency: NDArray[np.float64]


def combine_losses(losses: ArrayLike) -> LossTotal:
    """Combine losses that act one after the other.

    Parameters
    ----------
    losses : array_like
        Losses as shares of the energy that reaches each of them [1], shape (..., n). None at all
        is a loss of zero.

    Returns
    -------
    LossTotal
        Total loss and efficiency [1], shape (...); NaN in gives NaN out.

    Raises
    ------
    ValueError
        If a loss is negative or not below one.

    Notes
    -----
    Losses multiply: each acts on what the ones before have left, so their order does not matter
    and their total is less than their sum.
    """
    share = np.atleast_1d(np.asarray(losses, dtype=float))
    if np.any(share < 0) or np.any(share >= 1):
        met = np.nanmin(share) if np.any(share < 0) else np.nanmax(share)
        raise ValueError(
            f"a loss must lie from 0 up to but not 1, got {met:g}; write 0.03 for 3 %, and enter a "
            f"gain in the gross energy"
        )
    efficiency = np.prod(1 - share, axis=-1)
    return LossTotal(loss=(1 - efficiency)[()], efficiency=efficiency[()])


def combine_losses_by_group(groups: Sequence[str], losses: ArrayLike) -> dict[str, LossTotal]:
    """Combine the losses of each group, in the order of `LOSS_GROUPS`.

    Parameters
    ----------
    groups : sequence of str
        Group of each loss, n names out of `LOSS_GROUPS`.
    losses : array_like
        Losses [1], shape (..., n).

    Returns
    -------
    dict of str to LossTotal
        One entry for every group, a loss of zero where none was entered, so that a report shows
        what was not considered. The product of the efficiencies is that of `combine_losses`.

    Raises
    ------
    ValueError
        If a group is unknown, the lengths differ, or a loss is out of range.
    """
    share = np.atleast_1d(np.asarray(losses, dtype=float))
    if len(groups) != share.shape[-1]:
        raise ValueError(
            f"got {len(groups)} groups for {share.shape[-1]} losses; give one group for each loss"
        )
    for group in groups:
        if group not in LOSS_GROUPS:
            raise ValueError(
                f"unknown group of losses {group!r}; choose one of {', '.join(LOSS_GROUPS)}"
            )
    named = np.asarray(groups, dtype=object)
    return {group: combine_losses(share[..., named == group]) for group in LOSS_GROUPS}
