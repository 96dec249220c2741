"""Step 2, measured data: from the client's files to a checked record and what it says.

The files are read once, checked, masked through the ledger and summed up: rows reconciled,
recovery, profile, turbulence, wind climate of the campaign. Nothing here looks beyond the
campaign; that is the next step.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.frequency import FrequencyTable, frequency_table
from windkit.kernels.profile import fit_shear
from windkit.kernels.weibull import WeibullFit, fit_weibull
from windkit.study.artifacts import Outcome, Row
from windkit.study.folder import Study
from windkit.study.ledger import AUTOMATIC, read_ledger
from windkit.study.reading import read_station
from windkit.study.record import Record, build_record
from windkit.study.stations import ChannelSettings, StationSettings
from windkit.study.unit_slips import refuse_unit_slips

__all__ = ["Measured", "examine_record", "load_record"]

#: Recovery under which guidelines ask for a word [1]: Bailey et al. 1997 (id MEA-10, from memory).
EXPECTED_RECOVERY = 0.9
#: Exponent where only one height is measured [1]: the seventh-root law, common practice for flat
#: open land; a warning goes with it.
EXPONENT_WITHOUT_PROFILE = 1 / 7
#: Fewest intervals for a turbulence figure of a speed bin, our choice.
LEAST_IN_TURBULENCE_BIN = 6
#: Normal quantile of the representative turbulence: the 90 % value of IEC 61400-1.
_REPRESENTATIVE_QUANTILE = 1.28
#: Fewest days of values for a month to be drawn, our choice.
LEAST_DAYS_OF_MONTH = 5
#: Least speed for a ratio of two cups [m/s]: below it starting speeds matter. Common practice.
_LEAST_SPEED_FOR_RATIO = 4.0
_DIRECTION_BIN = 10.0
_MINUTES_PER_DAY = 24 * 60
_MINUTES_PER_YEAR = 365.25 * _MINUTES_PER_DAY


@dataclass(frozen=True)
class Measured:
    """What the record says; `outcome` is what is written.

    Attributes
    ----------
    rows_table : DataFrame
        Rows of the files by what became of them.
    spans : DataFrame
        The ledger: automatic spans first, then the decisions of people.
    recovery : DataFrame
        Share of believed values [1], one row a month, one column a mean channel.
    pair_ratio : DataFrame
        Ratio of the two cups at the main height by direction; empty without a second cup.
    booms : dict of str to float
        Boom bearings of those two cups [deg].
    main_speed, main_direction : ndarray
        Believed values of the main channels [m/s], [deg].
    frequency : FrequencyTable
        Of the main channels.
    weibull : WeibullFit
        Of the main speed.
    diurnal, monthly : DataFrame
        Mean speeds by hour of the day (UTC) and by month [m/s].
    heights : DataFrame
        Mean speed by height over the intervals all heights share [m/s].
    turbulence : DataFrame
        Turbulence intensity by speed: mean, representative, count.
    outcome : Outcome
        Figures of merit, tables, what was found and warnings.
    """

    rows_table: pd.DataFrame
    spans: pd.DataFrame
    recovery: pd.DataFrame
    pair_ratio: pd.DataFrame
    booms: dict[str, float]
    main_speed: NDArray[np.float64]
    main_direction: NDArray[np.float64]
    frequency: FrequencyTable
    weibull: WeibullFit
    diurnal: pd.DataFrame
    monthly: pd.DataFrame
    heights: pd.DataFrame
    turbulence: pd.DataFrame
    outcome: Outcome


def load_record(study: Study) -> Record:
    """Read the mast's files, run the checks and apply the ledger."""
    reading = read_station(study.settings.mast, study.folder)
    refuse_unit_slips(reading)
    return build_record(reading, study.settings.checks, read_ledger(study.ledger))


def examine_record(study: Study, record: Record) -> Measured:
    """Sum up a checked record.

    Returns
    -------
    Measured
    """
    settings = study.settings.mast
    main = settings.channel(settings.main_wind_speed)
    frame = record.frame
    index = frame.index
    assert isinstance(index, pd.DatetimeIndex)
    speed = frame[main.name].to_numpy()
    direction = (
        frame[settings.main_wind_direction].to_numpy()
        if settings.main_wind_direction
        else np.full(len(frame), np.nan)
    )
    speeds = settings.mean_speeds
    names = [channel.name for channel in speeds]
    monthly_mean = frame[main.name].groupby(index.month).mean()
    recovery = _recovery(record, settings)
    share = float(np.isfinite(speed).sum() / record.reading.expected_count)
    heights = _heights(frame, speeds, main)
    exponent, exponent_basis, warnings = _exponent(heights, main)
    pair, booms = _pair_ratio(frame, settings, main)
    turbulence = _turbulence(frame, settings, main)
    # A calm lies below the threshold, as where its direction is taken out; kernels include it.
    highest_calm = float(np.nextafter(settings.calm_below_m_s, 0.0))
    frequency = frequency_table(
        speed,
        direction,
        sector_count=study.settings.long_term.sector_count,
        calm_threshold=highest_calm,
    )
    weibull = fit_weibull(speed, calm_threshold=highest_calm)
    years = record.reading.expected_count * settings.interval_min / _MINUTES_PER_YEAR
    plain, seasonal = float(np.nanmean(speed)), float(monthly_mean.mean())
    if len(monthly_mean) < 12:
        warnings.append(
            f"The campaign covers {len(monthly_mean)} of 12 calendar months: its mean is not that "
            "of a year."
        )
    elif abs(seasonal / plain - 1) > 0.01:
        warnings.append(
            f"The plain mean is {plain:.2f} m/s and the mean of calendar months {seasonal:.2f}: "
            "months are represented unequally."
        )
    if share < EXPECTED_RECOVERY:
        warnings.append(
            f"Recovery of {main.name} is {share:.1%}; {EXPECTED_RECOVERY:.0%} is expected."
        )
    rows = [
        Row(
            "measured.mean_speed_m_s", "Mean wind speed of the campaign", plain, "m/s",
            f"channel {main.name} at {main.height_m:g} m, believed values",
        ),
        Row(
            "measured.mean_of_months_m_s", "Mean of calendar-month means", seasonal, "m/s",
            f"{len(monthly_mean)} calendar months, each weighing the same",
        ),
        Row(
            "measured.recovery", "Recovery", share, "1",
            f"believed values of {main.name} over {record.reading.expected_count:,} intervals",
            as_percent=True,
        ),
        Row(
            "measured.years", "Length of the campaign", years, "years",
            f"{index[0]:%Y-%m-%d} to {index[-1]:%Y-%m-%d}, UTC",
        ),
        Row("measured.height_m", "Height of the main channel", main.height_m, "m", "study.toml"),
        Row("measured.channel", "Main channel", main.name, "", "study.toml"),
        Row("measured.shear_exponent", "Shear exponent", exponent, "1", exponent_basis),
        Row(
            "measured.calm_share", "Share of calms", frequency.calm_share, "1",
            f"speed below {settings.calm_below_m_s:g} m/s; counted in every total",
            as_percent=True,
        ),
        Row(
            "measured.weibull_A_m_s", "Weibull scale A", weibull.weibull_scale, "m/s",
            "maximum likelihood, calms as a point mass; for description, not for energy",
        ),
        Row("measured.weibull_k", "Weibull shape k", weibull.weibull_shape, "1", "same fit"),
    ]  # fmt: skip
    near_15 = turbulence[turbulence["wind_speed_m_s"] == 15.0]
    if len(near_15):
        rows.append(
            Row(
                "measured.turbulence_intensity_15", "Turbulence intensity at 15 m/s",
                float(near_15["mean"].iloc[0]), "1",
                f"mean of {int(near_15['count'].iloc[0])} intervals of 14.5 to 15.5 m/s, no trend "
                "removed", as_percent=True,
            )
        )  # fmt: skip
    rows_table = _rows_table(record)
    spans = record.ledger.copy()
    spans["from"] = spans["from"].dt.strftime("%Y-%m-%d %H:%M")
    spans["to"] = spans["to"].dt.strftime("%Y-%m-%d %H:%M")
    hour = index + pd.Timedelta(minutes=settings.interval_min / 2)
    said = _said(record, main, share, pair, plain, seasonal, weibull, exponent, turbulence)
    return Measured(
        rows_table=rows_table,
        spans=spans,
        recovery=recovery,
        pair_ratio=pair,
        booms=booms,
        main_speed=speed,
        main_direction=direction,
        frequency=frequency,
        weibull=weibull,
        diurnal=frame[names].groupby(hour.hour).mean(),
        monthly=_monthly(frame[names], index, settings.interval_min),
        heights=heights,
        turbulence=turbulence,
        outcome=Outcome(
            "measure",
            rows,
            {
                "record": record.masked,
                "rows": rows_table,
                "set_aside": record.reading.set_aside.astype(str),
                "ledger": spans,
                "counts": record.counts,
                "recovery": record.recovery,
                "heights": heights,
                "turbulence": turbulence,
            },
            said,
            warnings,
        ),
    )


def _recovery(record: Record, settings: StationSettings) -> pd.DataFrame:
    """Months by channels, after masking, for the channels that hold means."""
    means = [channel.name for channel in settings.channels if channel.statistic == "mean"]
    table = record.recovery[record.recovery["channel"].isin(means)]
    return table.pivot_table(index="month", columns="channel", values="after")[means]


def _monthly(frame: pd.DataFrame, index: pd.DatetimeIndex, interval_min: float) -> pd.DataFrame:
    """Mean by calendar month, where there are values for a few days of it at least."""
    by_month = frame.groupby(index.month)
    days = by_month.count() * interval_min / _MINUTES_PER_DAY
    return by_month.mean().where(days >= LEAST_DAYS_OF_MONTH)


def _rows_table(record: Record) -> pd.DataFrame:
    reading = record.reading
    rows = [("read from the files", reading.rows_read), ("kept", reading.rows_kept)]
    rows += [
        (f"set aside: {reason}", int(count))
        for reason, count in reading.set_aside["reason"].value_counts().items()
    ]
    absent = reading.expected_count - reading.rows_kept
    rows.append(("intervals between first and last without a row", absent))
    return pd.DataFrame(rows, columns=["rows", "count"])


def _heights(
    frame: pd.DataFrame, speeds: list[ChannelSettings], main: ChannelSettings
) -> pd.DataFrame:
    """Mean speed by height over the intervals in which every height has a believed speed.

    One cup a height: the main one at its own height, else the first that is declared.
    """
    by_height: dict[float, ChannelSettings] = {main.height_m: main}
    for channel in speeds:
        by_height.setdefault(channel.height_m, channel)
    chosen = [by_height[height] for height in sorted(by_height, reverse=True)]
    shared = frame[[channel.name for channel in chosen]].dropna()
    return pd.DataFrame(
        {
            "channel": [channel.name for channel in chosen],
            "height_m": [channel.height_m for channel in chosen],
            "mean_speed_m_s": shared.mean().to_numpy(),
            "count": len(shared),
        }
    )


def _exponent(heights: pd.DataFrame, main: ChannelSettings) -> tuple[float, str, list[str]]:
    if len(heights) < 2 or not heights["count"].iloc[0]:
        return (
            EXPONENT_WITHOUT_PROFILE,
            "assumed: the seventh-root law, common practice",
            [
                f"Speed is measured at {main.height_m:g} m only; the exponent of one seventh is an "
                "assumption with a wide band. A second height would measure it."
            ],
        )
    exponent = float(fit_shear(heights["mean_speed_m_s"], heights["height_m"]))
    told = ", ".join(f"{height:g}" for height in heights["height_m"])
    return (
        exponent,
        (f"power law through the means at {told} m, {heights['count'].iloc[0]:,} shared intervals"),
        [],
    )


def _pair_ratio(
    frame: pd.DataFrame, settings: StationSettings, main: ChannelSettings
) -> tuple[pd.DataFrame, dict[str, float]]:
    """Main cup over the other at its height, by direction; empty if there is no other."""
    others = [
        channel
        for channel in settings.mean_speeds
        if channel.height_m == main.height_m and channel.name != main.name
    ]
    empty = pd.DataFrame({"direction": [], "ratio": [], "count": []}, dtype=float)
    if not others or settings.main_wind_direction is None:
        return empty, {}
    other = others[0]
    both = frame[[main.name, other.name, settings.main_wind_direction]].dropna()
    both = both[(both[main.name] >= _LEAST_SPEED_FOR_RATIO) & (both[other.name] > 0)]
    bearing = both[settings.main_wind_direction]
    centre = (np.round(bearing / _DIRECTION_BIN) * _DIRECTION_BIN) % 360
    sums = both[[main.name, other.name]].groupby(centre).agg(["sum", "count"])
    table = pd.DataFrame(
        {
            "direction": sums.index.to_numpy(dtype=float),
            "ratio": (sums[(main.name, "sum")] / sums[(other.name, "sum")]).to_numpy(),
            "count": sums[(main.name, "count")].to_numpy(),
        }
    )
    booms = {
        channel.name: channel.boom_bearing_deg
        for channel in (main, other)
        if channel.boom_bearing_deg is not None
    }
    return table, booms


def _turbulence(
    frame: pd.DataFrame, settings: StationSettings, main: ChannelSettings
) -> pd.DataFrame:
    """Standard deviation over mean by whole metre per second of the main channel."""
    columns = ["wind_speed_m_s", "mean", "representative", "count"]
    spread = next(
        (
            channel
            for channel in settings.channels
            if channel.quantity == "wind_speed"
            and channel.statistic == "sd"
            and channel.height_m == main.height_m
            and channel.boom_bearing_deg == main.boom_bearing_deg
        ),
        None,
    )
    if spread is None:
        return pd.DataFrame(columns=columns, dtype=float)
    both = frame[[main.name, spread.name]].dropna()
    both = both[both[main.name] >= 1.0]
    intensity = both[spread.name] / both[main.name]
    by_bin = intensity.groupby(np.floor(both[main.name] + 0.5))
    table = pd.DataFrame({"mean": by_bin.mean(), "sd": by_bin.std(ddof=1), "count": by_bin.size()})
    table = table[table["count"] >= LEAST_IN_TURBULENCE_BIN]
    table["representative"] = table["mean"] + _REPRESENTATIVE_QUANTILE * table["sd"]
    table.index.name = "wind_speed_m_s"
    return table.reset_index()[columns]


def _said(
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
    reading, ledger = record.reading, record.ledger
    aside = len(reading.set_aside)
    masked = record.counts.set_index("channel")["masked"]
    people = int((ledger["who"] != AUTOMATIC).sum())
    said = {
        "rows": f"{reading.rows_read:,} rows were read: {reading.rows_kept:,} kept and {aside:,} "
        f"set aside, which adds up. {reading.expected_count - reading.rows_kept:,} intervals "
        "between the first and the last have no row.",
        "spans": f"{len(ledger)} spans are in the ledger, {people} of them decided by people. They "
        f"mask {int(masked[main.name]):,} values of {main.name}.",
        "recovery": f"Recovery of {main.name} after masking is {share:.1%}.",
        "climate": f"{main.name} has a mean of {plain:.2f} m/s, and {seasonal:.2f} m/s when each "
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
