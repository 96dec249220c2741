"""Averaging by direction: of two cups at one height, the one that stands free of the mast.

Here a pair becomes one speed: the mean of both where both stand free, the free one where the mast
shades the other, whichever is left where one is masked. Where the shadows are is found in
`checks.shadow`; the record itself is not changed.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from windkit.study.checks import CheckSettings, free_of_shadow
from windkit.study.checks.comparing import MOVING_SPEED, speed_pairs
from windkit.study.errors import StudyError
from windkit.study.record import Record

__all__ = ["PairSpeed", "speed_of_pair"]


@dataclass(frozen=True)
class PairSpeed:
    """One wind speed out of a pair of cups.

    Attributes
    ----------
    wind_speed : Series
        Speed on the record's index [m/s].
    basis : Series
        What each value stands on: ``both``, a channel's name, or an empty text where nothing is
        known.
    level : float
        Mean of the first cup over mean of the second where both stand free and turn: what a
        single cup is divided by, half of it each way, to meet the pair's level.
    table : DataFrame
        For each basis: ``count``, ``share`` of the known values, ``mean`` speed.
    plain_mean, mean : float
        Mean of the plain average of both cups over the same intervals, and of `wind_speed`.
    """

    wind_speed: pd.Series
    basis: pd.Series
    level: float
    table: pd.DataFrame
    plain_mean: float
    mean: float


def speed_of_pair(
    record: Record,
    first: str,
    second: str,
    *,
    check_settings: CheckSettings | None = None,
    match_levels: bool = True,
) -> PairSpeed:
    """Average a pair of cups by direction, leaving out the one behind the mast.

    Parameters
    ----------
    record : Record
        The checked record; its directions decide.
    first, second : str
        Channels of the pair: mean speeds at one height.
    check_settings : CheckSettings, optional
        Thresholds for the shadow.
    match_levels : bool
        Whether a cup that stands alone is brought to the mean level of the pair, so that the
        change from one to the other leaves no step in the record.

    Returns
    -------
    PairSpeed
        The speed, what each value stands on, and the effect.

    Raises
    ------
    StudyError
        If the two are no pair, or never stand free together.
    """
    settings = check_settings or CheckSettings()
    names = {
        frozenset((one.name, other.name))
        for one, other in speed_pairs(record.settings, settings.pair_height_m)
    }
    if frozenset((first, second)) not in names:
        known = "; ".join(" and ".join(sorted(pair)) for pair in names) or "none"
        raise StudyError.of(
            met=f"{record.settings.name}: {first} and {second} are no pair",
            rule=f"a pair are two mean wind speeds within {settings.pair_height_m:g} m of height",
            remedy=f"name one of the pairs: {known}",
        )
    free = free_of_shadow(record.reading, settings)
    one = record.masked[first].to_numpy(dtype=float)
    other = record.masked[second].to_numpy(dtype=float)
    there = np.isfinite(one), np.isfinite(other)
    # Behind the mast a cup still counts if nothing else is left: it is low, but it is known.
    use_one = there[0] & (free[first] | ~there[1])
    use_other = there[1] & (free[second] | ~there[0])
    neither = there[0] & there[1] & ~use_one & ~use_other
    use_one, use_other = use_one | neither, use_other | neither
    both = use_one & use_other
    moving = both & (np.minimum(one, other) >= MOVING_SPEED)
    if not moving.any():
        raise StudyError.of(
            met=f"{record.settings.name}: {first} and {second} never stand free together",
            rule="the level between the cups is taken where both stand free",
            remedy="check the directions and the shadow; use one cup",
        )
    level = float(one[moving].mean() / other[moving].mean())
    half = np.sqrt(level) if match_levels else 1.0
    speed = np.where(both, 0.5 * (one + other), np.where(use_one, one / half, other * half))
    basis = np.where(both, "both", np.where(use_one, first, np.where(use_other, second, "")))
    speed[basis == ""] = np.nan
    index = record.masked.index
    plain = there[0] & there[1]
    return PairSpeed(
        wind_speed=pd.Series(speed, index=index, name="wind_speed"),
        basis=pd.Series(basis, index=index, name="basis"),
        level=level,
        table=_by_basis(speed, basis),
        plain_mean=float(np.mean(0.5 * (one + other)[plain])),
        mean=float(np.mean(speed[plain])),
    )


def _by_basis(speed: np.ndarray, basis: np.ndarray) -> pd.DataFrame:
    known = pd.DataFrame({"basis": basis, "speed": speed}).dropna()
    table = known.groupby("basis")["speed"].agg(["size", "mean"]).reset_index()
    table.columns = pd.Index(["basis", "count", "mean"])
    table["share"] = table["count"] / table["count"].sum()
    return table[["basis", "count", "share", "mean"]]
