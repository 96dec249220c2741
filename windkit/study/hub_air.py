"""Air at hub height: density by time step, filled where a sensor is missing, and by month.

Density comes from temperature, pressure and humidity carried to the hub. What the mast does not
know is taken from the reference, then from the mast's own habit, then from the standard
atmosphere, and counted. The formulas are in `kernels.air`; wind is in `hub`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.air import (
    STANDARD_LAPSE_RATE,
    standard_atmosphere,
)
from windkit.study.borrowed_air import (
    HUMIDITY_WITHOUT_SENSOR,
    at_mast_level,
    cross_check,
    density_by_step,
    highest_channel,
    hourly,
    reference_density,
)
from windkit.study.settings import ReferenceSettings, Settings
from windkit.study.stations import ChannelSettings

__all__ = ["HubAir", "hub_air"]

Array = NDArray[np.float64]

#: How far the mast's density may lie from the reference's before it is told [1], our choice: two
#: barometers of 1 hPa and thermometers of 1 K differ by half of it.
_NOTABLE_DIFFERENCE = 0.01
#: Share of its hours from which a calendar month speaks for itself [1], our choice.
_HALF_A_MONTH = 0.5
_DAYS = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])
_MEASURED, _REFERENCE, _HABIT, _STANDARD, _ASSUMED = (
    "measured at the mast",
    "reference, brought to the mast's level",
    "mean of the mast's own hours of that month and time of day",
    "standard atmosphere",
    "assumed",
)


@dataclass(frozen=True)
class HubAir:
    """Air at hub height above the mast.

    Attributes
    ----------
    density : ndarray
        By step of the record [kg/m3].
    climatology : DataFrame, shape (12, 24)
        Mean density by month and hour in UTC [kg/m3], every cell filled.
    mean : float
        Mean of calendar months [kg/m3].
    basis : str
        How it came about.
    monthly : DataFrame
        One row a calendar month: density, temperature, pressure, humidity at the hub, density
        from the reference where it can be had, ratio of both, hours.
    sources : DataFrame
        Share of the record's steps by quantity and where its value came from [1].
    temperature : Series
        Hourly temperature at the hub over the reference's period [K], brought to the mast's
        level; empty where the reference has none.
    said : str
    warnings : list of str
    reference : str
        Name of the reference it is held against.
    """

    density: Array
    climatology: pd.DataFrame
    mean: float
    basis: str
    monthly: pd.DataFrame
    sources: pd.DataFrame
    temperature: pd.Series
    said: str
    warnings: list[str]
    reference: str = ""

    def at(self, index: pd.DatetimeIndex) -> Array:
        """Density of each hour by its month and time of day [kg/m3]."""
        return self.climatology.to_numpy()[index.month.to_numpy() - 1, index.hour.to_numpy()]


def hub_air(
    settings: Settings,
    record: pd.DataFrame,
    reference: pd.DataFrame | None = None,
    station: ReferenceSettings | None = None,
) -> HubAir:
    """Air at hub height above the mast, by step of the record and by month.

    Parameters
    ----------
    settings : Settings
        Of the study.
    record : DataFrame
        The checked record, on the starts of its intervals.
    reference : DataFrame, optional
        From `borrowed_air.reference_air`.
    station : ReferenceSettings, optional
        The reference it is from; the first of the study if left out.

    Returns
    -------
    HubAir
    """
    site, mast, hub = settings.site, settings.mast, settings.turbine.hub_height_m
    index = record.index
    assert isinstance(index, pd.DatetimeIndex)
    known = reference if reference is not None else pd.DataFrame(index=index[:0])
    channels = {
        quantity: highest_channel(mast, quantity, record)
        for quantity in ("air_temperature", "air_pressure", "relative_humidity")
    }
    heights = {
        quantity: channel.height_m if channel is not None else hub
        for quantity, channel in channels.items()
    }
    standard = standard_atmosphere(site.elevation_m + heights["air_temperature"])[0]
    standard_pressure = standard_atmosphere(site.elevation_m + heights["air_pressure"])[1]
    last = {
        "air_temperature": (float(standard), _STANDARD),
        "air_pressure": (float(standard_pressure), _STANDARD),
        "relative_humidity": (HUMIDITY_WITHOUT_SENSOR, _ASSUMED),
    }
    filled, sources, levels = {}, [], {}
    place = station or settings.references[0]
    for quantity, channel in channels.items():
        own = record[channel.name].to_numpy(dtype=float) if channel else np.full(len(index), np.nan)
        borrowed = at_mast_level(
            pd.Series(own, index=index), known, quantity, place, settings, heights[quantity]
        )
        levels[quantity] = borrowed
        filled[quantity], source = _fill(own, borrowed, index, quantity, last[quantity])
        sources.append(source)
    known_steps = [
        there
        for there in (
            _known(record, channels[quantity], levels[quantity])
            for quantity in ("air_temperature", "air_pressure")
        )
        if there.any()
    ]
    density, temperature, pressure = density_by_step(
        filled["air_temperature"],
        filled["air_pressure"],
        np.clip(filled["relative_humidity"], 0.0, 1.0),
        temperature_height=heights["air_temperature"],
        pressure_height=heights["air_pressure"],
        hub_height=hub,
    )
    borrowed_any = len(levels["air_temperature"]) or len(levels["air_pressure"])
    if channels["air_temperature"] is channels["air_pressure"] is None and not borrowed_any:
        # Nothing measured anywhere: the standard atmosphere whole, which is dry.
        density = np.full(len(index), float(standard_atmosphere(site.elevation_m + hub)[2]))
    ours = hourly(index, density)
    theirs = reference_density(levels, heights, hub)
    thin = np.zeros(12, dtype=bool)
    if known_steps:
        month_of = index.month.to_numpy()[known_steps[0]] - 1
        in_month = np.bincount(month_of, minlength=12) * mast.interval_min / 60.0
        thin = in_month < _HALF_A_MONTH * 24.0 * _DAYS
    climatology, filled_months = _climatology(
        index, density, ours, theirs, thin, float(standard_atmosphere(site.elevation_m + hub)[2])
    )
    monthly = _monthly(index, density, temperature, pressure, filled["relative_humidity"])
    monthly = monthly.merge(cross_check(settings, ours, known, place), how="left", on="month")
    table = pd.concat(sources, ignore_index=True)
    mean = float(climatology.to_numpy().mean(axis=1).mean())
    warm = levels["air_temperature"] - STANDARD_LAPSE_RATE * (hub - heights["air_temperature"])
    warnings = _warnings(monthly, place.name)
    standard_months = int(thin.sum()) - filled_months
    if thin.any():
        others = [
            f"{count} from {source}"
            for count, source in (
                (filled_months, place.name), (standard_months, "the standard atmosphere")
            )
            if count
        ]  # fmt: skip
        warnings.append(
            f"Air is known for {12 - int(thin.sum())} of 12 calendar months by half of their hours "
            f"or more; density of the other months: {', '.join(others)}."
        )
    return HubAir(
        density=density,
        climatology=climatology,
        mean=mean,
        basis=_basis(channels, table, hub, int((~thin).sum()), filled_months, standard_months),
        monthly=monthly,
        sources=table,
        temperature=warm.rename("temperature"),
        said=_said(mean, climatology, monthly, table, place),
        warnings=warnings,
        reference=place.name,
    )


def _fill(
    own: Array,
    borrowed: pd.Series,
    index: pd.DatetimeIndex,
    quantity: str,
    last: tuple[float, str],
) -> tuple[Array, pd.DataFrame]:
    values = own.copy()
    counts = {_MEASURED: int(np.isfinite(values).sum())}

    def take(candidate: Array, name: str) -> None:
        wanted = ~np.isfinite(values) & np.isfinite(candidate)
        values[wanted] = candidate[wanted]
        counts[name] = counts.get(name, 0) + int(wanted.sum())

    if len(borrowed) and not np.isfinite(values).all():
        take(borrowed.reindex(index.floor("h")).to_numpy(dtype=float), _REFERENCE)
    if counts[_MEASURED] and not np.isfinite(values).all():
        # Only the mast's own values make its habit.
        habit = np.full((13, 24), np.nan)
        month, hour = index.month.to_numpy(), index.hour.to_numpy()
        cell = month * 24 + hour
        there = np.isfinite(own)
        n = np.bincount(cell[there], minlength=13 * 24)
        total = np.bincount(cell[there], own[there], minlength=13 * 24)
        with np.errstate(invalid="ignore", divide="ignore"):
            habit = (total / n).reshape(13, 24)
        take(habit[month, hour], _HABIT)
        take(np.full(len(values), float(np.nanmean(own))), _HABIT)
    take(np.full(len(values), last[0]), last[1])
    table = pd.DataFrame(
        {
            "quantity": quantity,
            "source": list(counts),
            "share": [count / len(values) for count in counts.values()],
        }
    )
    return values, table[table["share"] > 0]


def _known(
    record: pd.DataFrame, channel: ChannelSettings | None, borrowed: pd.Series
) -> NDArray[np.bool_]:
    """Steps whose value the mast or the reference has, no habit and no standard."""
    there = np.zeros(len(record), dtype=bool)
    if channel is not None:
        there |= record[channel.name].notna().to_numpy()
    if len(borrowed):
        index = record.index
        assert isinstance(index, pd.DatetimeIndex)
        there |= borrowed.reindex(index.floor("h")).notna().to_numpy()
    return there


def _climatology(
    index: pd.DatetimeIndex,
    density: Array,
    ours: pd.Series,
    theirs: pd.Series,
    thin: NDArray[np.bool_],
    standard: float,
) -> tuple[pd.DataFrame, int]:
    """Mean density by month and hour; thin months from the reference, else the standard's."""
    month, hour = index.month.to_numpy(), index.hour.to_numpy()
    cell = (month - 1) * 24 + hour
    count = np.bincount(cell, minlength=288).reshape(12, 24)
    total = np.bincount(cell, density, minlength=288).reshape(12, 24)
    with np.errstate(invalid="ignore", divide="ignore"):
        table = total / count
    table[thin] = np.nan
    filled = 0
    whole = np.isfinite(table).all(axis=1)
    if not whole.all() and len(theirs):
        both = pd.DataFrame({"ours": ours, "theirs": theirs}).dropna()
        ratio = float(both["ours"].mean() / both["theirs"].mean()) if len(both) else 1.0
        assert isinstance(theirs.index, pd.DatetimeIndex)
        by_cell = theirs.groupby([theirs.index.month, theirs.index.hour]).mean() * ratio
        other = by_cell.unstack().reindex(index=range(1, 13), columns=range(24)).to_numpy()  # noqa: PD010
        gaps = ~np.isfinite(table)
        filled = int((gaps.all(axis=1) & np.isfinite(other).any(axis=1)).sum())
        table = np.where(gaps, other, table)
    table[thin & ~np.isfinite(table).any(axis=1)] = standard
    # What is left takes the mean of its month, then that of the months that are known.
    with np.errstate(invalid="ignore"):
        known = np.isfinite(table)
        of_month = np.where(
            known.any(axis=1),
            np.where(known, table, 0.0).sum(axis=1) / np.maximum(known.sum(axis=1), 1),
            np.nan,
        )
    of_month = np.where(np.isfinite(of_month), of_month, np.nanmean(of_month))
    table = np.where(known, table, of_month[:, None])
    return (
        pd.DataFrame(table, index=pd.RangeIndex(1, 13, name="month"), columns=range(24)),
        filled,
    )


def _monthly(
    index: pd.DatetimeIndex, density: Array, temperature: Array, pressure: Array, humidity: Array
) -> pd.DataFrame:
    frame = pd.DataFrame(
        {
            "air_density_kg_m3": density,
            "temperature_c": temperature - 273.15,
            "pressure_hpa": pressure / 100.0,
            "relative_humidity": humidity,
        },
        index=index,
    )
    by_month = frame.groupby(index.month)
    table = by_month.mean()
    table["count"] = by_month.size()
    table.index.name = "month"
    return table.reset_index()


def _warnings(monthly: pd.DataFrame, name: str) -> list[str]:
    ratio = monthly["mast_over_reference"].to_numpy(dtype=float)
    off = np.abs(ratio - 1.0) > _NOTABLE_DIFFERENCE
    if not off.any():
        return []
    worst = int(np.nanargmax(np.abs(ratio - 1.0)))
    return [
        f"Air density at the mast and from {name} differ by more than {_NOTABLE_DIFFERENCE:.0%} in "
        f"{int(off.sum())} of {np.isfinite(ratio).sum()} months, most in month "
        f"{int(monthly['month'].iloc[worst])} ({ratio[worst] - 1:+.1%}): look at the thermometer "
        "and the barometer of both."
    ]


def _basis(
    channels: dict[str, ChannelSettings | None],
    sources: pd.DataFrame,
    hub: float,
    months: int,
    filled_months: int,
    standard_months: int,
) -> str:
    names = {
        "air_temperature": "temperature",
        "air_pressure": "pressure",
        "relative_humidity": "humidity",
    }
    measured = [names[quantity] for quantity, channel in channels.items() if channel is not None]
    if sources["source"].isin([_STANDARD, _ASSUMED]).all():
        return "standard atmosphere (ISO 2533): temperature and pressure are not measured"
    told = ", ".join(measured) or "nothing"
    text = f"IEC 61400-12-1 from measured {told}, carried to {hub:g} m"
    other = sorted(set(sources["source"]) - {_MEASURED})
    if other:
        text += f"; the rest from: {', '.join(other)}"
    text += f"; mean of {months} calendar months"
    text += f" and {filled_months} from the reference" if filled_months else ""
    return text + (f" and {standard_months} of the standard atmosphere" if standard_months else "")


def _said(
    mean: float,
    climatology: pd.DataFrame,
    monthly: pd.DataFrame,
    sources: pd.DataFrame,
    place: ReferenceSettings,
) -> str:
    of_month = climatology.mean(axis=1).to_numpy()
    low, high = int(of_month.argmin()), int(of_month.argmax())
    text = f"The air at the hub weighs {mean:.3f} kg/m³ in the mean of the months"
    if f"{of_month[low]:.3f}" != f"{of_month[high]:.3f}":
        text += (
            f", between {of_month[low]:.3f} in month {low + 1} and {of_month[high]:.3f} in month "
            f"{high + 1}"
        )
    text += "."
    ratio = monthly["mast_over_reference"].dropna()
    if len(ratio):
        how = (
            "carried to the hub"
            if place.elevation_m is not None
            else "brought to the hub by the mean ratio of both, its elevation not being declared"
        )
        text += (
            f" Against {place.name}, {how}, months lie between {ratio.min() - 1:+.2%} and "
            f"{ratio.max() - 1:+.2%}."
        )
    borrowed = sources[sources["source"] != _MEASURED]
    if len(borrowed):
        told = "; ".join(
            f"{str(quantity).replace('_', ' ')}: {share:.1%} {source}"
            for quantity, source, share in borrowed.itertuples(index=False, name=None)
        )
        text += f" Not measured at the mast: {told}."
    return text
