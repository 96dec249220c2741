"""Figures of the measured wind, apart from the rose.

Every function takes plain arrays or frames, draws on `ax` (or a new figure) and returns it.
Nothing is computed here that the numbers of the study depend on. The rose stands in
`windkit.faces.figures_rose`, the long term in `windkit.faces.figures_long_term`; workbooks take
all of them from `windkit.faces.figures`.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.ticker import MaxNLocator
from numpy.typing import ArrayLike

from windkit.faces.look import (
    ACCENT,
    FAINT,
    INK,
    LINE_STYLES,
    MAIN,
    MUTED,
    PAGE_WIDTH,
    SERIES,
    dress,
    in_house_style,
    legend_below,
    level_room,
    line_style,
    new_axes,
    nothing_to_draw,
    percent_axis,
    recovery_colours,
)
from windkit.kernels.profile import power_law
from windkit.kernels.weibull import weibull_pdf

if TYPE_CHECKING:
    import pandas as pd

__all__ = [
    "diurnal_and_monthly",
    "pair_ratio_by_direction",
    "profile",
    "recovery_map",
    "speed_distribution",
    "turbulence_in_speed_bins",
]

_WIND_SPEED = "Wind speed [m/s]"
_DIRECTION = "Wind direction, from [°]"
#: So many months have room for their shares written level.
_MONTHS_ABREAST = 10
#: Narrowest column of the recovery map [inch].
_NARROWEST_MONTH = 0.14
_MONTHS = ("Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec")


@in_house_style
def recovery_map(
    recovery: pd.DataFrame, *, ax: Axes | None = None, title: str = "Data recovery by month"
) -> Axes:
    """Calendar of what each channel delivered.

    Parameters
    ----------
    recovery : DataFrame
        Share of valid values [1], one row a month (period, date or text), one column a channel;
        NaN where the channel was not installed.
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    months = [_month_text(month) for month in recovery.index]
    channels = [str(column) for column in recovery.columns]
    shares = recovery.to_numpy(dtype=float).T
    # On end, names and shares of many months stand beside each other without touching.
    on_end = len(months) > _MONTHS_ABREAST
    ax = new_axes(
        ax,
        width=max(PAGE_WIDTH, 1.6 + _NARROWEST_MONTH * len(months)),
        height=1.5 + 0.3 * len(channels),
    )
    dress(ax, title=title, grid=None)
    ax.pcolormesh(
        np.arange(len(months) + 1),
        np.arange(len(channels) + 1),
        np.ma.masked_invalid(shares),
        cmap=recovery_colours(),
        vmin=0.0,
        vmax=1.0,
        edgecolor="white",
        linewidth=1.6,
    )
    for (row, column), share in np.ndenumerate(shares):
        ax.text(
            column + 0.5,
            row + 0.5,
            "–" if np.isnan(share) else _floor_percent(share),
            ha="center",
            va="center",
            fontsize=7.5,
            rotation=90 if on_end else 0,
            color=INK,
        )
    if on_end:
        months = [month.replace("\n", " ") for month in months]
    ax.set_xticks(np.arange(len(months)) + 0.5, months, rotation=90 if on_end else 0)
    ax.set_yticks(np.arange(len(channels)) + 0.5, channels)
    ax.invert_yaxis()
    ax.tick_params(length=0)
    for spine in ax.spines.values():
        spine.set_visible(False)
    ax.set_xlabel("Valid values, % of those due (rounded down)\n– where nothing was due")
    return ax


@in_house_style
def speed_distribution(
    speed_edges: ArrayLike,
    share: ArrayLike,
    weibull_scale: float | None = None,
    weibull_shape: float | None = None,
    *,
    label: str = "record",
    ax: Axes | None = None,
    title: str = "Distribution of wind speed",
) -> Axes:
    """Share of time by wind speed, with the Weibull distribution that was fitted to it.

    Parameters
    ----------
    speed_edges : array_like
        Edges of the bins [m/s], shape (n + 1,).
    share : array_like
        Share of all records in each bin [1], shape (n,); drawn per m/s, because bins may differ
        in width.
    weibull_scale, weibull_shape : float, optional
        Scale A [m/s] and shape k [1].
    label : str
        What the bars are of, such as the campaign or the long term.
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    edges = np.asarray(speed_edges, dtype=float)
    width = np.diff(edges)
    ax = new_axes(ax)
    dress(ax, title=title, x=_WIND_SPEED, y="Share of time per m/s")
    ax.bar(
        edges[:-1],
        np.asarray(share, dtype=float) / width,
        width=width,
        align="edge",
        color=FAINT,
        edgecolor="white",
        linewidth=0.8,
        label=label,
    )
    if weibull_scale is not None and weibull_shape is not None:
        speeds = np.linspace(0.0, edges[-1], 400)
        ax.plot(
            speeds,
            weibull_pdf(speeds, weibull_scale, weibull_shape),
            color=MAIN,
            label=f"Weibull, A = {weibull_scale:.2f} m/s, k = {weibull_shape:.2f}",
        )
    ax.yaxis.set_major_formatter(percent_axis())
    ax.set_xlim(0.0, edges[-1])
    ax.legend(loc="upper right")
    return ax


@in_house_style
def turbulence_in_speed_bins(
    speed_centres: ArrayLike,
    mean: ArrayLike,
    representative: ArrayLike | None = None,
    *,
    ax: Axes | None = None,
    title: str = "Turbulence intensity by wind speed",
) -> Axes:
    """Mean and representative turbulence intensity.

    Parameters
    ----------
    speed_centres : array_like
        Centres of the speed bins [m/s].
    mean, representative : array_like
        Turbulence intensity [1] of each bin: its mean, and the higher value that stands for it
        in a siting check.
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    ax = new_axes(ax)
    dress(ax, title=title, x=_WIND_SPEED, y="Turbulence intensity")
    if np.size(mean) == 0:
        return nothing_to_draw(ax, "no standard deviation recorded beside the main speed")
    if representative is not None:
        ax.plot(
            speed_centres,
            representative,
            color=ACCENT,
            linestyle=LINE_STYLES[1],
            marker="s",
            markersize=3.5,
            label="representative",
        )
    ax.plot(speed_centres, mean, color=MAIN, marker="o", markersize=3.5, label="mean")
    ax.set_ylim(bottom=0.0)
    ax.set_xlim(left=0.0)
    ax.xaxis.set_major_locator(MaxNLocator(integer=True))
    ax.yaxis.set_major_formatter(percent_axis())
    ax.legend(loc="upper right")
    return ax


@in_house_style
def profile(
    height: ArrayLike,
    mean_speed: ArrayLike,
    shear_exponent: float,
    hub_height: float | None = None,
    *,
    hub_speed: float | None = None,
    ax: Axes | None = None,
    title: str = "Wind speed with height",
) -> Axes:
    """Mean speeds of the mast and the power law carried to hub height.

    Parameters
    ----------
    height, mean_speed : array_like
        Heights [m above ground] and mean speeds over the same hours [m/s].
    shear_exponent : float
        Exponent of the power law [1].
    hub_height : float, optional
        Where the rotor's centre is [m above ground].
    hub_speed : float, optional
        The study's mean speed there [m/s]; the line's own value if left out.
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    z = np.asarray(height, dtype=float)
    v = np.asarray(mean_speed, dtype=float)
    top = max(float(z.max()), hub_height or 0.0) * 1.12
    # Least squares in logarithms goes through the mean of the logarithms.
    anchor = np.exp(np.log(z).mean()), np.exp(np.log(v).mean())
    heights = np.linspace(0.05 * top, top, 200)
    ax = new_axes(ax, width=4.4, height=4.2)
    dress(ax, title=title, x="Mean wind speed [m/s]", y="Height above ground [m]", grid="both")
    line = power_law(anchor[1], anchor[0], heights, shear_exponent)
    ax.plot(line, heights, color=MUTED, label=f"power law, exponent {shear_exponent:.3f}")
    ax.plot(v, z, "o", color=MAIN, markersize=6, label="measured")
    if hub_height is not None:
        at_hub = (
            float(power_law(anchor[1], anchor[0], hub_height, shear_exponent))
            if hub_speed is None
            else hub_speed
        )
        ax.axhline(hub_height, color=ACCENT, linewidth=0.9, linestyle=LINE_STYLES[1])
        ax.plot(
            [at_hub],
            [hub_height],
            "D",
            color=ACCENT,
            markersize=6,
            label=f"hub height {hub_height:g} m: {at_hub:.2f} m/s",
        )
    ax.set_ylim(0.0, top)
    legend_below(ax, 1)
    return ax


@in_house_style
def diurnal_and_monthly(
    diurnal: pd.DataFrame,
    monthly: pd.DataFrame,
    *,
    ax: Sequence[Axes] | None = None,
    hours_in: str = "UTC",
) -> tuple[Axes, Axes]:
    """Mean speed by hour of the day and by month of the year, side by side.

    Parameters
    ----------
    diurnal : DataFrame
        Mean speeds [m/s], index the hour 0 to 23, one column a channel.
    monthly : DataFrame
        Mean speeds [m/s], index the month 1 to 12, the same columns.
    ax : two Axes, optional
        Where to draw.
    hours_in : str
        What clock the hours are in.
    """
    import matplotlib.pyplot as plt

    pair = plt.subplots(1, 2, figsize=(PAGE_WIDTH, 3.1), sharey=True)[1] if ax is None else ax
    day, year = pair[0], pair[1]
    dress(day, title="By hour of the day", x=f"Hour, {hours_in}", y="Mean wind speed [m/s]")
    dress(year, title="By month", x="Month")
    for position, column in enumerate(diurnal.columns):
        style = line_style(position)
        day.plot(diurnal.index, diurnal[column], label=str(column), **style)
        if column in monthly.columns:
            year.plot(monthly.index, monthly[column], marker="o", markersize=3.5, **style)
    day.set_xticks(range(0, 25, 6))
    day.set_xlim(-0.5, 23.5)
    year.set_xticks(range(1, 13), [month[0] for month in _MONTHS])
    level_room(day)
    legend_below(day, len(diurnal.columns))
    return day, year


@in_house_style
def pair_ratio_by_direction(
    wind_direction: ArrayLike,
    ratio: ArrayLike,
    *,
    boom_bearings: Mapping[str, float] | None = None,
    label: str = "Ratio of mean speeds",
    ax: Axes | None = None,
    title: str = "Two sensors at one height",
) -> Axes:
    """How two sensors at one height compare by direction: the mast's shadow shows as a spike.

    Parameters
    ----------
    wind_direction : array_like
        Centres of the direction bins [deg].
    ratio : array_like
        Mean speed of one sensor over that of the other [1].
    boom_bearings : mapping of name to deg, optional
        Where the booms point; the shadow of the mast lies opposite.
    label : str
        What the ratio is of.
    ax : Axes, optional
        Where to draw.
    title : str
        Heading.
    """
    values = np.asarray(ratio, dtype=float)
    ax = new_axes(ax)
    dress(ax, title=title, x=_DIRECTION, y=label)
    if values.size == 0:
        return nothing_to_draw(ax, "one sensor only at this height")
    ax.axhline(1.0, color=MUTED, linewidth=0.9)
    for position, (name, bearing) in enumerate((boom_bearings or {}).items()):
        shadow = (bearing + 180.0) % 360.0
        ax.axvline(
            shadow,
            color=SERIES[(position + 1) % len(SERIES)],
            linestyle=LINE_STYLES[(position + 1) % len(LINE_STYLES)],
            linewidth=1.2,
            label=f"{name} behind the mast, {shadow:.0f}°",
        )
    ax.plot(wind_direction, values, color=MAIN, marker="o", markersize=3)
    reach = max(float(np.nanmax(np.abs(values - 1.0))) * 1.2, 0.02)
    ax.set_ylim(1.0 - reach, 1.0 + reach)
    ax.set_xlim(0.0, 360.0)
    ax.set_xticks(range(0, 361, 45))
    if boom_bearings:
        legend_below(ax, len(boom_bearings))
    return ax


def _floor_percent(share: float) -> str:
    # 99.96 % must not read as a full month.
    return str(int(np.floor(100 * share + 1e-9)))


def _month_text(month: Any) -> str:
    if written := re.fullmatch(r"(\d{4})-(\d\d)", str(month)):
        return f"{_MONTHS[int(written[2]) - 1]}\n{written[1][2:]}"
    if hasattr(month, "year") and hasattr(month, "month"):
        return f"{_MONTHS[month.month - 1]}\n{month.year % 100:02d}"
    return str(month)
