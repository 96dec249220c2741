"""What a long-term correction gives back: the answer, its interval and everything behind it.

Here is the result only; it is made by `long_term_blend`, and works out the slower tables (methods
on trial, series) when they are first asked for.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.blend import Blend

__all__ = ["LongTermCorrection"]

Array = NDArray[np.float64]

#: References that all methods are scored on, best first [1]; a limit to the time it takes.
MOST_SCORED = 3


@dataclass(frozen=True)
class LongTermCorrection:
    """A site's long-term mean speed over the references' whole period, with how sure it is.

    Attributes
    ----------
    mean_speed : float
        Long-term mean of the site [m/s], the middle of `draws`.
    campaign_mean_speed : float
        What was measured [m/s], over the campaign as it is.
    draws : ndarray
        Equally likely long-term means [m/s]; pass them on instead of a standard deviation.
    future_draws : ndarray
        As `draws`, with the chance that the references' period was windier or calmer than the
        climate it stands for.
    references : DataFrame
        One row a reference, best first: verdict, reason, and what they rest on.
    breaks : DataFrame
        Columns reference, date (first month after it), earliest and latest (months between which
        it lies with a chance of 90 % or more), size [1].
    parts : DataFrame
        One row a part of the uncertainty: standard_uncertainty [1], share [1] of the variance of
        `draws` (NaN for a part that is not in it), how it was found.
    back_test : DataFrame
        One row a level: claimed, held [1] by references standing in for the site, and their count.
    windows : DataFrame
        Result with the reference period cut to its last 5, 6, ... years: years, mean_speed [m/s].
    period : tuple of Timestamp
        First and last instant of the references.
    widening : float
        Factor the stand-ins' errors were widened by, because the study's own data did not
        support them as they were [1].
    notes : list of str
        What a reader must know, in sentences.
    blend : Blend
        The kernel's own account: ways of blending, their weights and errors.
    """

    mean_speed: float
    campaign_mean_speed: float
    draws: Array
    future_draws: Array
    references: pd.DataFrame
    breaks: pd.DataFrame
    parts: pd.DataFrame
    back_test: pd.DataFrame
    windows: pd.DataFrame
    period: tuple[pd.Timestamp, pd.Timestamp]
    widening: float
    notes: list[str]
    blend: Blend
    _methods: Callable[[str], pd.DataFrame] = field(repr=False)
    _series: Callable[[str, float], pd.DataFrame] = field(repr=False)
    _longer: Callable[[], pd.DataFrame] = field(repr=False)

    @property
    def standard_uncertainty(self) -> float:
        """Quadrature of `parts`, for the references' own period [1]."""
        own = self.parts["standard_uncertainty"].drop("representativeness")
        return float(np.sqrt((own**2).sum()))

    def interval(self, level: float = 0.8, *, future: bool = False) -> tuple[float, float]:
        """Lowest and highest long-term mean [m/s] at a level such as 0.8.

        Parameters
        ----------
        level : float
            Chance that the interval holds the truth [1], between 0 and 1.
        future : bool
            Whether to answer for the climate, not only for the references' own period.
        """
        if not 0 < level < 1:
            raise ValueError(f"level must lie between 0 and 1, got {level:g}; 0.8 is usual")
        draws = self.future_draws if future else self.draws
        low, high = np.quantile(draws, [(1 - level) / 2, (1 + level) / 2])
        return float(low), float(high)

    @cached_property
    def methods(self) -> pd.DataFrame:
        """Every method on trial by blocked hold-out on the best reference, and doing nothing.

        One row a method, best first; the columns are those of `method_scores`.
        """
        return self._methods(self.references.index[0])

    @cached_property
    def methods_by_reference(self) -> pd.DataFrame:
        """The same table for each of the three best references, under the reference's name."""
        used = self.references.index[self.references["verdict"] == "used"][:MOST_SCORED]
        tables = [self.methods, *(self._methods(name) for name in used[1:])]
        return pd.concat(tables, keys=used, names=["reference", "method"])

    @cached_property
    def longer_campaign(self) -> pd.DataFrame:
        """What more months would bring, as the stand-ins show it.

        Columns months [1] added, stand_in_rms [1] of the blend after a campaign that long, and
        half_width_80 [1]: the present interval's, in the same proportion.
        """
        table = self._longer()
        low, high = self.interval(0.8)
        now = (high - low) / 2 / self.mean_speed
        table["half_width_80"] = now * table["stand_in_rms"] / table["stand_in_rms"].iloc[0]
        return table

    @cached_property
    def series(self) -> pd.DataFrame:
        """Long-term series: wind_speed [m/s], wind_direction [deg] if directions were given.

        From the method that did best on hold-out among those that keep the spread, scaled so that
        its mean is `mean_speed`.
        """
        kept = self.methods[self.methods["keeps_spread"] & self.methods["score"].notna()]
        return self._series(str(kept.index[0]), self.mean_speed)
