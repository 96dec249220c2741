"""Step 2, measured data: from the client's files to a checked record and what it says.

The files are read once, checked, masked through the ledger and summed up. The speed the study
stands on is made here: one cup, or a pair averaged by direction, with gaps filled from the other
sensors if the study asks for it. Nothing here looks beyond the campaign; that is the next step.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.curve import power_at
from windkit.kernels.frequency import FrequencyTable, frequency_table
from windkit.kernels.profile import fit_shear
from windkit.kernels.weibull import WeibullFit, fit_weibull
from windkit.study import campaign
from windkit.study.artifacts import Outcome, Row
from windkit.study.check_worth import worth_of_checks
from windkit.study.checks import free_of_shadow, pair_ratio
from windkit.study.checks.spans import SPAN_COLUMNS
from windkit.study.cup_pair import PairSpeed, speed_of_pair
from windkit.study.folder import Study
from windkit.study.gap_filling import FilledChannel, fill_gaps
from windkit.study.ledger import human_rows, read_ledger
from windkit.study.measured_words import (
    handling_in_words,
    record_in_words,
    recount_in_words,
    warnings_of,
)
from windkit.study.reading import Reading, read_station
from windkit.study.record import Record, build_record
from windkit.study.review import WAITING, spans_to_review
from windkit.study.stations import ChannelSettings
from windkit.study.turbine import read_curve
from windkit.study.unit_slips import refuse_unit_slips

__all__ = ["Measured", "examine_record", "load_record", "read_references"]

#: Exponent where only one height is measured [1]: the seventh-root law, common practice for flat
#: open land; a warning goes with it.
EXPONENT_WITHOUT_PROFILE = 1 / 7
#: Sectors of the campaign's frequency table: twelve of 30 degrees, the default of the trade.
SECTOR_COUNT = 12
_MINUTES_PER_YEAR = 365.25 * 24 * 60


@dataclass(frozen=True)
class Measured:
    """What the record says; `outcome` is what is written.

    Attributes
    ----------
    rows_table : DataFrame
        Rows of the files by what became of them.
    counts : DataFrame
        Intervals of each channel by what became of them, and recovery before and after masking.
    checks : DataFrame
        What each check found and whether it masks.
    spans : DataFrame
        The ledger: automatic spans first, then the decisions of people.
    suspects : DataFrame
        Spans that wait for a decision, the largest first: of checks that mask nothing, without
        those that a person, a masked span or the average of a pair has dealt with.
    worth : DataFrame
        Mean speed and energy with and without each rule.
    recovery : DataFrame
        Share of believed values [1], one row a month, one column a mean channel.
    pair_ratio : DataFrame
        Ratio of the two cups at the main height by direction; empty without a second cup.
    booms : dict of str to float
        Boom bearings of those two cups [deg].
    north, clock : DataFrame
        Vanes against each other and the references [deg]; lag against the references [h].
    main_speed, main_direction : ndarray
        What the study stands on [m/s], [deg].
    frequency : FrequencyTable
        Of these two.
    weibull : WeibullFit
        Of the main speed.
    diurnal, monthly : DataFrame
        Mean speeds by hour of the day (UTC) and by month [m/s].
    heights : DataFrame
        Mean speed by height over the intervals all heights share, free of the mast [m/s].
    turbulence : DataFrame
        Turbulence intensity by speed: mean, representative, count.
    outcome : Outcome
        Figures of merit, tables, what was found and warnings.
    """

    rows_table: pd.DataFrame
    counts: pd.DataFrame
    checks: pd.DataFrame
    spans: pd.DataFrame
    suspects: pd.DataFrame
    worth: pd.DataFrame
    recovery: pd.DataFrame
    pair_ratio: pd.DataFrame
    booms: dict[str, float]
    north: pd.DataFrame
    clock: pd.DataFrame
    main_speed: NDArray[np.float64]
    main_direction: NDArray[np.float64]
    frequency: FrequencyTable
    weibull: WeibullFit
    diurnal: pd.DataFrame
    monthly: pd.DataFrame
    heights: pd.DataFrame
    turbulence: pd.DataFrame
    outcome: Outcome


def read_references(study: Study) -> list[Reading]:
    """Every reference as read, for the checks of north and clock."""
    return [read_station(reference, study.folder) for reference in study.settings.references]


def load_record(study: Study) -> Record:
    """Read the mast's files, run the checks and apply the ledger."""
    reading = read_station(study.settings.mast, study.folder)
    refuse_unit_slips(reading)
    return build_record(
        reading,
        study.settings.checks,
        read_ledger(study.ledger),
        references=read_references(study),
        elevation=study.settings.site.elevation_m,
    )


def examine_record(study: Study, record: Record) -> Measured:
    """Sum up a checked record.

    Returns
    -------
    Measured

    Raises
    ------
    StudyError
        If the second cup that the study names is no pair of the main one.
    """
    settings, checks = study.settings.mast, study.settings.checks
    main = settings.channel(settings.main_wind_speed)
    frame = record.frame
    index = frame.index
    assert isinstance(index, pd.DatetimeIndex)
    references = read_references(study)
    free = free_of_shadow(record.reading, checks)
    main_table, average, filled = _main_series(study, record)
    speed = main_table["wind_speed"].to_numpy()
    direction = main_table["wind_direction"].to_numpy()
    names = [channel.name for channel in settings.mean_speeds]
    main_months = campaign.monthly_means(main_table[["wind_speed"]], settings.interval_min)
    by_month = main_months["wind_speed"].dropna()
    share = float(np.isfinite(speed).sum() / record.reading.expected_count)
    heights = campaign.heights_table(frame, main, settings, free)
    exponent, exponent_basis, warnings = _exponent(heights, main)
    pair, booms = _pair(record, study, main)
    turbulence = campaign.turbulence_table(frame, main, settings, free[main.name])
    # A calm lies below the threshold, as where its direction is taken out; kernels include it.
    highest_calm = float(np.nextafter(settings.calm_below_m_s, 0.0))
    frequency = frequency_table(
        speed, direction, sector_count=SECTOR_COUNT, calm_threshold=highest_calm
    )
    weibull = fit_weibull(speed, calm_threshold=highest_calm)
    curve = read_curve(study)
    worth = worth_of_checks(
        record,
        lambda v: power_at(curve, v),
        pair=study.settings.measured.main_pair,
        speed_of=lambda changed, averaged: _main_series(study, changed, averaged=averaged)[0][
            "wind_speed"
        ].to_numpy(dtype=float),
    )
    north = campaign.north_table(record, references)
    clock = campaign.clock_table(record, references)
    plain, seasonal = float(np.nanmean(speed)), float(by_month.mean())
    warnings += warnings_of(by_month, plain, seasonal, share, main, north, clock)
    rows = _rows(study, record, main, main_table, average, filled)
    rows += [
        Row("measured.mean_of_months_m_s", "Mean of calendar-month means", seasonal, "m/s",
            f"{len(by_month)} calendar months, each weighing the same"),
        Row("measured.shear_exponent", "Shear exponent", exponent, "1", exponent_basis),
        Row("measured.calm_share", "Share of calms", frequency.calm_share, "1",
            f"speed below {settings.calm_below_m_s:g} m/s; counted in every total",
            as_percent=True),
        Row("measured.weibull_A_m_s", "Weibull scale A", weibull.weibull_scale, "m/s",
            "maximum likelihood, calms as a point mass; for description, not for energy"),
        Row("measured.weibull_k", "Weibull shape k", weibull.weibull_shape, "1", "same fit"),
    ]  # fmt: skip
    near_15 = turbulence[turbulence["wind_speed_m_s"] == 15.0]
    if len(near_15):
        rows.append(
            Row("measured.turbulence_intensity_15", "Turbulence intensity at 15 m/s",
                float(near_15["mean"].iloc[0]), "1",
                f"mean of {int(near_15['count'].iloc[0])} intervals of 14.5 to 15.5 m/s, free of "
                "the mast, no trend removed", as_percent=True)
        )  # fmt: skip
    states = spans_to_review(record, averaged=average is not None)
    waiting = states.loc[states["state"] == WAITING, list(SPAN_COLUMNS)]
    waiting = waiting.sort_values(["count", "from"], ascending=[False, True], kind="stable")
    spans, suspects = _readable(record.ledger), _readable(waiting.reset_index(drop=True))
    counts = campaign.channel_counts(record)
    checks_found = campaign.checks_table(record, checks)
    rows_by_fate = campaign.rows_table(record)
    said = record_in_words(
        record, main, share, pair, plain, seasonal, weibull, exponent, turbulence
    )
    said |= handling_in_words(average, filled, worth, north, clock, states["state"])
    said["spans"] += recount_in_words(human_rows(read_ledger(study.ledger)), record.ledger)
    hour = index + pd.Timedelta(minutes=settings.interval_min / 2)
    tables = {
        "record": record.masked,
        "main": main_table,
        "rows": rows_by_fate,
        "set_aside": record.reading.set_aside.astype(str),
        "ledger": spans,
        "suspects": suspects,
        "checks": checks_found,
        "worth": worth,
        "counts": counts,
        "recovery": record.recovery,
        "heights": heights,
        "turbulence": turbulence,
        "north": north,
        "clock": clock,
        "thresholds": _thresholds(study),
    }
    return Measured(
        rows_table=rows_by_fate,
        counts=counts,
        checks=checks_found,
        spans=spans,
        suspects=suspects,
        worth=worth,
        recovery=campaign.recovery_by_month(record),
        pair_ratio=pair,
        booms=booms,
        north=north,
        clock=clock,
        main_speed=speed,
        main_direction=direction,
        frequency=frequency,
        weibull=weibull,
        diurnal=frame[names].groupby(hour.hour).mean(),
        monthly=campaign.monthly_means(frame[names], settings.interval_min),
        heights=heights,
        turbulence=turbulence,
        outcome=Outcome("measure", rows, tables, said, warnings),
    )


def _main_series(
    study: Study, record: Record, *, averaged: bool = True
) -> tuple[pd.DataFrame, PairSpeed | None, FilledChannel | None]:
    """The speed and direction the study stands on, and what each speed stands on.

    Columns wind_speed [m/s], wind_direction [deg], basis (a channel, ``both``, or ``filled``).
    Without `averaged` the main cup stands alone, even if the study names a pair.
    """
    settings, choice = record.settings, study.settings.measured
    main = settings.main_wind_speed
    filled = fill_gaps(record, main) if choice.fill_gaps else None
    speed = record.frame[main]
    basis = pd.Series(np.where(speed.notna(), main, ""), index=speed.index)
    average = None
    if averaged and choice.main_pair is not None:
        average = speed_of_pair(
            record, main, choice.main_pair, check_settings=study.settings.checks
        )
        speed, basis = average.wind_speed, average.basis
    direction = (
        record.frame[settings.main_wind_direction]
        if settings.main_wind_direction
        else pd.Series(np.nan, index=speed.index)
    )
    table = pd.DataFrame({"wind_speed": speed, "wind_direction": direction, "basis": basis})
    if filled is not None:
        table = table.reindex(filled.series.index)
        gap = table["wind_speed"].isna() & filled.series.notna()
        table["wind_speed"] = table["wind_speed"].where(~gap, filled.series)
        table["basis"] = table["basis"].fillna("").where(~gap, "filled")
    return table, average, filled


def _rows(
    study: Study,
    record: Record,
    main: ChannelSettings,
    main_table: pd.DataFrame,
    average: PairSpeed | None,
    filled: FilledChannel | None,
) -> list[Row]:
    """The figures that say what the main speed is."""
    speed = main_table["wind_speed"]
    told = (
        f"{main.name} and {study.settings.measured.main_pair}, averaged by direction"
        if average is not None
        else f"channel {main.name}"
    )
    told += f" at {main.height_m:g} m" + (", gaps filled" if filled is not None else "")
    expected = record.reading.expected_count
    days = expected * record.settings.interval_min
    return [
        Row("measured.mean_speed_m_s", "Mean wind speed of the campaign", float(speed.mean()),
            "m/s", told),
        Row("measured.recovery", "Recovery", float(speed.notna().sum() / expected), "1",
            f"intervals with a believed speed out of {expected:,}", as_percent=True),
        Row("measured.years", "Length of the campaign", days / _MINUTES_PER_YEAR, "years",
            f"{record.frame.index[0]:%Y-%m-%d} to {record.frame.index[-1]:%Y-%m-%d}, UTC"),
        Row("measured.height_m", "Height of the main channel", main.height_m, "m", "study.toml"),
        Row("measured.channel", "Main channel", main.name, "", "study.toml"),
    ]  # fmt: skip


def _exponent(heights: pd.DataFrame, main: ChannelSettings) -> tuple[float, str, list[str]]:
    if len(heights) < 2 or not heights["count"].iloc[0]:
        warning = (
            f"Speed is measured at {main.height_m:g} m only; the exponent of one seventh is an "
            "assumption with a wide band. A second height would measure it."
        )
        return EXPONENT_WITHOUT_PROFILE, "assumed: seventh-root law, common practice", [warning]
    exponent = float(fit_shear(heights["mean_speed_m_s"], heights["height_m"]))
    told = ", ".join(f"{height:g}" for height in heights["height_m"])
    basis = f"power law through the means at {told} m, {heights['count'].iloc[0]:,} intervals"
    return exponent, basis, []


def _pair(
    record: Record, study: Study, main: ChannelSettings
) -> tuple[pd.DataFrame, dict[str, float]]:
    """Main cup over the other at its height, by direction; empty if there is no other."""
    others = [
        channel
        for channel in record.settings.mean_speeds
        if channel.height_m == main.height_m and channel.name != main.name
    ]
    named = [channel for channel in others if channel.name == study.settings.measured.main_pair]
    empty = pd.DataFrame({"direction": [], "ratio": [], "count": []}, dtype=float)
    if not others:
        return empty, {}
    other = (named or others)[0]
    table = pair_ratio(record.reading, main, other).dropna(subset="ratio")
    booms = {
        channel.name: channel.boom_bearing_deg
        for channel in (main, other)
        if channel.boom_bearing_deg is not None
    }
    return table if len(table) else empty, booms


def _readable(spans: pd.DataFrame) -> pd.DataFrame:
    """Spans with their stamps as text, to the minute, UTC."""
    table = spans.copy()
    for name in ("from", "to"):
        table[name] = table[name].dt.strftime("%Y-%m-%d %H:%M")
    return table


def _thresholds(study: Study) -> pd.DataFrame:
    """Every threshold of the checks with its value, source, and whether the study set it."""
    checks = study.settings.checks
    rows = [
        (name, str(getattr(checks, name)), field.description or "", name in checks.model_fields_set)
        for name, field in type(checks).model_fields.items()
    ]
    return pd.DataFrame(rows, columns=["threshold", "value", "source", "set_by_study"])
