"""What step 2 says in words: findings with their numbers, and warnings.

Text only: every number comes from the tables of `measured` and `campaign`.
"""

from __future__ import annotations

import pandas as pd

from windkit.kernels.weibull import WeibullFit
from windkit.study.cup_pair import PairSpeed
from windkit.study.gap_filling import FilledChannel
from windkit.study.ledger import AUTOMATIC
from windkit.study.record import Record
from windkit.study.review import AVERAGED, COVERED, DECIDED, MASKED, WAITING
from windkit.study.stations import ChannelSettings

__all__ = ["handling_in_words", "record_in_words", "recount_in_words", "warnings_of"]

#: Recovery under which guidelines ask for a word [1]: Bailey et al. 1997 (id MEA-10, from memory).
EXPECTED_RECOVERY = 0.9
#: Difference of two vanes, or of a lag, that a reviewer should hear of [deg], [h]: our choice,
#: above the five degrees within which vanes are commonly set.
_NORTH_WORTH_A_WORD = 5.0
_LAG_WORTH_A_WORD = 0.75


def warnings_of(
    by_month: pd.Series,
    plain: float,
    seasonal: float,
    share: float,
    main: ChannelSettings,
    north: pd.DataFrame,
    clock: pd.DataFrame,
) -> list[str]:
    """What a reviewer should know of the record, in sentences."""
    warnings = []
    if len(by_month) < 12:
        warnings.append(
            f"The campaign covers {len(by_month)} of 12 calendar months: its mean is not that of "
            "a year."
        )
    elif abs(seasonal / plain - 1) > 0.01:
        warnings.append(
            f"The plain mean is {plain:.2f} m/s and the mean of calendar months {seasonal:.2f}: "
            "months are represented unequally; the long-term correction pairs hours, so the "
            "months' weights do not enter the energy."
        )
    if share < EXPECTED_RECOVERY:
        warnings.append(
            f"Recovery of {main.name} is {share:.1%}; {EXPECTED_RECOVERY:.0%} is expected."
        )
    told: set[frozenset[str]] = set()
    for row in north.itertuples():
        both = frozenset((str(row.vane), str(row.against)))
        if both in told:
            continue  # two vanes against each other are one finding
        told.add(both)
        if abs(float(row.difference_deg)) > _NORTH_WORTH_A_WORD:  # type: ignore[arg-type]
            warnings.append(
                f"{row.vane} differs from {row.against} by {row.difference_deg:.1f}° on average: "
                "one of the norths is in doubt; a direction is not itself used for the energy, "
                "but for sectors and the rose."
            )
    for row in clock.itertuples():
        if abs(float(row.median_lag_hours)) > _LAG_WORTH_A_WORD:  # type: ignore[arg-type]
            warnings.append(
                f"The record lags {row.reference} by {row.median_lag_hours:.1f} h: check "
                "utc_offset_h and stamp of both."
            )
    return warnings


def record_in_words(
    record: Record,
    main: ChannelSettings,
    share: float,
    pair: pd.DataFrame,
    plain: float,
    seasonal: float,
    weibull: WeibullFit,
    exponent: float,
    turbulence: pd.DataFrame,
) -> dict[str, str]:
    """What was found in the record, a sentence or two a subject."""
    reading, ledger = record.reading, record.ledger
    masked = record.counts.set_index("channel")["masked"]
    people = int((ledger["who"] != AUTOMATIC).sum())
    said = {
        "rows": f"{reading.rows_read:,} rows were read: {reading.rows_kept:,} kept and "
        f"{len(reading.set_aside):,} set aside, which adds up. "
        f"{reading.expected_count - reading.rows_kept:,} intervals between the first and the last "
        "have no row.",
        "spans": f"{len(ledger)} spans are in the ledger, {people} of them decided by people. They "
        f"mask {int(masked[main.name]):,} values of {main.name}.",
        "recovery": f"{share:.1%} of all intervals have a believed speed.",
        "climate": f"The campaign's mean is {plain:.2f} m/s, and {seasonal:.2f} m/s when each "
        f"calendar month weighs the same. The Weibull shape is {weibull.weibull_shape:.2f}.",
        "profile": f"The exponent of the power law is {exponent:.3f}."
        + (
            f" Turbulence intensity was found for {len(turbulence)} speed bins."
            if len(turbulence)
            else " No standard deviation was recorded beside the main cup, so turbulence is not "
            "assessed."
        ),
        "pair": "There is no second cup at the main height, so the mast's own effect on the cup "
        "cannot be seen in the data.",
    }
    if len(pair):
        low = pair.iloc[int(pair["ratio"].to_numpy().argmin())]
        high = pair.iloc[int(pair["ratio"].to_numpy().argmax())]
        said["pair"] = (
            f"The ratio is lowest with wind from {low['direction']:.0f}° "
            f"({low['ratio']:.3f}), where {main.name} stands behind the mast, and highest from "
            f"{high['direction']:.0f}° ({high['ratio']:.3f})."
        )
    return said


def handling_in_words(
    average: PairSpeed | None,
    filled: FilledChannel | None,
    worth: pd.DataFrame,
    north: pd.DataFrame,
    clock: pd.DataFrame,
    states: pd.Series,
) -> dict[str, str]:
    """What was done to the main speed and what it is worth."""
    changes = worth[~worth["rule"].isin(["all rules", "no rule"])]
    said = {
        "average": "The study stands on one cup; no pair is averaged.",
        "filled": "Gaps are left open.",
        "worth": "No rule touches the main speed.",
        "suspects": _spans_in_words(states),
        "north": "There is no vane to compare.",
        "clock": "No reference overlaps enough to test the clock.",
    }
    if average is not None:
        said["average"] = (
            f"Averaged by direction the pair gives {average.mean:.3f} m/s where both are there; "
            f"the plain average of the two gives {average.plain_mean:.3f}. Free of the mast, the "
            f"first cup reads {average.level - 1:+.2%} against the second."
        )
    if filled is not None:
        said["filled"] = (
            f"{filled.filled_count:,} of {filled.gap_count:,} gaps were filled from other sensors; "
            f"the main cup's mean moves from {filled.mean_before:.3f} to {filled.mean_after:.3f} "
            "m/s."
        )
    if len(changes):
        largest = changes.iloc[int(changes["energy_change"].abs().to_numpy().argmax())]
        said["worth"] = (
            f"The rule that matters most is {largest['rule']}: changed by itself it moves the "
            f"energy by {largest['energy_change']:+.2%}."
        )
    if len(north):
        widest = north.iloc[int(north["difference_deg"].abs().to_numpy().argmax())]
        said["north"] = (
            f"The largest difference of direction is that of {widest['vane']} from "
            f"{widest['against']}: {widest['difference_deg']:+.1f}°, and "
            f"{widest['month_to_month_deg']:.1f}° from month to month."
        )
    if len(clock):
        said["clock"] = "The median lag of the record is " + (
            "; ".join(
                f"{row.median_lag_hours:+.1f} h against {row.reference}"
                for row in clock.itertuples()
            )
            + "."
        )
    return said


def _spans_in_words(states: pd.Series) -> str:
    """How many spans wait, and what became of the others; together all that was found."""

    def count(state: str) -> int:
        return int((states == state).sum())

    def number(value: int) -> str:
        return f"{value:,}"

    others = [
        (MASKED, "are masked by their check"),
        (AVERAGED, "of the mast's shadow are dealt with by averaging the pair"),
        (COVERED, "lie wholly inside masked ones"),
        (DECIDED, "were decided by people"),
    ]
    told = [f"{number(count(state))} {what}" for state, what in others if count(state)]
    said = (
        f"{number(count(WAITING))} spans wait for a decision; until somebody accepts them their "
        "values stay in the record."
    )
    if told:
        said += f" Of the {number(len(states))} that the checks found, {'; '.join(told)}."
    return said


def recount_in_words(written: pd.DataFrame, ledger: pd.DataFrame) -> str:
    """Counts of people's rows that the record does not bear out; empty text if there are none.

    Parameters
    ----------
    written : DataFrame
        Rows of people as they stand in the file.
    ledger : DataFrame
        The record's, where their values are counted anew; people's rows last.
    """
    counted = ledger["count"].iloc[len(ledger) - len(written) :]
    told = [
        f"{row.channel} from {row[2]:%Y-%m-%d} ({row.count_written:,} written, {now:,} counted)"
        for row, now in zip(
            written.rename(columns={"count": "count_written"}).itertuples(), counted, strict=True
        )
        if row.count_written not in (0, now)  # 0 stands for unknown
    ]
    if not told:
        return ""
    listed = "; ".join(told)
    return f" Values of people's rows are counted from the record; otherwise written: {listed}."
