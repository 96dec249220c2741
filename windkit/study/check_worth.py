"""What each check is worth: mean speed and energy with it and without it.

A check that changes nothing needs no discussion; one that moves the energy does. Here the ledger
is replayed without one rule at a time. The energy comes from a power function passed in: this
module knows no turbine.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.study.checks import CheckSettings
from windkit.study.checks.comparing import speed_pairs
from windkit.study.cup_pair import speed_of_pair
from windkit.study.ledger import AUTOMATIC, apply_ledger, ledger_of
from windkit.study.record import Record

__all__ = ["worth_of_checks"]

Power = Callable[[NDArray[np.float64]], NDArray[np.float64]]


def worth_of_checks(
    record: Record, power: Power | None = None, *, channel: str | None = None
) -> pd.DataFrame:
    """Mean speed and mean power of a channel with each rule left out, or taken in, by itself.

    Parameters
    ----------
    record : Record
        The checked record.
    power : callable, optional
        Power [W] of wind speeds [m/s], any turbine; energy columns are NaN without it.
    channel : str, optional
        A mean speed; the main one if left out.

    Returns
    -------
    DataFrame
        One row a rule, the first for the record as it is (``all rules``) and the last for none:
        ``rule``, ``acts`` (masks, suspects, averages), ``count`` of values of this channel it alone
        decides on, ``mean_speed`` and ``mean_power`` of the record changed in this one rule,
        ``speed_change`` and ``energy_change`` as a fraction of the record as it is.

    Notes
    -----
    For a rule that masks the change is that of leaving it out; for one that only lists suspects
    it is that of accepting all of them. Means are over the values that are left, so that what a
    rule masks is not counted as zero energy. Leaving a sector out would change the mix of winds
    and say nothing about the shadow: of a cup that has a pair, the shadow's row is the change by
    averaging by direction over the same intervals.
    """
    name = channel or record.settings.main_wind_speed
    raw = record.raw[[name]]
    # Rows of other channels change nothing here.
    mine = record.ledger[record.ledger["channel"].isin([name, "*"])]
    base = apply_ledger(raw, mine)[name].to_numpy(dtype=float)
    masking = list(dict.fromkeys(mine.loc[mine["decision"] == "accepted", "rule"]))
    rows = [_row("all rules", "masks", 0, base, base, power)]
    for rule in masking:
        without = apply_ledger(raw, mine[mine["rule"] != rule])[name].to_numpy(dtype=float)
        alone = int((np.isfinite(without) & ~np.isfinite(base)).sum())
        rows.append(_row(rule, "masks", alone, without, base, power))
    suspects = record.suspects
    suspects = suspects[suspects["channel"].isin([name, "*"])]
    for rule in dict.fromkeys(suspects["rule"]):
        if rule in masking:
            continue
        if rule == "shadow" and (averaged := _averaged(record, name)) is not None:
            shaded = int((np.isfinite(base) & (averaged != base)).sum())
            values = np.where(np.isfinite(base), averaged, np.nan)
            rows.append(_row(rule, "averages", shaded, values, base, power))
            continue
        spans = suspects[suspects["rule"] == rule]
        taken = apply_ledger(raw, pd.concat([mine, _accepted(spans)], ignore_index=True))
        values = taken[name].to_numpy(dtype=float)
        alone = int((np.isfinite(base) & ~np.isfinite(values)).sum())
        rows.append(_row(rule, "suspects", alone, values, base, power))
    nothing = raw[name].to_numpy(dtype=float)
    rows.append(
        _row(
            "no rule",
            "masks",
            int(np.isfinite(nothing).sum() - np.isfinite(base).sum()),
            nothing,
            base,
            power,
        )
    )
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
        "mean_power": energy,
        "speed_change": speed / usual - 1.0,
        "energy_change": energy / energy_usual - 1.0,
    }
