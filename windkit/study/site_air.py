"""Temperature and icing of the site: how cold, how warm, for how many hours of a year.

The mast's own months are told, and the reference's whole period where it has a thermometer, since
one winter says little about the coldest one. Icing hours are a mark from temperature and humidity,
not a measurement of ice. Density is in `hub_air`.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.air import STANDARD_LAPSE_RATE
from windkit.kernels.constants import ZERO_CELSIUS
from windkit.study.artifacts import Row
from windkit.study.settings import Settings

__all__ = ["COLD_LIMIT_C", "SiteAir", "months_covered", "site_air"]

Array = NDArray[np.float64]

#: Limit below which hours and days are counted [degC]: the form of IEC 61400-15-1.
COLD_LIMIT_C = -20.0
#: Air in which ice grows on a cup or a blade: freezing, and nearly saturated. Common practice.
_ICING_BELOW_C, _ICING_HUMIDITY = 0.0, 0.95
#: Whole degrees of the temperature table, both ends open [degC]: the form of IEC 61400-15-1.
_LOWEST_BIN, _HIGHEST_BIN = -40, 50
_HOURS_PER_YEAR = 8766.0
#: Share of its hours from which a calendar month counts [1], our choice.
_HALF_A_MONTH = 0.5
_MONTHS = 12
_MAST = "mast, campaign"


@dataclass(frozen=True)
class SiteAir:
    """Temperature at the hub.

    Attributes
    ----------
    table : DataFrame
        One row a source: mean, lowest, highest, 1 and 99 % values [degC], hours and days a year
        below the cold limit, hours in the table.
    frequency : DataFrame
        Share of time by whole degree, one column a source [1].
    lowest_c, highest_c : float or None
        Lowest and highest hour of all sources [degC]; None if no source covers all twelve
        calendar months.
    why_not : str
        Why they are not assessed.
    icing_hours : float or None
        Hours a year, each calendar month weighing the same; None without a humidity sensor.
    rows : list of Row
    said : str
    warnings : list of str
    """

    table: pd.DataFrame
    frequency: pd.DataFrame
    lowest_c: float | None
    highest_c: float | None
    icing_hours: float | None
    rows: list[Row]
    said: str
    why_not: str = ""
    warnings: list[str] = field(default_factory=list)


def site_air(
    settings: Settings, record: pd.DataFrame, long_term: pd.Series, *, hub_height: float
) -> SiteAir:
    """Temperature and icing hours from the mast's record and the reference.

    Parameters
    ----------
    settings : Settings
        Of the study.
    record : DataFrame
        The checked record.
    long_term : Series
        Hourly temperature of the reference brought to the hub above the mast [K]; may be empty.
    hub_height : float
        The height the yield step used [m].
    """
    thermometer = _highest(settings, "air_temperature", record)
    hygrometer = _highest(settings, "relative_humidity", record)
    sources: dict[str, pd.Series] = {}
    if thermometer is not None:
        name, height = thermometer
        kelvin = record[name] - STANDARD_LAPSE_RATE * (hub_height - height)
        sources[_MAST] = _hourly(kelvin) - ZERO_CELSIUS
    if len(long_term):
        sources["reference, brought to the mast's level"] = long_term.dropna() - ZERO_CELSIUS
    sources = {name: values for name, values in sources.items() if len(values)}
    icing = None
    if thermometer is not None and hygrometer is not None:
        icing = _icing_hours(
            record[thermometer[0]] - STANDARD_LAPSE_RATE * (hub_height - thermometer[1]),
            record[hygrometer[0]],
        )
    months = {name: int(months_covered(values.index).sum()) for name, values in sources.items()}
    if icing is not None and months.get(_MAST, 0) < _MONTHS:
        icing = None  # some months say nothing of a year's ice
    table = pd.DataFrame([_line(name, values) for name, values in sources.items()])
    most = max(months.values(), default=0)
    whole_year = most == _MONTHS
    lowest = float(table["lowest_c"].min()) if whole_year else None
    highest = float(table["highest_c"].max()) if whole_year else None
    why_not, warnings = "no temperature at the mast or from the reference", []
    if len(table) and not whole_year:
        why_not = f"temperature of {most} of 12 calendar months only"
        warnings.append(
            f"Temperature covers {most} of 12 calendar months by half of their hours or more; it "
            "is not held against any limit, and hours of cold and ice are not scaled to a year. A "
            "reference with a thermometer would fill the year."
        )
    return SiteAir(
        table=table,
        frequency=_frequency(sources),
        lowest_c=lowest,
        highest_c=highest,
        icing_hours=icing,
        rows=_rows(table, icing, whole_year=whole_year),
        said=_said(table, icing, hygrometer is not None, whole_year=whole_year),
        why_not=why_not,
        warnings=warnings,
    )


def months_covered(index: pd.Index) -> NDArray[np.bool_]:
    """Which of twelve calendar months have half of their hours, from hourly stamps."""
    assert isinstance(index, pd.DatetimeIndex)
    days = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])
    count = np.bincount(index.month.to_numpy() - 1, minlength=_MONTHS)
    return np.asarray(count >= _HALF_A_MONTH * 24 * days)


def _highest(settings: Settings, quantity: str, record: pd.DataFrame) -> tuple[str, float] | None:
    found = [
        (channel.name, channel.height_m)
        for channel in settings.mast.channels
        if channel.quantity == quantity
        and channel.statistic == "mean"
        and channel.name in record
        and record[channel.name].notna().any()
    ]
    return max(found, key=lambda each: each[1], default=None)


def _hourly(values: pd.Series) -> pd.Series:
    return values.resample("1h").mean().dropna()


def _line(name: str, celsius: pd.Series) -> dict[str, object]:
    index = celsius.index
    assert isinstance(index, pd.DatetimeIndex)
    cold = celsius < COLD_LIMIT_C
    # Months first, so that a campaign of one winter and two summers is not taken for a warm place.
    share = float(cold.groupby(index.month).mean().mean())
    by_day = cold.groupby(index.floor("D")).any()
    assert isinstance(by_day.index, pd.DatetimeIndex)
    days = float(by_day.groupby(by_day.index.month).mean().mean()) * 365.25
    if not months_covered(index).all():
        share = days = np.nan  # some months say nothing of a year
    return {
        "source": name,
        "mean_c": float(celsius.groupby(index.month).mean().mean()),
        "lowest_c": float(celsius.min()),
        "low_1_percent_c": float(celsius.quantile(0.01)),
        "high_99_percent_c": float(celsius.quantile(0.99)),
        "highest_c": float(celsius.max()),
        "hours_below_cold_limit_per_year": share * _HOURS_PER_YEAR,
        "days_below_cold_limit_per_year": days,
        "months": int(months_covered(index).sum()),
        "hours": len(celsius),
    }


def _frequency(sources: dict[str, pd.Series]) -> pd.DataFrame:
    degrees = np.arange(_LOWEST_BIN, _HIGHEST_BIN + 1)
    columns = {}
    for name, celsius in sources.items():
        at = np.clip(np.floor(celsius.to_numpy() + 0.5), _LOWEST_BIN, _HIGHEST_BIN)
        count = np.bincount((at - _LOWEST_BIN).astype(np.intp), minlength=degrees.size)
        columns[name] = count / count.sum()
    return pd.DataFrame(columns, index=pd.Index(degrees, name="temperature_c"))


def _icing_hours(kelvin: pd.Series, humidity: pd.Series) -> float | None:
    both = pd.DataFrame({"t": kelvin - ZERO_CELSIUS, "rh": humidity}).dropna()
    if both.empty:
        return None
    assert isinstance(both.index, pd.DatetimeIndex)
    ice = (both["t"] <= _ICING_BELOW_C) & (both["rh"] >= _ICING_HUMIDITY)
    return float(ice.groupby(both.index.month).mean().mean()) * _HOURS_PER_YEAR


def _rows(table: pd.DataFrame, icing: float | None, *, whole_year: bool) -> list[Row]:
    rows: list[Row] = []
    if len(table):
        longest = table.iloc[int(table["hours"].to_numpy().argmax())]
        basis = f"{longest['source']}, {longest['hours']:,.0f} hours, at hub height"
        rows += [
            Row("conditions.mean_temperature_c", "Mean temperature", float(longest["mean_c"]),
                "degC", basis),
            Row("conditions.lowest_temperature_c", "Lowest hour", float(table["lowest_c"].min()),
                "degC", "of all sources in the temperature table"),
            Row("conditions.highest_temperature_c", "Highest hour",
                float(table["highest_c"].max()), "degC", "of all sources in the temperature table"),
        ]  # fmt: skip
    if whole_year:
        rows += [
            Row("conditions.hours_below_cold_limit", f"Hours a year below {COLD_LIMIT_C:g} °C",
                float(longest["hours_below_cold_limit_per_year"]), "h/year", basis),
            Row("conditions.days_below_cold_limit",
                f"Days a year with an hour below {COLD_LIMIT_C:g} °C",
                float(longest["days_below_cold_limit_per_year"]), "days/year", basis),
        ]  # fmt: skip
    if icing is not None:
        rows.append(
            Row("conditions.icing_hours", "Hours a year in which ice can grow", icing, "h/year",
                f"mast: {_ICING_BELOW_C:g} °C or less and {_ICING_HUMIDITY:.0%} humidity or more, "
                "months weighing the same; a mark, not a measurement of ice")
        )  # fmt: skip
    return rows


def _said(table: pd.DataFrame, icing: float | None, humidity: bool, *, whole_year: bool) -> str:
    if table.empty:
        return "Temperature is not assessed: neither the mast nor the reference has it."
    longest = table.iloc[int(table["hours"].to_numpy().argmax())]
    text = (
        f"The mean temperature at the hub is {longest['mean_c']:.1f} °C; hours lie between "
        f"{table['lowest_c'].min():.1f} and {table['highest_c'].max():.1f} °C. "
        + (
            f"A year has {longest['hours_below_cold_limit_per_year']:.1f} hours below "
            f"{COLD_LIMIT_C:g} °C."
            if whole_year
            else "That is not a whole year, so nothing is said of a year's cold hours."
        )
    )
    return text + (
        f" Ice can grow in about {icing:,.0f} hours a year."
        if icing is not None
        else " Icing hours are not assessed, since "
        + ("the mast has no whole year." if humidity else "humidity is not measured.")
    )
