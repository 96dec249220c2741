"""What each check is worth: mean speed and energy with it and without it.

A check that changes nothing needs no discussion; one that moves the energy does. Here the ledger
is replayed without one rule at a time, and the speed the study stands on made anew from each.
The energy comes from a power function passed in: this module knows no turbine.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.study.checks import CheckSettings
from windkit.study.checks.comparing import speed_pairs
from windkit.study.cup_pair import speed_of_pair
from windkit.study.hourly import without_calm_directions
from windkit.study.ledger import ALL, AUTOMATIC, apply_ledger, ledger_of
from windkit.study.record import Record

__all__ = ["worth_of_checks"]

Power = Callable[[NDArray[np.float64]], NDArray[np.float64]]
#: Makes the speed [m/s] out of a record; False: without averaging a pair.
SpeedOf = Callable[[Record, bool], NDArray[np.float64]]

_W_PER_KW = 1000.0


def worth_of_checks(
    record: Record,
    power: Power | None = None,
    *,
    channel: str | None = None,
    pair: str | None = None,
    speed_of: SpeedOf | None = None,
) -> pd.DataFrame:
    """Mean speed and mean power with each rule left out, or taken in, by itself.

    Parameters
    ----------
    record : Record
        The checked record.
    power : callable, optional
        Power [W] of wind speeds [m/s], any turbine; energy columns are NaN without it.
    channel : str, optional
        A mean speed; the main one if left out.
    pair : str, optional
        Second cup that `speed_of` averages the channel with.
    speed_of : callable, optional
        Makes the speed the study stands on out of a record, and, called with False, the same
        without averaging; on one time grid for every ledger. The channel itself if left out.

    Returns
    -------
    DataFrame
        One row a rule, the first for the speed as it is (``all rules``) and the last for none:
        ``rule``, ``acts`` (masks, suspects, averages), ``count`` of values of the cups it alone
        decides on, ``mean_speed`` [m/s] and ``mean_power_kw`` with this one rule changed,
        ``speed_change`` and ``energy_change`` as a fraction of the speed as it is.

    Notes
    -----
    For a rule that masks the change is that of leaving it out; for one that only lists suspects
    it is that of accepting all of them. Means are over the values that are left, so that what a
    rule masks is not counted as zero energy. Leaving a sector out would change the mix of winds
    and say nothing about the shadow: its row is the change by leaving the average by direction
    out over the same intervals if the speed is a pair, and by averaging if the cup has a pair
    that is not used.
    """
    name = channel or record.settings.main_wind_speed
    cups = [name, *([pair] if pair is not None else [])]
    # Rows of other channels do not make a row of the table.
    whole = record.ledger
    mine = whole[whole["channel"].isin([*cups, ALL])]

    def speed(ledger: pd.DataFrame, averaged: bool = True) -> NDArray[np.float64]:
        if speed_of is None:
            return apply_ledger(record.raw[[name]], ledger[ledger["channel"].isin([name, ALL])])[
                name
            ].to_numpy(dtype=float)
        frame = without_calm_directions(apply_ledger(record.raw, ledger), record.settings)
        return speed_of(replace(record, ledger=ledger, frame=frame), averaged)

    def known(ledger: pd.DataFrame) -> NDArray[np.bool_]:
        frame = record.raw[cups]
        return apply_ledger(frame, ledger[ledger["channel"].isin([*cups, ALL])]).notna().to_numpy()

    base, there = speed(whole), known(whole)
    masking = list(dict.fromkeys(mine.loc[mine["decision"] == "accepted", "rule"]))
    rows = [_row("all rules", "masks", 0, base, base, power)]
    for rule in masking:
        without = whole[whole["rule"] != rule]
        alone = int((known(without) & ~there).sum())
        rows.append(_row(rule, "masks", alone, speed(without), base, power))
    suspects = record.suspects
    suspects = suspects[suspects["channel"].isin([*cups, ALL])]
    for rule in dict.fromkeys(suspects["rule"]):
        if rule in masking:
            continue
        if rule == "shadow":
            other = speed(whole, averaged=False) if pair is not None else _averaged(record, name)
            if other is not None:
                shaded = int((np.isfinite(base) & (other != base)).sum())
                values = np.where(np.isfinite(base), other, np.nan)
                rows.append(_row(rule, "averages", shaded, values, base, power))
                continue
        accepted = _accepted(suspects[suspects["rule"] == rule])
        taken = pd.concat([whole, accepted], ignore_index=True) if len(whole) else accepted
        alone = int((there & ~known(taken)).sum())
        rows.append(_row(rule, "suspects", alone, speed(taken), base, power))
    nothing = whole.iloc[:0]
    alone = int((known(nothing) & ~there).sum())
    rows.append(_row("no rule", "masks", alone, speed(nothing), base, power))
    return pd.DataFrame(rows)


def _averaged(record: Record, name: str) -> NDArray[np.float64] | None:
    """The average by direction of a cup and its pair, if it has one."""
    for one, other in speed_pairs(record.settings, CheckSettings().pair_height_m):
        if name in {one.name, other.name}:
            return speed_of_pair(record, one.name, other.name).wind_speed.to_numpy(dtype=float)
    return None


def _accepted(spans: pd.DataFrame) -> pd.DataFrame:
    columns = {name: spans[name] for name in ("channel", "from", "to", "count", "rule", "reason")}
    more = {"threshold": "", "decision": "accepted", "who": AUTOMATIC, "when": ""}
    return ledger_of(pd.DataFrame(columns).assign(**more).to_dict("records"))  # type: ignore[arg-type]


def _row(
    rule: str,
    acts: str,
    count: int,
    values: NDArray[np.float64],
    base: NDArray[np.float64],
    power: Power | None,
) -> dict[str, object]:
    speed, usual = (
        float(np.nanmean(v)) if np.isfinite(v).any() else np.nan for v in (values, base)
    )
    energy = energy_usual = np.nan
    if power is not None:
        energy, energy_usual = (float(np.mean(power(v[np.isfinite(v)]))) for v in (values, base))
    return {
        "rule": rule,
        "acts": acts,
        "count": count,
        "mean_speed": speed,
        "mean_power_kw": energy / _W_PER_KW,
        "speed_change": speed / usual - 1.0,
        "energy_change": energy / energy_usual - 1.0,
    }
